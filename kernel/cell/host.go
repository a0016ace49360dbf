package cell

import (
	"context"
	"sync"
)

// pageState is what package page knows of the whole session.
type pageState struct {
	mu    sync.Mutex
	asked map[string]bool
	slots map[string]string // slot -> the cell that showed it first
}

// host fills page.Host for the running cell.
type host struct{ in *Interpreter }

func (h host) Show(v any, id string) {
	r := h.in.here()
	b, err := h.in.render(v, nil)
	if err != nil {
		panic(err)
	}
	r.out.Display(b, id, r.update(id))
}

// update reports whether a slot is on the page already, so that it is changed in place. The cell that showed it first shows
// it anew when it runs again.
func (r *run) update(id string) bool {
	if id == "" {
		return false
	}
	s := &r.in.page
	s.mu.Lock()
	defer s.mu.Unlock()
	cell := "id " + r.cellID
	if r.cellID == "" {
		cell = "code " + r.code
	}
	owner, known := s.slots[id]
	if known && (owner != cell || r.shown[id]) {
		return true
	}
	if s.slots == nil {
		s.slots = map[string]string{}
	}
	s.slots[id] = cell
	r.shown[id] = true
	return false
}

func (h host) Clear() { h.in.here().out.Clear(true) }

func (h host) Ask(prompt string, secret bool) (string, error) {
	r := h.in.here()
	type answer struct {
		text string
		err  error
	}
	got := make(chan answer, 1)
	go func() {
		text, err := r.out.Ask(prompt, secret)
		got <- answer{text, err}
	}()
	select {
	case a := <-got:
		return a.text, a.err
	case <-r.ctx.Done():
		return "", context.Cause(r.ctx)
	}
}

func (h host) Parameter(name string) (string, bool) {
	s := &h.in.page
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.asked == nil {
		s.asked = map[string]bool{}
	}
	s.asked[name] = true
	v, ok := h.in.opt.Parameters[name]
	return v, ok
}

func (h host) Context() context.Context { return h.in.here().ctx }

// stream passes on what a cell prints.
type stream struct {
	in   *Interpreter
	name string
}

func (s stream) Write(p []byte) (int, error) {
	if r := s.in.here(); r != nil {
		r.out.Stream(s.name, p)
	}
	return len(p), nil
}
