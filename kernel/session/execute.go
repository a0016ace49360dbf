package session

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"runtime/debug"
	"slices"
	"time"

	"linewright/kernel/cell"
	"linewright/kernel/wire"
	"linewright/plotting"
)

type executeRequest struct {
	Code            *string
	Silent          bool
	StoreHistory    *bool             `json:"store_history"` // absent: true, unless silent
	UserExpressions map[string]string `json:"user_expressions"`
	AllowStdin      bool              `json:"allow_stdin"`
	StopOnError     *bool             `json:"stop_on_error"` // absent: true
}

// catchUp is how long a failure waits before its reply for requests that were sent before it could be known. A front end
// that runs all cells sends them in one go, and those behind the failing one are to be aborted, also if they are still
// in the sockets.
const catchUp = 5 * time.Millisecond

// work runs cells, one after the other.
func (k *kernel) work(life context.Context) {
	for {
		m, ok := k.queue.Get(life)
		if !ok {
			return
		}
		ctx, cancel := context.WithCancelCause(life)
		idle := make(chan struct{})
		k.mu.Lock()
		k.cancel, k.idle = cancel, idle
		k.mu.Unlock()
		k.space.begin()
		stop := k.execute(ctx, m)
		k.space.end()
		cancel(nil)
		close(idle)
		k.abort(stop)
	}
}

// abort answers requests that are not run.
func (k *kernel) abort(waiting []*wire.Message) {
	for _, m := range waiting {
		k.publish(m, "status", status{"busy"})
		k.reply(wire.Shell, m, "execute_reply", nil, map[string]string{"status": "aborted"})
		k.publish(m, "status", status{"idle"})
	}
}

// over says that the cell can no longer be interrupted.
func (k *kernel) over() {
	k.mu.Lock()
	defer k.mu.Unlock()
	k.cancel = nil
}

// execute answers one request and returns the requests that its failure aborts.
func (k *kernel) execute(ctx context.Context, m *wire.Message) (stop []*wire.Message) {
	k.publish(m, "status", status{"busy"})
	defer k.publish(m, "status", status{"idle"})
	defer k.over()
	reply := func(metadata, content any) { k.reply(wire.Shell, m, "execute_reply", metadata, content) }

	var r executeRequest
	err := read(m, &r)
	if err == nil && r.Code == nil {
		err = errors.New(`execute_request: no "code"`)
	}
	if err != nil {
		reply(nil, failure("bad request", err))
		return nil
	}
	numbered := !r.Silent && (r.StoreHistory == nil || *r.StoreHistory)
	n := k.count + 1
	if numbered {
		k.count = n
	}
	if !r.Silent {
		k.publish(m, "execute_input", map[string]any{"code": *r.Code, "execution_count": n})
	}
	out := newOutput(k, ctx, m, r.AllowStdin)
	k.capture.settle() // what was written since the last cell is still that one's
	k.current.Store(out)
	if k.notice != "" {
		out.Stream("stderr", []byte(k.notice))
		k.notice = ""
	}

	done := ran{line: n, input: *r.Code}
	b, err := k.runCell(ctx, n, *r.Code, m, out)
	if err == nil && b != nil && !r.Silent {
		if text, ok := b.Data["text/plain"].(string); ok {
			done.output = &text
		}
		out.send("execute_result", raw(map[string]any{"execution_count": n}, *b))
	}
	var expressions map[string]any
	if err == nil {
		expressions = k.evaluate(ctx, r.UserExpressions, out)
	}
	k.over()
	if numbered {
		k.history.add(done)
	}
	last := k.count // of the cells that count: front ends number the next one after it

	var content any
	if err != nil {
		f := failure("error", err)
		if context.Cause(ctx) == errInterrupted {
			f.Name = "interrupted" // whatever it was that the interrupt made fail
		}
		shown := f
		shown.Status = ""
		out.send("error", shown)
		if r.StopOnError == nil || *r.StopOnError {
			time.Sleep(catchUp)
			stop = k.queue.Take()
		}
		content = struct {
			failed
			Count int `json:"execution_count"`
		}{f, last}
	} else {
		content = map[string]any{
			"status": "ok", "execution_count": last, "user_expressions": expressions, "payload": []any{},
		}
	}
	out.finish()
	reply(map[string]any{"linewright": map[string]any{"parameters": k.asked()}}, content)
	return stop
}

// runCell runs the cell's code. A panic that the interpreter lets through fails the cell, not the kernel.
func (k *kernel) runCell(ctx context.Context, n int, code string, m *wire.Message, out *output) (b *plotting.Bundle, err error) {
	defer func() {
		if v := recover(); v != nil {
			k.log.Error("panic in the interpreter", "panic", v, "stack", string(debug.Stack()))
			b, err = nil, fmt.Errorf("the kernel failed on this cell: %v", v)
		}
	}()
	cells, err := k.start()
	if err != nil {
		return nil, err
	}
	var meta struct {
		CellID string `json:"cellId"`
	}
	if json.Unmarshal(m.Metadata, &meta) != nil { // front ends put there what they like
		meta.CellID = ""
	}
	return cells.Run(ctx, n, code, meta.CellID, out)
}

// evaluate answers user_expressions, each by itself, in the order of their names.
func (k *kernel) evaluate(ctx context.Context, expressions map[string]string, out *output) map[string]any {
	values := map[string]any{}
	for _, name := range slices.Sorted(maps.Keys(expressions)) {
		b, err := k.evaluateOne(ctx, expressions[name], out)
		if err != nil {
			values[name] = failure("error", err)
		} else {
			values[name] = raw(map[string]any{"status": "ok"}, b)
		}
	}
	return values
}

// evaluateOne evaluates one expression, with the same care as runCell.
func (k *kernel) evaluateOne(ctx context.Context, expr string, out cell.Output) (b plotting.Bundle, err error) {
	defer func() {
		if v := recover(); v != nil {
			k.log.Error("panic in the interpreter", "panic", v, "stack", string(debug.Stack()))
			err = fmt.Errorf("the kernel failed on this expression: %v", v)
		}
	}()
	cells, err := k.start()
	if err != nil {
		return plotting.Bundle{}, err
	}
	return cells.Evaluate(ctx, expr, out)
}

// asked returns the parameters that cells have asked for so far.
func (k *kernel) asked() []string {
	names := []string{}
	if cells, err := k.start(); err == nil {
		names = append(names, cells.Asked()...)
	}
	return names
}
