package batch

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"strings"
	"time"

	"linewright/install"
	"linewright/kernel/wire"
)

// Conditions are what cells are executed under.
type Conditions struct {
	Kernel     []string          // command line of the kernel; {connection_file} stands for the connection file's path
	Folder     string            // the kernel's working folder; empty means that of this process
	Parameters map[string]string // values of page parameters, as text
	Progress   Progress          // is told of every cell; nil means nobody

	limits *limits // nil means the usual ones; tests have no time
}

// Progress is told how the execution goes on. Cells are counted from 1; those without content are neither executed nor
// counted, so the number is also the one that the kernel's traces give.
type Progress interface {
	Begin(number, total int, c *Cell)
	End(number, total int, c *Cell, took time.Duration, err error)
}

// CellError is the failure of a cell that stops the execution.
type CellError struct {
	Number int // from 1, of those executed
	Output *Output
}

func (e *CellError) Error() string {
	value, _, _ := strings.Cut(e.Output.Value, "\n")
	return fmt.Sprintf("cell %d failed: %s", e.Number, joinError(e.Output.Name, value))
}

// Trace returns the lines of the failure's trace that say more than Error does.
func (e *CellError) Trace() []string {
	text := e.Output.Value
	if len(e.Output.Traceback) > 0 {
		text = uncoloured(strings.Join(e.Output.Traceback, "\n"))
	}
	all := strings.Split(strings.TrimRight(text, "\n"), "\n")
	if strings.HasSuffix(e.Error(), all[0]) {
		all = all[1:]
	}
	return all
}

// joinError joins an error's name and value, where the value does not begin with the name already.
func joinError(name, value string) string {
	if name == "" || strings.HasPrefix(value, name) {
		return value
	}
	return name + ": " + value
}

// ErrInterrupted is wrapped by the error of an execution that was interrupted.
var ErrInterrupted = errors.New("interrupted")

// Execute executes the notebook's code cells in a fresh kernel process, which is gone when it returns, and puts their
// outputs in the place of those that the notebook has; cells that are not reached have none. It returns the names of
// the parameters that cells have asked for.
//
// It stops with a [*CellError] at a cell that fails, unless the cell is tagged raises-exception; with an error that
// wraps [ErrInterrupted] when ctx ends; and with an error that says why when the kernel dies.
func (n *Notebook) Execute(ctx context.Context, with Conditions) (asked []string, err error) {
	for _, c := range n.Cells {
		c.Outputs, c.Count = nil, 0
	}
	l := usualLimits
	if with.limits != nil {
		l = *with.limits
	}
	p, err := start(ctx, l, with.Kernel, with.Folder, with.Parameters)
	if err != nil {
		if ctx.Err() != nil {
			err = fmt.Errorf("%w before the first cell", ErrInterrupted)
		}
		return nil, err
	}
	defer p.close()
	x := &execution{process: p, collector: newCollector()}
	defer x.collector.finish()
	code := n.Code()
	for i, c := range code {
		if ctx.Err() != nil {
			return x.asked, fmt.Errorf("%w before cell %d", ErrInterrupted, i+1)
		}
		if with.Progress != nil {
			with.Progress.Begin(i+1, len(code), c)
		}
		began := time.Now()
		err := x.cell(ctx, i+1, c)
		if with.Progress != nil {
			with.Progress.End(i+1, len(code), c, time.Since(began), err)
		}
		if err != nil {
			return x.asked, err
		}
	}
	n.describe(p.language)
	return x.asked, nil
}

// execution is a run of cells in one kernel.
type execution struct {
	process   *process
	collector *collector
	asked     []string // names of parameters that cells have asked for
}

// reply is what matters of an execute_reply.
type reply struct {
	Status string `json:"status"`
	Count  int    `json:"execution_count"`
	EName  string `json:"ename"`
	EValue string `json:"evalue"`
}

