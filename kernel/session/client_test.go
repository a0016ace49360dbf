package session

import (
	"context"
	"encoding/json"
	"fmt"
	"log/slog"
	"regexp"
	"strings"
	"sync"
	"testing"
	"time"

	"linewright/kernel/cell"
	"linewright/kernel/wire"
	"linewright/plotting"
)

// A fake interpreter runs Go functions of the test in place of cells.
type fake struct {
	cells map[string]func(ctx context.Context, out cell.Output) (*plotting.Bundle, error)

	mu  sync.Mutex
	ids []string // cell IDs that Run was given; guarded by mu
}

func (f *fake) Run(ctx context.Context, n int, code, id string, out cell.Output) (*plotting.Bundle, error) {
	f.mu.Lock()
	f.ids = append(f.ids, id)
	f.mu.Unlock()
	run, ok := f.cells[code]
	if !ok {
		return nil, fmt.Errorf("no cell %q in this test", code)
	}
	return run(ctx, out)
}

func (f *fake) Evaluate(_ context.Context, expr string, _ cell.Output) (plotting.Bundle, error) {
	if expr == "panic" {
		panic("no such luck")
	}
	return plain(expr), nil
}
func (f *fake) Asked() []string                                  { return []string{"bit-rate"} }
func (f *fake) IsComplete(string) (status, indent string)        { panic("is_complete in this test") }
func (f *fake) Complete(string, int) cell.Completion             { return cell.Completion{} }
func (f *fake) Inspect(string, int, int) (plotting.Bundle, bool) { return plotting.Bundle{}, false }

func plain(text string) plotting.Bundle {
	return plotting.Bundle{Data: map[string]any{"text/plain": text}}
}

// serve starts a kernel in this process, on an interpreter of the test, and returns a front end of it.
func serve(t testing.TB, in interpreter) (*kernel, *client) {
	t.Helper()
	log := slog.New(slog.DiscardHandler)
	server, err := wire.Listen(wire.Connection{Transport: "tcp", IP: "127.0.0.1", Key: "secret"}, log)
	if err != nil {
		t.Fatal(err)
	}
	k := newKernel(server, log, func() (interpreter, error) { return in, nil })
	k.exit = func(int) { panic("a test must not end the process") }
	ctx, cancel := context.WithCancel(context.Background())
	ended := make(chan struct{})
	go func() {
		defer close(ended)
		k.run(ctx)
		server.Close()
	}()
	t.Cleanup(func() {
		cancel()
		<-ended
	})
	return k, front(t, server.Connection())
}

// serveCells starts a kernel in this process, on the real interpreter.
func serveCells(t testing.TB) (*kernel, *client) {
	t.Helper()
	in, err := cell.New(cell.Options{})
	if err != nil {
		t.Fatal(err)
	}
	return serve(t, in)
}

// A client is a front end that checks every message it takes in.
type client struct {
	*wire.Client
	t       testing.TB
	seen    map[string]bool // identifiers of messages received
	session string          // of the kernel
	early   map[wire.Channel][]*wire.Message
}

// front connects to a kernel.
func front(t testing.TB, c wire.Connection) *client {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
	defer cancel()
	k, err := wire.Dial(ctx, c)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(k.Close)
	return &client{Client: k, t: t, seen: map[string]bool{}, early: map[wire.Channel][]*wire.Message{}}
}

var date = regexp.MustCompile(`^\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\.\d{6}Z$`)

// take receives the next message of a channel.
func (c *client) take(ch wire.Channel) *wire.Message {
	c.t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	m, ok := c.Receive(ctx, ch)
	if !ok {
		c.t.Fatalf("nothing more on %s", ch)
	}
	var h map[string]string
	if err := json.Unmarshal(m.Header, &h); err != nil {
		c.t.Fatalf("header %s: %v", m.Header, err)
	}
	switch {
	case h["msg_id"] == "" || h["username"] == "" || h["session"] == "" || h["msg_type"] == "" || h["version"] != wire.Version || !date.MatchString(h["date"]):
		c.t.Errorf("header %s", m.Header)
	case c.seen[m.ID]:
		c.t.Errorf("msg_id %s twice", m.ID)
	case c.session != "" && c.session != h["session"]:
		c.t.Errorf("session %s, before %s", h["session"], c.session)
	case m.Type == "iopub_welcome" && string(m.Content) == `{"subscription":""}` && len(m.Identities) == 1 && len(m.Identities[0]) == 0:
		// the topic is what was subscribed to
	case ch == wire.IOPub && (len(m.Identities) != 1 || !strings.HasSuffix(string(m.Identities[0]), "."+m.Type)):
		c.t.Errorf("topic %q of %s", m.Identities, m.Type)
	}
	c.seen[m.ID], c.session = true, h["session"]
	return m
}

