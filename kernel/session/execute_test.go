package session

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"runtime"
	"runtime/debug"
	"strings"
	"testing"
	"time"

	"linewright/kernel/cell"
	"linewright/kernel/wire"
	"linewright/plotting"
)

func TestExecuteInOrder(t *testing.T) {
	_, c := serveCells(t)
	reply, output := c.execute(`fmt.Println("hello")`, nil)
	if got := kinds(output); got != "execute_input stream" {
		t.Errorf("broadcasts %s", got)
	}
	equal(t, "input", decode(t, output[0]), `{"code":"fmt.Println(\"hello\")","execution_count":1}`)
	equal(t, "output", decode(t, output[1]), `{"name":"stdout","text":"hello\n"}`)
	equal(t, "reply", reply, `{"execution_count":1,"payload":[],"status":"ok","user_expressions":{}}`)
	reply, output = c.execute("1+1", nil)
	equal(t, "result", find(t, output, "execute_result"), `{"data":{"text/plain":"2"},"execution_count":2,"metadata":{}}`)
	equal(t, "count", reply["execution_count"], "2")
}

// Whatever the client writes in its header comes back as the parent of everything, byte for byte.
func TestParentHeader(t *testing.T) {
	_, c := serveCells(t)
	id := c.start(`fmt.Println("x"); 1`, nil)
	reply := c.answer(wire.Shell, id)
	for _, m := range c.output(id) {
		if string(m.Parent) != string(reply.Parent) || !strings.Contains(string(m.Parent), id) {
			t.Errorf("parent of %s is %s", m.Type, m.Parent)
		}
	}
}

func TestSilentAndUnnumbered(t *testing.T) {
	_, c := serveCells(t)
	c.execute("1", nil)
	_, output := c.execute(`fmt.Println("x"); 1+1`, object{"silent": true})
	if got := kinds(output); got != "stream" {
		t.Errorf("silent broadcasts %s", got)
	}
	_, output = c.execute("1+1", object{"store_history": false})
	if got := kinds(output); got != "execute_input execute_result" {
		t.Errorf("store_history=false broadcasts %s", got)
	}
	reply, _ := c.execute("1", nil)
	equal(t, "count after one silent and one unnumbered cell", reply["execution_count"], "2")
}

func TestStateIsKept(t *testing.T) {
	_, c := serveCells(t)
	c.execute("x := 41", nil)
	_, output := c.execute("x + 1", nil)
	equal(t, "x + 1", find(t, output, "execute_result")["data"], `{"text/plain":"42"}`)
}

func TestError(t *testing.T) {
	_, c := serveCells(t)
	for code, name := range map[string]string{`panic("boom")`: "panic", `x := "a" + 1`: "compile error", `fmt.Errorf("no")`: "error"} {
		reply, output := c.execute(code, nil)
		if got := kinds(output); got != "execute_input error" {
			t.Errorf("%s broadcasts %s", code, got)
		}
		shown := find(t, output, "error")
		for _, e := range []object{reply, shown} {
			if e["ename"] != name || e["evalue"] == "" || len(e["traceback"].([]any)) == 0 {
				t.Errorf("%s: %v", code, e)
			}
		}
		equal(t, "reply", reply["status"], `"error"`)
	}
	if reply, _ := c.execute("1", nil); reply["status"] != "ok" || reply["execution_count"] != 4.0 {
		t.Errorf("after errors: %v", reply)
	}
}

// A failing cell aborts those that wait, and only cells; those that come later are run.
func TestStopOnError(t *testing.T) {
	_, c := serveCells(t)
	send := func() []string {
		return []string{c.start("time.Sleep(50*time.Millisecond)", nil), c.start(`panic("x")`, nil), c.start("1", nil), c.start("2", nil)}
	}
	c.execute(`import "time"`, nil)
	ids := send()
	other := c.request(wire.Shell, "is_complete_request", object{"code": "1"})
	for i, want := range []string{"ok", "error", "aborted", "aborted"} {
		equal(t, fmt.Sprint("cell ", i), decode(t, c.answer(wire.Shell, ids[i]))["status"], `"`+want+`"`)
		if output := c.output(ids[i]); want == "aborted" && len(output) > 0 {
			t.Errorf("an aborted cell broadcasts %s", kinds(output))
		}
	}
	equal(t, "another request", decode(t, c.answer(wire.Shell, other))["status"], `"complete"`)
	reply, _ := c.execute("1", nil)
	equal(t, "a later cell", []any{reply["status"], reply["execution_count"]}, `["ok",4]`)

	id := c.start(`panic("x")`, object{"stop_on_error": false})
	next := c.start("1", nil)
	equal(t, "without stop_on_error", decode(t, c.answer(wire.Shell, id))["status"], `"error"`)
	equal(t, "the cell behind it", decode(t, c.answer(wire.Shell, next))["status"], `"ok"`)
}