// cell executes one cell and returns why the execution cannot go on, if it cannot.
func (x *execution) cell(ctx context.Context, number int, c *Cell) error {
	id := c.ID
	if id == "" {
		id = fmt.Sprintf("cell-%d", number)
	}
	request, err := x.process.client.Send(wire.Shell, "execute_request", map[string]any{"cellId": id}, map[string]any{
		"code": c.Source, "silent": false, "store_history": true, "user_expressions": map[string]any{},
		"allow_stdin": false, "stop_on_error": true,
	})
	if err != nil {
		return fmt.Errorf("cell %d: %w", number, err)
	}
	x.collector.expect(request, c)
	r, err := x.wait(ctx, request)
	if err != nil {
		return fmt.Errorf("cell %d: %w", number, err)
	}
	if r.Count > 0 {
		c.Count = r.Count
	}
	switch {
	case r.Status == "ok":
		return nil
	case ctx.Err() != nil:
		return fmt.Errorf("cell %d: %w", number, ErrInterrupted)
	case c.Tagged("raises-exception"):
		return nil
	}
	failed := &Output{Type: failure, Name: r.EName, Value: r.EValue}
	for _, o := range c.Outputs {
		if o.Type == failure {
			failed = o
		}
	}
	return &CellError{number, failed}
}

// wait takes what comes in until the request is answered and all output is there. When ctx ends, the cell is
// interrupted; the answer is waited for all the same, but not long.
func (x *execution) wait(ctx context.Context, request string) (*reply, error) {
	p := x.process
	var (
		answer      *reply
		idle        bool
		ended       = p.ended
		interrupted = ctx.Done()
		limit       <-chan time.Time
		late        error // what it means when limit is over
	)
	for answer == nil || !idle {
		select {
		case e, ok := <-p.events:
			if !ok {
				return nil, p.death()
			}
			if e.channel == wire.Shell {
				if e.message.ParentID != request {
					continue
				}
				var err error
				if answer, err = x.replied(e.message); err != nil {
					return nil, err
				}
			} else {
				if err := x.collector.take(e.message); err != nil {
					return nil, fmt.Errorf("the kernel's %s is malformed: %w", e.message.Type, err)
				}
				idle = idle || e.message.ParentID == request && isIdle(e)
			}
			if answer != nil && ended != nil {
				limit = time.After(p.limits.idle)
				late = fmt.Errorf("the kernel answered and then sent nothing for %v, also not that it is idle", p.limits.idle)
			}
		case <-ended: // what it sent before is still coming in
			ended = nil
			limit, late = time.After(p.limits.lastWords), p.death()
		case <-interrupted:
			interrupted = nil
			p.interrupt()
			limit = time.After(p.limits.interrupt)
			late = fmt.Errorf("%w; the kernel did not stop within %v and was ended", ErrInterrupted, p.limits.interrupt)
		case <-limit:
			return nil, late
		}
	}
	return answer, nil
}

// replied reads the reply to a cell.
func (x *execution) replied(m *wire.Message) (*reply, error) {
	var r reply
	if err := json.Unmarshal(m.Content, &r); err != nil {
		return nil, fmt.Errorf("the kernel's %s is malformed: %w", m.Type, err)
	}
	var own struct {
		Linewright struct {
			Parameters []string `json:"parameters"`
		} `json:"linewright"`
	}
	if err := json.Unmarshal(m.Metadata, &own); err == nil && own.Linewright.Parameters != nil {
		x.asked = own.Linewright.Parameters
	}
	return &r, nil
}

// describe adds to the notebook's metadata what its cells are written in, where it does not say so. The version of the
// language is left out: a notebook is to be the same wherever it is run.
func (n *Notebook) describe(language map[string]any) {
	meta := maps.Clone(n.Metadata)
	if _, ok := meta["kernelspec"]; !ok {
		meta["kernelspec"] = map[string]any{"display_name": install.DisplayName, "language": "go", "name": install.Name}
	}
	if _, ok := meta["language_info"]; !ok && language["name"] != nil {
		info := maps.Clone(language)
		delete(info, "version")
		meta["language_info"] = info
	}
	n.Metadata = meta
}
