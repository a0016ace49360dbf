package cell

import (
	"context"
	"errors"
	"fmt"
	"go/scanner"
	"strings"
	"sync"
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

	mu    sync.Mutex
	shown map[string]bool // slots shown by this run
}

func (in *Interpreter) begin(ctx context.Context, n int, code, cellID string, out Output) *run {
	r := &run{in: in, n: n, code: code, cellID: cellID, out: out, shown: map[string]bool{}}
	// The cell's goroutines may outlive it, so its end does not cancel their context; an interrupt does.
	r.ctx, r.cancel = context.WithCancelCause(context.WithoutCancel(ctx))
	r.unlink = context.AfterFunc(ctx, func() { r.cancel(context.Cause(ctx)) })
	in.current.Store(r)
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
	done := make(chan error, 1)
	go func() {
		defer in.goroutines.enter(r)()
		done <- r.call(p.entry)
	}()
	select {
	case err := <-done:
		switch {
		case r.ctx.Err() != nil:
			return nil, r.interrupted()
		case err != nil:
			return nil, err
		case r.failure != nil:
			return nil, r.failed(r.failure)
		}
		return r.bundle, nil
	case <-r.ctx.Done():
		in.stop(done)
		return nil, r.interrupted()
	}
}

// call runs the cell's function in its own goroutine.
func (r *run) call(entry string) error {
	err := r.in.vm.call(entry)
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

// patience is how long an interrupted cell may take to come to rest before the next one starts without waiting for it.
const patience = time.Second

// stop ends all interpreted code. It does not wait: the next cell does.
func (in *Interpreter) stop(done <-chan error) {
	id := in.vm.stop()
	for _, r := range in.goroutines.runs() {
		r.cancel(context.Canceled)
	}
	settled := make(chan struct{})
	in.settled = settled
	go func() {
		defer close(settled)
		defer in.vm.restore(id)
		for end := time.Now().Add(patience); time.Now().Before(end); {
			in.vm.wake()
			select {
			case <-done:
				return
			case <-time.After(time.Millisecond):
			}
		}
	}()
}

func (r *run) interrupted() error {
	return &Error{Name: "interrupted", Value: "interrupted", Trace: []string{"interrupted"}}
}

// failed is the error of a cell whose last expression is an error.
func (r *run) failed(err error) error {
	return &Error{Name: "error", Value: err.Error(), Trace: []string{err.Error()}}
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
