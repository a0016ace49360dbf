package session

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"runtime/debug"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"linewright/kernel/cell"
	"linewright/kernel/wire"
	"linewright/plotting"
)

// interpreter is what a kernel needs of [cell.Interpreter].
type interpreter interface {
	Run(ctx context.Context, n int, code, cellID string, out cell.Output) (*plotting.Bundle, error)
	Evaluate(ctx context.Context, expr string, out cell.Output) (plotting.Bundle, error)
	Asked() []string
	IsComplete(code string) (status, indent string)
	Complete(code string, cursor int) cell.Completion
	Inspect(code string, cursor, detail int) (plotting.Bundle, bool)
}

var (
	errInterrupted = errors.New("interrupted")
	errShutdown    = errors.New("the kernel shuts down")
)

// farewell is how long a running cell has to answer with its failure when the kernel shuts down, and how long peers have
// to take what was sent.
const (
	farewell = 500 * time.Millisecond
	linger   = 2 * time.Second
)

// A kernel answers the requests that come over the channels.
type kernel struct {
	wire    *wire.Server
	log     *slog.Logger
	version string                      // of the kernel, for kernel_info
	start   func() (interpreter, error) // waits until the interpreter is there
	exit    func(code int)              // ends the process, for os.Exit of a cell
	capture capture
	notice  string                     // for stderr of the first cell; owned by the executing goroutine
	count   int                        // of the last numbered cell; owned by the executing goroutine
	queue   *wire.Queue[*wire.Message] // execute requests
	current atomic.Pointer[output]     // of the cell that runs or ran last
	history history
	space   *space

	questions questions

	ended chan struct{} // closed by end
	once  sync.Once
	err   error // why the kernel ends; written before ended is closed

	mu     sync.Mutex
	cancel context.CancelCauseFunc // of the cell that runs, or nil; guarded by mu
	idle   chan struct{}           // closed when the cell that runs has been answered; guarded by mu
}

// A capture brings what was written to the descriptors of the process to the current output.
type capture interface {
	glance()  // what Go code wrote, or nothing if that has not happened for long; before every text of the interpreter
	catchUp() // what Go code wrote; before anything else that a cell puts out
	settle()  // everything; between cells
}

// noCapture stands for descriptors that are left alone.
type noCapture struct{}

func (noCapture) glance()  {}
func (noCapture) catchUp() {}
func (noCapture) settle()  {}

func newKernel(server *wire.Server, log *slog.Logger, start func() (interpreter, error)) *kernel {
	k := &kernel{
		wire: server, log: log, start: sync.OnceValues(start), capture: noCapture{}, space: newSpace(),
		queue: wire.NewQueue[*wire.Message](), ended: make(chan struct{}),
	}
	k.questions.turn = make(chan struct{}, 1)
	return k
}

// run answers until the kernel is told to end, and says why it ended: nil after a shutdown.
func (k *kernel) run(ctx context.Context) error {
	life, cancel := context.WithCancel(ctx)
	defer cancel()
	defer k.space.close()
	k.publish(nil, "status", status{"starting"})
	go func() { // at once, and not only for the first cell: it takes longer than everything else
		if _, err := k.start(); err != nil {
			k.end(fmt.Errorf("session: no interpreter: %w", err))
		}
	}()
	go k.listen(life, wire.Shell)
	go k.listen(life, wire.Control)
	go k.listenForAnswers(life)
	go k.work(life)
	select {
	case <-k.ended:
	case <-ctx.Done():
		k.end(nil)
	}
	k.stopCell()
	k.wire.Drain(linger)
	return k.err
}

// end lets run return.
func (k *kernel) end(err error) {
	k.once.Do(func() {
		k.err = err
		close(k.ended)
	})
}

// interrupt cancels the cell that runs. Where none runs there is nothing to interrupt, and nothing is kept for the next.
func (k *kernel) interrupt() {
	k.mu.Lock()
	defer k.mu.Unlock()
	if k.cancel != nil {
		k.cancel(errInterrupted)
	}
}

// stopCell cancels the cell that runs and waits a little for its reply; those that wait are not run any more.
func (k *kernel) stopCell() {
	waiting := k.queue.Take()
	k.mu.Lock()
	idle := k.idle
	if k.cancel != nil {
		k.cancel(errShutdown)
	}
	k.mu.Unlock()
	if idle != nil {
		select {
		case <-idle:
		case <-time.After(farewell):
		}
	}
	k.abort(waiting)
}

// listen answers what comes on shell or control.
func (k *kernel) listen(life context.Context, ch wire.Channel) {
	for {
		m, ok := k.wire.Receive(life, ch)
		if !ok {
			return
		}
		if ch == wire.Shell && m.Type == "execute_request" {
			k.queue.Put(m)
			continue
		}
		k.answer(ch, m)
	}
}

// answer answers any request but that to execute.
func (k *kernel) answer(ch wire.Channel, m *wire.Message) {
	if m.Type == "interrupt_request" {
		k.interrupt() // before anything is sent, which may have to wait for slow readers
	}
	k.publish(m, "status", status{"busy"})
	content, err := k.handle(ch, m)
	if err != nil {
		content = failure("bad request", err)
	}
	if name, ok := strings.CutSuffix(m.Type, "_request"); ok { // comm messages have no reply
		k.reply(ch, m, name+"_reply", nil, content)
	}
	leaving := m.Type == "shutdown_request" && err == nil
	if leaving {
		k.publish(m, "shutdown_reply", content)
	}
	k.publish(m, "status", status{"idle"})
	if leaving {
		k.end(nil)
	}
}

// handle does the work of a request. A request that the kernel gets wrong must not end the session, so a panic becomes
// an error.
func (k *kernel) handle(ch wire.Channel, m *wire.Message) (content any, err error) {
	defer func() {
		if v := recover(); v != nil {
			k.log.Error("panic in the kernel", "request", m.Type, "panic", v, "stack", string(debug.Stack()))
			err = fmt.Errorf("the kernel failed on %s: %v", m.Type, v)
		}
	}()
	handle, ok := requests[m.Type]
	if !ok {
		k.log.Warn("unknown message", "channel", ch.String(), "type", m.Type)
		return nil, fmt.Errorf("this kernel has no answer to %s on %s", m.Type, ch)
	}
	return handle(k, m)
}

type status struct {
	State string `json:"execution_state"`
}

func (k *kernel) publish(parent *wire.Message, kind string, content any) {
	if err := k.wire.Publish(parent, kind, content); err != nil {
		k.log.Error("cannot publish", "type", kind, "error", err)
	}
}

func (k *kernel) reply(ch wire.Channel, to *wire.Message, kind string, metadata, content any) {
	if _, err := k.wire.Reply(ch, to, kind, metadata, content); err != nil {
		k.log.Error("cannot reply", "type", kind, "error", err)
	}
}

// failed is the part of a reply or an error message that says what went wrong.
type failed struct {
	Status string   `json:"status,omitempty"`
	Name   string   `json:"ename"`
	Value  string   `json:"evalue"`
	Trace  []string `json:"traceback"`
}

func failure(name string, err error) failed {
	f := failed{Status: "error", Name: name, Value: err.Error()}
	var e *cell.Error
	if errors.As(err, &e) {
		f.Name, f.Value, f.Trace = e.Name, e.Value, e.Trace
	}
	if len(f.Trace) == 0 {
		f.Trace = []string{f.Name + ": " + f.Value}
	}
	return f
}
