//go:build linux || darwin || freebsd || netbsd || openbsd || dragonfly

package session

import (
	"io"
	"log"
	"os"
	"sync"
	"syscall"
)

// A pipe stands in for the standard output or the standard error.
type pipe struct {
	which int      // 0 or 1
	saved *os.File // where descriptor which+1 led
	write *os.File // the standard error for Go code; nil for the standard output
	old   *os.File // os.Stderr as it was; if it were forgotten, its finalizer would close descriptor 2
	end   *os.File // where to read; does not block
	raw   syscall.RawConn

	mu     sync.Mutex     // held while text is read and delivered, so that it is delivered in order
	buffer [32 << 10]byte // guarded by mu
	to     func([]byte)   // guarded by mu
	undone bool           // guarded by mu
}

func newPipe(which int) (_ *pipe, err error) {
	p := &pipe{which: which}
	saved, err := syscall.Dup(which + 1)
	if err != nil {
		return nil, err
	}
	syscall.CloseOnExec(saved)
	p.saved = os.NewFile(uintptr(saved), standard(which).Name())
	defer func() {
		if err != nil {
			p.saved.Close()
		}
	}()
	// Not os.Pipe: its writing end does not block, which those who write to descriptor 1 do not expect.
	var ends [2]int
	if err := syscall.Pipe(ends[:]); err != nil {
		return nil, err
	}
	syscall.CloseOnExec(ends[0])
	syscall.CloseOnExec(ends[1])
	write := os.NewFile(uintptr(ends[1]), standard(which).Name())
	err = syscall.SetNonblock(ends[0], true)
	p.end = os.NewFile(uintptr(ends[0]), "pipe")
	if err == nil {
		p.raw, err = p.end.SyscallConn()
	}
	if err == nil && which == 0 {
		err = duplicate(ends[1], 1)
	}
	if err != nil {
		p.end.Close()
		write.Close()
		return nil, err
	}
	if which == 0 {
		write.Close()
		return p, nil
	}
	p.write, p.old = write, os.Stderr
	os.Stderr = write
	log.SetOutput(write)
	return p, nil
}

func standard(which int) *os.File { return [...]*os.File{os.Stdout, os.Stderr}[which] }

func (p *pipe) original() *os.File { return p.saved }

// leadErrors lets descriptor 2, which Go code does not write to any more, lead to a file.
func leadErrors(to *os.File) error { return duplicate(int(to.Fd()), 2) }

// start delivers what is written from now on.
func (p *pipe) start(to func([]byte)) {
	p.mu.Lock()
	p.to = to
	p.mu.Unlock()
	go p.raw.Read(func(fd uintptr) (done bool) {
		for {
			switch p.drain(int(fd)) {
			case nil: // there is more, and nobody will say so again
			case syscall.EAGAIN:
				return false // call again when there is more
			default:
				return true
			}
		}
	})
}

// catchUp delivers what has been written.
func (p *pipe) catchUp() {
	p.raw.Control(func(fd uintptr) { p.drain(int(fd)) })
}

// drain delivers until nothing is left, and returns EAGAIN, or until so much has come that whoever asked has everything
// that had been written by then, more than a pipe holds, and returns nil. At the end of the pipe it returns io.EOF.
func (p *pipe) drain(fd int) error {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.to == nil || p.undone {
		return io.EOF
	}
	const most = 1 << 20
	for total := 0; total < most; {
		n, err := syscall.Read(fd, p.buffer[:])
		switch {
		case err == syscall.EINTR:
		case err != nil:
			return err
		case n == 0:
			return io.EOF
		default:
			p.to(p.buffer[:n])
			total += n
		}
	}
	return nil
}

// restore delivers the rest and puts everything back; twice does no harm.
func (p *pipe) restore() {
	p.catchUp()
	p.mu.Lock()
	undone := p.undone
	p.undone = true
	p.mu.Unlock()
	if undone {
		return
	}
	duplicate(int(p.saved.Fd()), p.which+1)
	if p.write != nil {
		os.Stderr = p.old
		log.SetOutput(p.old)
		p.write.Close()
	}
	p.end.Close() // waits for those who drain it
}