// A front end that runs all cells sends them one after the other, and the first may fail before the second is on its
// way. What is sent before the reply is aborted nevertheless.
func TestStopOnErrorInFlight(t *testing.T) {
	_, c := serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
		"fail": func(context.Context, cell.Output) (*plotting.Bundle, error) { return nil, errors.New("no") },
		"next": func(context.Context, cell.Output) (*plotting.Bundle, error) { return nil, nil },
	}})
	c.execute("next", nil)
	for range 20 {
		first := c.start("fail", nil)
		second := c.start("next", nil)
		equal(t, "first", decode(t, c.answer(wire.Shell, first))["status"], `"error"`)
		equal(t, "second", decode(t, c.answer(wire.Shell, second))["status"], `"aborted"`)
	}
}

func TestCellsRunInOrder(t *testing.T) {
	_, c := serveCells(t)
	var ids []string
	for i := range 50 {
		ids = append(ids, c.start(fmt.Sprint(i), nil))
	}
	for i, id := range ids {
		m := c.take(wire.Shell)
		if m.ParentID != id {
			t.Fatalf("reply %d answers another request", i)
		}
		equal(t, "count", decode(t, m)["execution_count"], fmt.Sprint(i+1))
	}
}

func TestUserExpressions(t *testing.T) {
	_, c := serveCells(t)
	reply, _ := c.execute("x := 2", object{"user_expressions": object{"good": "x+1", "bad": "1/zz"}})
	values := reply["user_expressions"].(object)
	equal(t, "reply", reply["status"], `"ok"`)
	equal(t, "good", values["good"], `{"data":{"text/plain":"3"},"metadata":{},"status":"ok"}`)
	if bad := values["bad"].(object); bad["status"] != "error" || bad["ename"] == "" || !strings.Contains(bad["evalue"].(string), "zz") || len(bad["traceback"].([]any)) == 0 {
		t.Errorf("bad: %v", bad)
	}
	_, c = serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
		"": func(context.Context, cell.Output) (*plotting.Bundle, error) { return nil, nil },
	}})
	reply, _ = c.execute("", object{"user_expressions": object{"a": "fine", "b": "panic"}})
	values = reply["user_expressions"].(object)
	equal(t, "a", values["a"].(object)["status"], `"ok"`)
	equal(t, "b", values["b"].(object)["evalue"], `"the kernel failed on this expression: no such luck"`)
}

// A panic that the interpreter lets through fails the cell.
func TestInterpreterPanics(t *testing.T) {
	_, c := serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
		"bad":  func(context.Context, cell.Output) (*plotting.Bundle, error) { panic("inside") },
		"good": func(context.Context, cell.Output) (*plotting.Bundle, error) { return nil, nil },
	}})
	reply, output := c.execute("bad", nil)
	equal(t, "evalue", reply["evalue"], `"the kernel failed on this cell: inside"`)
	find(t, output, "error")
	reply, _ = c.execute("good", nil)
	equal(t, "next cell", reply["status"], `"ok"`)
}

// The reply says which parameters cells have asked for, and the interpreter is told the cell's ID, where it has one.
func TestMetadata(t *testing.T) {
	f := &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
		"": func(context.Context, cell.Output) (*plotting.Bundle, error) { return nil, nil },
	}}
	_, c := serve(t, f)
	for _, metadata := range []string{`{"cellId":"c-1","deletedCells":[]}`, `{}`, `{"cellId":7}`} {
		id, err := c.Send(wire.Shell, "execute_request", json.RawMessage(metadata), object{"code": ""})
		if err != nil {
			t.Fatal(err)
		}
		if m := c.answer(wire.Shell, id); string(m.Metadata) != `{"linewright":{"parameters":["bit-rate"]}}` {
			t.Errorf("metadata %s", m.Metadata)
		}
	}
	f.mu.Lock()
	defer f.mu.Unlock()
	equal(t, "cell IDs", f.ids, `["c-1","",""]`)
}

