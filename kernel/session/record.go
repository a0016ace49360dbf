package session

import "os"

const (
	recordFrom = 1 << 20   // bytes from which a cell's text is kept in a file beside being sent
	recordStep = 256 << 10 // bytes that are written to the file at a time
	recordMost = 1 << 30   // bytes of a cell's text that are kept: a cell that prints for ever must not fill the disk
)

// A record keeps the text of a cell as long as it may still grow beyond what is sent. Only a file that was asked for
// outlives the cell.
type record struct {
	tail []byte   // the text, or what of it is not in the file yet
	file *os.File // nil while the text is short
	size int      // bytes kept
	kept bool     // the file outlives the cell
	full bool     // nothing more is kept
	lost string   // why there is no file, where none could be made
}

func (r *record) add(p []byte) {
	if r.full {
		return
	}
	p = p[:min(len(p), recordMost-r.size)]
	r.tail = append(r.tail, p...)
	r.size += len(p)
	r.full = r.size == recordMost
	if r.file == nil && r.size > recordFrom {
		f, err := os.CreateTemp("", "linewright-*.txt")
		if err != nil {
			*r = record{full: true, lost: "no file can be written"}
			return
		}
		r.file = f
	}
	if r.file != nil && (len(r.tail) >= recordStep || r.full) {
		r.write()
	}
}

// write brings the file, if there is one, up to date. Nothing more is kept when it cannot: a disk may be full.
func (r *record) write() {
	if r.file == nil {
		return
	}
	n, err := r.file.Write(r.tail)
	if err != nil {
		r.size -= len(r.tail) - n
		r.full = true
	}
	r.tail = r.tail[:0]
}

// keep lets the file outlive the cell and returns its path, or "" where there is none.
func (r *record) keep() string {
	if r.file == nil {
		return ""
	}
	r.write()
	r.kept = true
	return r.file.Name()
}

// end forgets the text. What goroutines put out later is not kept: nobody would say when to remove it.
func (r *record) end() {
	if r.file != nil {
		r.file.Close()
		if !r.kept {
			os.Remove(r.file.Name())
		}
	}
	*r = record{full: true, lost: "its cell has ended"}
}