// answer returns the next message of a channel that answers a request; others are kept.
func (c *client) answer(ch wire.Channel, id string) *wire.Message {
	c.t.Helper()
	for i, m := range c.early[ch] {
		if m.ParentID == id {
			c.early[ch] = append(c.early[ch][:i:i], c.early[ch][i+1:]...)
			return m
		}
	}
	for {
		m := c.take(ch)
		if m.ParentID == id {
			return m
		}
		c.early[ch] = append(c.early[ch], m)
	}
}

// output returns what a request has broadcast, from busy to idle, without these two.
func (c *client) output(id string) (messages []*wire.Message) {
	c.t.Helper()
	if first := c.answer(wire.IOPub, id); !is(first, `"busy"`) {
		c.t.Fatalf("%s %s before busy", first.Type, first.Content)
	}
	for {
		m := c.answer(wire.IOPub, id)
		if is(m, `"busy"`) {
			c.t.Fatal("busy twice")
		}
		if is(m, `"idle"`) {
			return messages
		}
		messages = append(messages, m)
	}
}

func is(m *wire.Message, state string) bool {
	return m.Type == "status" && strings.Contains(string(m.Content), state)
}

func (c *client) request(ch wire.Channel, kind string, content object) (id string) {
	c.t.Helper()
	if content == nil {
		content = object{}
	}
	id, err := c.Send(ch, kind, nil, content)
	if err != nil {
		c.t.Fatal(err)
	}
	return id
}

// ask sends a request and returns the content of its reply and what it broadcasts.
func (c *client) ask(ch wire.Channel, kind string, content object) (map[string]any, []*wire.Message) {
	c.t.Helper()
	id := c.request(ch, kind, content)
	reply := c.answer(ch, id)
	if want := strings.Replace(kind, "request", "reply", 1); reply.Type != want {
		c.t.Errorf("%s is answered with %s", kind, reply.Type)
	}
	return decode(c.t, reply), c.output(id)
}

type object = map[string]any

func decode(t testing.TB, m *wire.Message) (content object) {
	t.Helper()
	if err := json.Unmarshal(m.Content, &content); err != nil {
		t.Fatalf("%s: %v", m.Type, err)
	}
	return content
}

// start sends a cell with more of the request's content.
func (c *client) start(code string, more object) (id string) {
	c.t.Helper()
	content := object{"code": code, "silent": false, "store_history": true, "user_expressions": object{}, "allow_stdin": false, "stop_on_error": true}
	for name, v := range more {
		content[name] = v
	}
	return c.request(wire.Shell, "execute_request", content)
}

// execute runs a cell.
func (c *client) execute(code string, more object) (reply object, output []*wire.Message) {
	c.t.Helper()
	id := c.start(code, more)
	m := c.answer(wire.Shell, id)
	if m.Type != "execute_reply" {
		c.t.Errorf("answered with %s", m.Type)
	}
	return decode(c.t, m), c.output(id)
}

// text returns what was written to a stream.
func text(t testing.TB, output []*wire.Message, name string) (all string) {
	t.Helper()
	for _, m := range output {
		if m.Type == "stream" {
			if s := decode(t, m); s["name"] == name {
				all += s["text"].(string)
			}
		}
	}
	return all
}

// kinds returns the types of messages, parted by spaces.
func kinds(messages []*wire.Message) string {
	var list []string
	for _, m := range messages {
		list = append(list, m.Type)
	}
	return strings.Join(list, " ")
}

// find returns the content of the only message of a type.
func find(t testing.TB, messages []*wire.Message, kind string) object {
	t.Helper()
	var found object
	for _, m := range messages {
		if m.Type == kind {
			if found != nil {
				t.Errorf("%s twice", kind)
			}
			found = decode(t, m)
		}
	}
	if found == nil {
		t.Fatalf("no %s among %s", kind, kinds(messages))
	}
	return found
}

// equal compares a value of JSON with what it should be.
func equal(t testing.TB, what string, got any, want string) {
	t.Helper()
	b, err := json.Marshal(got)
	if err != nil {
		t.Fatal(err)
	}
	if string(b) != want {
		t.Errorf("%s is %s, want %s", what, b, want)
	}
}