func TestInterrupt(t *testing.T) {
	_, c := serveCells(t)
	c.execute(`import "time"`, nil)
	c.execute("n := 1", nil)
	for _, code := range []string{"for {\n}", "time.Sleep(30 * time.Second)"} {
		id, next := c.start(code, nil), c.start("n", nil)
		for c.answer(wire.IOPub, id).Type != "execute_input" {
		}
		time.Sleep(100 * time.Millisecond)
		start := time.Now()
		reply, _ := c.ask(wire.Control, "interrupt_request", nil)
		equal(t, "interrupt", reply, `{"status":"ok"}`)
		failed := decode(t, c.answer(wire.Shell, id))
		if d := time.Since(start); d > time.Second { // the contract says 0.2 s; other work may have the machine
			t.Errorf("%q is interrupted after %v", code, d)
		}
		equal(t, code, []any{failed["status"], failed["ename"]}, `["error","interrupted"]`)
		equal(t, "the cell behind it", decode(t, c.answer(wire.Shell, next))["status"], `"aborted"`)
	}
	_, output := c.execute("n", nil)
	equal(t, "the state afterwards", find(t, output, "execute_result")["data"], `{"text/plain":"1"}`)
}

// An interrupt while nothing runs does not hit the next cell.
func TestInterruptWhileIdle(t *testing.T) {
	_, c := serveCells(t)
	c.execute("1", nil)
	for range 5 {
		c.ask(wire.Control, "interrupt_request", nil)
		if reply, _ := c.execute("1", nil); reply["status"] != "ok" {
			t.Fatalf("the next cell: %v", reply)
		}
	}
}

func TestAsk(t *testing.T) {
	_, c := serveCells(t)
	for ask, secret := range map[string]bool{"Ask": false, "AskSecret": true} {
		id := c.start(`fmt.Print("before "); fmt.Println("got", page.`+ask+`("name? "))`, object{"allow_stdin": true})
		q := c.take(wire.Stdin)
		if q.Type != "input_request" || q.ParentID != id {
			t.Fatalf("%s, parent %s", q.Type, q.ParentID)
		}
		equal(t, "question", decode(t, q), fmt.Sprintf(`{"password":%t,"prompt":"name? "}`, secret))
		c.request(wire.Stdin, "input_reply", object{"value": "żaba"})
		equal(t, "reply", decode(t, c.answer(wire.Shell, id))["status"], `"ok"`)
		if got := text(t, c.output(id), "stdout"); got != "before got żaba\n" {
			t.Errorf("output %q", got)
		}
	}
}

func TestAskWithoutReader(t *testing.T) {
	_, c := serveCells(t)
	reply, output := c.execute(`page.Ask("? ")`, nil)
	equal(t, "reply", reply["status"], `"error"`)
	if v := find(t, output, "error")["evalue"].(string); !strings.Contains(v, "nobody can be asked") {
		t.Errorf("evalue %q", v)
	}
}

// An interrupt ends a question.
func TestInterruptWhileAsking(t *testing.T) {
	_, c := serveCells(t)
	id := c.start(`page.Ask("one? ")`, object{"allow_stdin": true})
	c.take(wire.Stdin)
	c.ask(wire.Control, "interrupt_request", nil)
	equal(t, "reply", decode(t, c.answer(wire.Shell, id))["ename"], `"interrupted"`)
}

