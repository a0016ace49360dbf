package session

import (
	"log"
	"os"
	"sync"
	"syscall"
	"time"
	"unsafe"
)

var (
	kernel32      = syscall.NewLazyDLL("kernel32.dll")
	peekNamedPipe = kernel32.NewProc("PeekNamedPipe")
	setStdHandle  = kernel32.NewProc("SetStdHandle")
)

// A pipe stands in for the standard output or error. Windows has no dup2: what is replaced is the handle that is looked
// up by name and the variable of package os, so that Go code and processes started later write to the pipe.
type pipe struct {
	name   int       // of the standard handle
	file   **os.File // the variable of package os
	saved  *os.File
	handle syscall.Handle // saved's, as it was looked up
	end    *os.File       // where to read
	write  *os.File

	mu     sync.Mutex     // held while text is read and delivered, so that it is delivered in order
	buffer [32 << 10]byte // guarded by mu
	to     func([]byte)   // guarded by mu
	undone bool           // guarded by mu
}

func newPipe(which int) (*pipe, error) {
	p := &pipe{name: syscall.STD_OUTPUT_HANDLE, file: &os.Stdout, handle: syscall.Stdout}
	if which == 1 {
		p.name, p.file, p.handle = syscall.STD_ERROR_HANDLE, &os.Stderr, syscall.Stderr
	}
	var err error
	if p.end, p.write, err = os.Pipe(); err != nil {
		return nil, err
	}
	p.saved = *p.file
	p.point(p.write, syscall.Handle(p.write.Fd()))
	return p, nil
}

func (p *pipe) point(file *os.File, handle syscall.Handle) {
	*p.file = file
	setStdHandle.Call(uintptr(p.name), uintptr(handle))
	if p.file == &os.Stderr {
		log.SetOutput(file)
	}
}

func (p *pipe) original() *os.File { return p.saved }

// leadErrors lets the handle of the standard error, which Go code does not look up any more, lead to a file.
func leadErrors(to *os.File) error {
	name := syscall.STD_ERROR_HANDLE
	if ok, _, err := setStdHandle.Call(uintptr(name), to.Fd()); ok == 0 {
		return err
	}
	return nil
}

// start delivers what is written from now on.
func (p *pipe) start(to func([]byte)) {
	p.mu.Lock()
	p.to = to
	p.mu.Unlock()
	go func() {
		for range time.Tick(10 * time.Millisecond) {
			if !p.drain() {
				return
			}
		}
	}()
}

// catchUp delivers what has been written.
func (p *pipe) catchUp() { p.drain() }

// drain delivers until nothing is left, or until more has come than a pipe holds. It reports whether more may come.
func (p *pipe) drain() bool {
	p.mu.Lock()
	defer p.mu.Unlock()
	const most = 1 << 20
	for total := 0; p.to != nil && !p.undone && total < most; {
		var there uint32
		ok, _, _ := peekNamedPipe.Call(p.end.Fd(), 0, 0, 0, uintptr(unsafe.Pointer(&there)), 0)
		if ok == 0 {
			return false
		}
		if there == 0 {
			break
		}
		n, err := p.end.Read(p.buffer[:min(int(there), len(p.buffer))])
		if err != nil {
			return false
		}
		p.to(p.buffer[:n])
		total += n
	}
	return !p.undone
}

// restore delivers the rest and puts everything back; twice does no harm.
func (p *pipe) restore() {
	p.catchUp()
	p.mu.Lock()
	undone := p.undone
	p.undone = true
	p.mu.Unlock()
	if !undone {
		p.point(p.saved, p.handle)
		p.write.Close()
		p.end.Close()
	}
}
