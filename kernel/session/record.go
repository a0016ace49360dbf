package session

import "os"

const (
	recordFrom = 1 << 20 // bytes from which a cell's text is kept in a file beside being sent
	recordMost = 1 << 30 // bytes of a cell's text that are kept: a cell that prints for ever must not fill the disk
)

// A record keeps the text of a cell as long as it may still grow beyond what is sent. Only a file that was asked for
// outlives the cell.
type record struct {
	head []byte   // the text, while it is short
	file *os.File // the text, when it is not
	size int      // bytes kept
	kept bool     // the file outlives the cell
	full bool     // nothing more is kept
}

func (r *record) add(p []byte) {
	if r.full {
		return
	}
	if r.file == nil && r.size+len(p) <= recordFrom {
		r.head = append(r.head, p...)
		r.size += len(p)
		return
	}
	if r.file == nil {
		f, err := os.CreateTemp("", "linewright-*.txt")
		if err != nil {
			*r = record{full: true}
			return
		}
		r.file = f
		if _, err := f.Write(r.head); err != nil {
			r.remove()
			*r = record{full: true}
			return
		}
		r.head = nil
	}
	most := min(len(p), recordMost-r.size)
	n, err := r.file.Write(p[:most])
	r.size += n
	r.full = err != nil || r.size == recordMost // a disk may be full before
}

// keep lets the file outlive the cell and returns its path, or "" where there is none.
func (r *record) keep() string {
	if r.file == nil {
		return ""
	}
	r.kept = true
	return r.file.Name()
}

func (r *record) remove() {
	if r.file != nil {
		r.file.Close()
		if !r.kept {
			os.Remove(r.file.Name())
		}
	}
}

// end forgets the text.
func (r *record) end() {
	r.remove()
	*r = record{}
}