// What answers no open question is nobody's: it does not become the answer to the next.
func TestLateAnswers(t *testing.T) {
	qs := &questions{open: &question{client: "me", id: "q2", answer: make(chan string, 1)}}
	message := func(client, kind, parent string) *wire.Message {
		return &wire.Message{Identities: [][]byte{[]byte(client)}, Type: kind, ParentID: parent, Content: json.RawMessage(`{"value":"v"}`)}
	}
	for _, m := range []*wire.Message{
		message("me", "input_reply", "q1"), message("you", "input_reply", "q2"), message("me", "execute_request", "q2"),
		{Identities: [][]byte{[]byte("me")}, Type: "input_reply", Content: json.RawMessage(`{"value":5}`)},
	} {
		if qs.take(m) == nil {
			t.Errorf("taken: %s of %s with parent %q and content %s", m.Type, m.Identities[0], m.ParentID, m.Content)
		}
	}
	if err := qs.take(message("me", "input_reply", "q2")); err != nil {
		t.Error(err)
	}
	if qs.take(message("me", "input_reply", "")) == nil {
		t.Error("a second answer is taken")
	}
}

// Several front ends: each gets its own replies in order and everybody's broadcasts.
func TestSeveralClients(t *testing.T) {
	k, c := serveCells(t)
	clients := []*client{c, nil, nil}
	for i := range clients { // one after the other: those that come at the same moment may be taken for each other
		if i > 0 {
			clients[i] = front(t, k.wire.Connection())
		}
		clients[i].execute("0", nil)
	}
	ids := make([][]string, len(clients))
	for j := range 20 {
		for i, c := range clients {
			ids[i] = append(ids[i], c.start(fmt.Sprintf("fmt.Println(%d, %d)", i, j), nil))
		}
	}
	for i, c := range clients {
		for _, id := range ids[i] {
			if m := c.take(wire.Shell); m.ParentID != id {
				t.Fatalf("client %d: a reply to %s, want %s", i, m.ParentID, id)
			}
		}
		for j, id := range append(append(append([]string(nil), ids[0]...), ids[1]...), ids[2]...) {
			if got, want := text(t, c.output(id), "stdout"), fmt.Sprintf("%d %d\n", j/20, j%20); got != want {
				t.Errorf("client %d heard %q, want %q", i, got, want)
			}
		}
	}
}

func TestLargeCode(t *testing.T) {
	_, c := serveCells(t)
	_, output := c.execute(`fmt.Println("`+strings.Repeat("y", 2<<20)+`")`, nil)
	if n := len(text(t, output, "stdout")); n != 2<<20+1 {
		t.Errorf("%d bytes", n)
	}
}

// Some garbage may pile up, more while a cell runs long, and no more than what is live where that is much.
func TestSpace(t *testing.T) {
	percent := func() int { return int(metric("/gc/gogc:percent")) }
	before := percent()
	until := func(what string, garbage uint64) {
		t.Helper()
		for end := time.Now().Add(10 * time.Second); ; time.Sleep(time.Millisecond) {
			want := max(before, int(100*garbage/max(metric("/gc/heap/live:bytes"), smallest)))
			if got := percent(); want/2 <= got && got <= want+want/2 {
				return
			} else if time.Now().After(end) {
				t.Errorf("%s: the collector is set to %d %%, want about %d", what, got, want)
				return
			}
		}
	}
	t.Run("kernel", func(t *testing.T) {
		_, c := serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
			"short": func(context.Context, cell.Output) (*plotting.Bundle, error) { return nil, nil },
			"long": func(context.Context, cell.Output) (*plotting.Bundle, error) {
				until("a small heap in a long cell", wide)
				large := make([]byte, 2*wide)
				runtime.GC()
				until("a large heap", wide)
				runtime.KeepAlive(large)
				runtime.GC()
				until("a small heap again", wide)
				return nil, nil
			},
		}})
		for _, code := range []string{"short", "long", "short"} {
			c.execute(code, nil)
			until("after "+code, narrow)
		}
	})
	until("without a kernel", 0)
}

// What a cell has used goes back to the system when it has ended.
func TestMemoryGoesBack(t *testing.T) {
	var used []byte
	_, c := serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
		"cell": func(context.Context, cell.Output) (*plotting.Bundle, error) {
			used = make([]byte, 200<<20)
			clear(used) // so that the system has to provide it
			used = nil
			return nil, nil
		},
	}})
	debug.FreeOSMemory()
	before := held()
	c.execute("cell", nil)
	for end := time.Now().Add(10 * time.Second); held() > before+100<<20; time.Sleep(time.Millisecond) {
		if time.Now().After(end) {
			t.Fatal("the kernel keeps the memory")
		}
	}
}
