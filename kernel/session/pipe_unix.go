//go:build linux || darwin || freebsd || netbsd || openbsd || dragonfly

package session

import (
	"os"
	"sync"
	"syscall"
)

// A pipe stands in for one of the descriptors 1 and 2.
type pipe struct {
	fd    int      // 1 or 2
	saved *os.File // what the descriptor was
	end   *os.File // where to read what is written to it; does not block
	raw   syscall.RawConn

	mu     sync.Mutex     // held while text is read and delivered, so that it is delivered in order
	buffer [32 << 10]byte // guarded by mu
	to     func([]byte)   // guarded by mu
	undone bool           // guarded by mu
}

func newPipe(which int) (_ *pipe, err error) {
	p := &pipe{fd: which + 1}
	saved, err := syscall.Dup(p.fd)
	if err != nil {
		return nil, err
	}
	syscall.CloseOnExec(saved)
	p.saved = os.NewFile(uintptr(saved), [...]string{os.Stdout.Name(), os.Stderr.Name()}[which])
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
	defer syscall.Close(ends[1])
	if err := syscall.SetNonblock(ends[0], true); err != nil {
		syscall.Close(ends[0])
		return nil, err
	}
	syscall.CloseOnExec(ends[0])
	p.end = os.NewFile(uintptr(ends[0]), "pipe")
	if p.raw, err = p.end.SyscallConn(); err == nil {
		err = duplicate(ends[1], p.fd)
	}
	if err != nil {
		p.end.Close()
		return nil, err
	}
	return p, nil
}

func (p *pipe) original() *os.File { return p.saved }

// start delivers what is written from now on.
func (p *pipe) start(to func([]byte)) {
	p.mu.Lock()
	p.to = to
	p.mu.Unlock()
	go p.raw.Read(func(fd uintptr) (done bool) {
		return p.drain(int(fd)) != syscall.EAGAIN // EAGAIN: call again when there is more
	})
}

// catchUp delivers what has been written.
func (p *pipe) catchUp() {
	p.raw.Control(func(fd uintptr) { p.drain(int(fd)) })
}

// drain delivers until nothing is left, or until so much has come that whoever asked has everything that had been
// written by then: more than a pipe holds.
func (p *pipe) drain(fd int) error {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.to == nil || p.undone {
		return nil
	}
	const most = 1 << 20
	for total := 0; total < most; {
		n, err := syscall.Read(fd, p.buffer[:])
		switch {
		case err == syscall.EINTR:
		case err != nil:
			return err
		case n == 0:
			return nil
		default:
			p.to(p.buffer[:n])
			total += n
		}
	}
	return syscall.EAGAIN
}

// restore delivers the rest and puts the descriptor back.
func (p *pipe) restore() {
	p.catchUp()
	p.mu.Lock()
	defer p.mu.Unlock()
	if !p.undone {
		p.undone = true
		duplicate(int(p.saved.Fd()), p.fd)
		p.end.Close()
	}
}
