package session

import (
	"context"
	"fmt"
	"io"
	"log/slog"
	"os"
	"os/signal"
	"runtime"
	"sync/atomic"
	"syscall"

	"linewright/kernel/cell"
	"linewright/kernel/wire"
)

// Options are what a kernel is told beside its connection file.
type Options struct {
	Version    string            // of the kernel; empty stands for "devel"
	Parameters map[string]string // texts that the run sets for parameters of the page, by name
}

// Serve runs a kernel on the channels that a connection file names, until it is told to shut down by a request, by
// SIGTERM or by the end of ctx; then it returns nil. It returns an error if it cannot start, and when the process that
// started it (JPY_PARENT_PID) is gone. os.Exit of a cell ends the process within Serve, with the cell's code and with its
// output delivered.
//
// A kernel is one per process: Serve takes the descriptors 1 and 2, os.Stderr and the signals of the process, and
// gives them back when it returns.
func Serve(ctx context.Context, connectionFile string, opt Options) error {
	c, err := wire.ReadConnection(connectionFile)
	if err != nil {
		return err
	}
	if opt.Version == "" {
		opt.Version = "devel"
	}
	// The heartbeat has to be answered while cells burn every core: with more threads than cores the system shares them
	// out, where the Go scheduler alone would let it wait for 10 ms time slices.
	runtime.GOMAXPROCS(max(8, runtime.NumCPU()))

	desc, err := captureDescriptors()
	if err != nil {
		return fmt.Errorf("session: cannot capture the standard output: %w", err)
	}
	defer desc.restore()
	log := slog.New(slog.NewTextHandler(desc.stderr, nil))
	server, err := wire.Listen(c, log)
	if err != nil {
		return err
	}
	defer server.Close()
	desc.crash = openCrash(connectionFile, log)

	k := newKernel(server, log, func() (interpreter, error) { return cell.New(cell.Options{Parameters: opt.Parameters}) })
	k.version = opt.Version
	k.notice = desc.crash.notice
	k.capture = desc
	k.exit = func(code int) {
		desc.restore()
		os.Exit(code)
	}
	desc.deliver(func(which int, p []byte) {
		if out := k.current.Load(); out != nil {
			out.write(which, p)
			return
		}
		desc.stderr.Write(p) // before the first cell
	})

	ctx, stop := signal.NotifyContext(ctx, syscall.SIGTERM)
	defer stop()
	interrupts := make(chan os.Signal, 1)
	signal.Notify(interrupts, os.Interrupt)
	defer signal.Stop(interrupts)
	go func() {
		for {
			select {
			case <-interrupts:
				k.interrupt()
			case <-ctx.Done():
				return
			}
		}
	}()
	go func() {
		if pid, gone := parentGone(ctx); gone {
			k.end(fmt.Errorf("session: the process %s that started this kernel is gone", pid))
		}
	}()
	return k.run(ctx)
}

// A descriptors is the standard output and error of the process, turned into pipes whose content goes to cells. What Go
// code writes to the standard error goes through a pipe of its own; descriptor 2 is left to the runtime's last words.
type descriptors struct {
	stderr io.Writer // where the standard error went before; the log goes on there
	pipes  [2]*pipe
	crash  *crash
	to     func(which int, p []byte)
	quiet  atomic.Int32 // glances since something came through the pipes, or since a cell began
}

// attentive is how many glances are real ones before most are not: a look at the pipes costs two system calls, twenty
// times what it costs to take a line of the interpreter. A cell that writes both ways is found out before, and its text
// is in order.
const attentive = 1000

// captureDescriptors redirects the descriptors. What comes through them waits until deliver is called.
func captureDescriptors() (*descriptors, error) {
	d := &descriptors{crash: &crash{}}
	for i := range d.pipes {
		p, err := newPipe(i)
		if err != nil {
			d.restore()
			return nil, err
		}
		d.pipes[i] = p
	}
	d.stderr = d.pipes[1].original()
	return d, nil
}

func (d *descriptors) deliver(to func(which int, p []byte)) {
	d.to = to
	for i, p := range d.pipes {
		p.start(func(text []byte) {
			d.quiet.Store(0)
			to(i, text)
		})
	}
}

// glance delivers what Go code has written so far, but looks seldom where nothing comes.
func (d *descriptors) glance() {
	if n := d.quiet.Add(1); n <= attentive || n%64 == 0 {
		d.catchUp()
	}
}

// catchUp delivers what Go code has written so far.
func (d *descriptors) catchUp() {
	for _, p := range d.pipes {
		p.catchUp()
	}
}

// settle delivers all that has been written so far.
func (d *descriptors) settle() {
	d.catchUp()
	d.quiet.Store(0)
	if text := d.crash.rest(); len(text) > 0 {
		d.to(1, text)
	}
}

// restore undoes the redirection; twice does no harm.
func (d *descriptors) restore() {
	for _, p := range d.pipes {
		if p != nil {
			p.restore()
		}
	}
	d.crash.close()
}
