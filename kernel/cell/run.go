package cell

import (
	"context"
	"errors"
	"fmt"
	"go/scanner"
	"runtime"
	"strings"
	"time"

	"github.com/traefik/yaegi/interp"

	"linewright/builtins/page"
	"linewright/plotting"
)

// run is one execution of one cell.
type run struct {
	in     *Interpreter
	n      int
	code   string
	cellID string
	out    Output
	ctx    context.Context
	cancel context.CancelCauseFunc

	unlink func() bool // stops watching the caller's context

	program *program
	bundle  *plotting.Bundle // what the last expression showed
	failure error            // what the last expression failed with

	shown map[string]bool // slots shown by this run; under pageState.mu
}

func (in *Interpreter) begin(ctx context.Context, n int, code, cellID string, out Output) *run {
	r := &run{in: in, n: n, code: code, cellID: cellID, out: out, shown: map[string]bool{}}
	// The cell's goroutines may outlive it, so its end does not cancel their context; an interrupt does.
	r.ctx, r.cancel = context.WithCancelCause(context.WithoutCancel(ctx))
	r.unlink = context.AfterFunc(ctx, func() { r.cancel(context.Cause(ctx)) })
	in.current.Store(r)
	in.vm.forget()
	for _, n := range in.notes {
		out.Stream("stderr", []byte(n+"\n"))
	}
	in.notes = nil
	page.Attach(host{in})
	return r
}

// end is called when the cell has been answered.
func (r *run) end() { r.unlink() }

// execute calls the compiled cell.
func (in *Interpreter) execute(r *run, p *program) (*plotting.Bundle, error) {
	r.program = p
	if p.entry == "" {
		return nil, nil
	}
	call, err := in.vm.call(p.entry)
	if err != nil {
		return nil, r.compileError(err)
	}
	*in.serial = p.serial
	done := make(chan error, 1)
	go func() {
		var err error
		defer func() { done <- err }() // also if the cell ends its goroutine
		defer in.goroutines.enter(r)()
		err = r.call(call)
	}()
	in.watch()
	select {
	case err := <-done:
		switch {
		case r.ctx.Err() != nil:
			done <- nil
			in.stop(r, done)
			return nil, r.stopped()
		case err != nil:
			return nil, err
		case r.failure != nil:
			return nil, r.failed(r.failure)
		}
		return r.bundle, nil
	case <-r.ctx.Done():
		in.stop(r, done)
		return nil, r.stopped()
	}
}

// call runs the cell's function in its own goroutine.
func (r *run) call(call func() error) error {
	err := call()
	var p interp.Panic
	if errors.As(err, &p) {
		return r.in.panicError(p.Value)
	}
	if err != nil {
		msg := clean(err.Error())
		return &Error{Name: "error", Value: msg, Trace: []string{msg}}
	}
	return nil
}

// patience is how long an interrupted cell may take to come to rest before the next one starts without waiting for it;
// the goroutines of earlier cells get less.
const (
	patience      = time.Second
	otherPatience = 20 * time.Millisecond
)

// stop ends all interpreted code: the running cell r, whose goroutine says so on done, and the goroutines of all cells. It
// does not wait; the next cell does, and takes in.notes.
func (in *Interpreter) stop(r *run, done chan error) {
	id := in.vm.stop()
	for _, other := range in.goroutines.runs() {
		other.cancel(context.Canceled)
	}
	before := in.goroutines.others.Load()
	settled := make(chan struct{})
	in.settled = settled
	go func() {
		defer close(settled)
		defer in.vm.restore(id)
		start := time.Now()
		ended := false
		for {
			in.vm.wake()
			select {
			case <-done:
				ended = true
			case <-time.After(time.Millisecond):
			}
			waited := time.Since(start)
			others := otherPatience
			if errors.Is(context.Cause(r.ctx), errStack) {
				others = patience // they have deep stacks to leave, and would trip the watchdog again
			}
			if ended && (in.goroutines.others.Load() == 0 || waited > others) || waited > patience {
				break
			}
		}
		if n := before - in.goroutines.others.Load(); n > 0 {
			in.notes = append(in.notes, fmt.Sprintf("the interrupt of cell[%d] also stopped %s that cells had started", r.n, count(n, "goroutine")))
		}
		if !ended {
			in.notes = append(in.notes, fmt.Sprintf("cell[%d] was interrupted while it waited in compiled code; that call goes on until it returns, then the cell ends", r.n))
			in.goroutines.others.Add(1)
			go func() {
				<-done
				in.goroutines.others.Add(-1)
			}()
		}
	}()
}

func count(n int64, what string) string {
	if n == 1 {
		return "a " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

// stopped is the error of a cell that was interrupted, by the reader or by the watchdog.
func (r *run) stopped() error {
	if err := context.Cause(r.ctx); errors.Is(err, errStack) {
		return &Error{Name: "panic", Value: err.Error(), Trace: []string{"panic: " + err.Error()}}
	}
	return &Error{Name: "interrupted", Value: "interrupted", Trace: []string{"interrupted"}}
}

// leave ends a cell's goroutine that was left behind by an interrupt and has woken up.
func (in *Interpreter) leave() { runtime.Goexit() }

// failed is the error of a cell whose last expression is an error.
func (r *run) failed(err error) error {
	msg := goWords.Replace(err.Error())
	return &Error{Name: "error", Value: msg, Trace: []string{msg}}
}

// compileError is the error of a cell that did not compile: each finding with its line and a mark under the place.
func (r *run) compileError(err error) error {
	var list scanner.ErrorList
	if !errors.As(err, &list) {
		msg := clean(err.Error())
		return &Error{Name: "compile error", Value: msg, Trace: []string{msg}}
	}
	lines := strings.Split(r.code, "\n")
	e := &Error{Name: "compile error"}
	for i, f := range list {
		if i == 10 {
			e.Trace = append(e.Trace, fmt.Sprintf("and %d more", len(list)-i))
			break
		}
		text := clean(f.Error())
		if i == 0 {
			e.Value = text
		}
		e.Trace = append(e.Trace, text)
		if f.Pos.Filename == file(r.n) && f.Pos.Line >= 1 && f.Pos.Line <= len(lines) {
			line := lines[f.Pos.Line-1]
			if c := f.Pos.Column - 1; c >= 0 && c <= len(line) {
				e.Trace = append(e.Trace, "    "+line, "    "+indent(line[:c])+"^")
			}
		}
	}
	return e
}

// indent returns spaces as wide as s, with its tabs.
func indent(s string) string {
	return strings.Map(func(r rune) rune {
		if r == '\t' {
			return r
		}
		return ' '
	}, s)
}

// clean takes out of a message what belongs to the interpreter: file names, generations.
func clean(s string) string {
	return strings.ReplaceAll(plain(s), "/_.go:", ":")
}
