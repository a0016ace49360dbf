package session

import (
	"context"
	"errors"
	"sync"

	"linewright/builtins/page"
	"linewright/kernel/wire"
)

// questions is what cells ask the reader, one at a time.
type questions struct {
	turn chan struct{} // holds a token while a question is open

	mu   sync.Mutex
	open *question // guarded by mu
}

type question struct {
	client string // who was asked
	id     string // msg_id of the question, "" until it has been sent
	answer chan string
}

// Ask implements [cell.Output]: it asks the front end that sent the cell.
func (o *output) Ask(prompt string, secret bool) (string, error) {
	if !o.allowStdin {
		return "", page.ErrNoReader
	}
	k := o.k
	select {
	case k.questions.turn <- struct{}{}:
		defer func() { <-k.questions.turn }()
	case <-o.ctx.Done():
		return "", context.Cause(o.ctx)
	}
	o.k.capture.catchUp()
	o.mu.Lock()
	o.flush(false)
	o.mu.Unlock()

	q := &question{client: string(o.request.Identities[0]), answer: make(chan string, 1)}
	k.questions.mu.Lock()
	id, err := k.wire.Reply(wire.Stdin, o.request, "input_request", nil, map[string]any{"prompt": prompt, "password": secret})
	q.id = id
	k.questions.open = q
	k.questions.mu.Unlock()
	defer func() {
		k.questions.mu.Lock()
		k.questions.open = nil
		k.questions.mu.Unlock()
	}()
	if err != nil {
		return "", err
	}
	select {
	case text := <-q.answer:
		return text, nil
	case <-o.ctx.Done():
		return "", context.Cause(o.ctx)
	}
}

// listenForAnswers takes what comes on stdin.
func (k *kernel) listenForAnswers(life context.Context) {
	for {
		m, ok := k.wire.Receive(life, wire.Stdin)
		if !ok {
			return
		}
		if err := k.questions.take(m); err != nil {
			k.log.Warn("message dropped", "channel", "stdin", "why", err.Error())
		}
	}
}

// take hands an answer to the question that is open. Some front ends name the question in the parent header and some do
// not; one that names another question is late.
func (qs *questions) take(m *wire.Message) error {
	if m.Type != "input_reply" {
		return errors.New(m.Type + " does not belong there")
	}
	var r struct{ Value string }
	if err := read(m, &r); err != nil {
		return err
	}
	qs.mu.Lock()
	defer qs.mu.Unlock()
	q := qs.open
	if q == nil || q.client != string(m.Identities[0]) || m.ParentID != "" && m.ParentID != q.id {
		return errors.New("an answer to no question that is open")
	}
	qs.open = nil
	q.answer <- r.Value
	return nil
}
