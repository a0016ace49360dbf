package session

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"strings"
	"testing"
	"time"

	"linewright/kernel/cell"
	"linewright/kernel/wire"
	"linewright/plotting"
)

// Every request is answered by its own reply between busy and idle, also one that nobody knows and one that makes no
// sense.
func TestEveryRequestIsAnswered(t *testing.T) {
	_, c := serveCells(t)
	for _, r := range []struct {
		ch      wire.Channel
		kind    string
		content object
		status  string
	}{
		{wire.Shell, "kernel_info_request", nil, "ok"},
		{wire.Control, "kernel_info_request", nil, "ok"},
		{wire.Shell, "connect_request", nil, "ok"},
		{wire.Shell, "is_complete_request", object{"code": "1"}, "complete"},
		{wire.Shell, "complete_request", object{"code": "", "cursor_pos": 0}, "ok"},
		{wire.Shell, "complete_request", object{"code": "żółw.", "cursor_pos": 1000}, "ok"},
		{wire.Shell, "complete_request", object{"code": "a", "cursor_pos": -1}, "ok"},
		{wire.Shell, "inspect_request", object{"code": "", "cursor_pos": 0, "detail_level": 0}, "ok"},
		{wire.Shell, "inspect_request", object{"code": "len", "cursor_pos": 1000}, "ok"},
		{wire.Shell, "history_request", object{"hist_access_type": "tail", "n": 1}, "ok"},
		{wire.Shell, "history_request", object{"hist_access_type": "sideways"}, "error"},
		{wire.Shell, "comm_info_request", nil, "ok"},
		{wire.Control, "interrupt_request", nil, "ok"},
		{wire.Control, "debug_request", object{"type": "request", "seq": 7, "command": "initialize"}, "error"},
		{wire.Shell, "tea_request", nil, "error"},
		{wire.Control, "execute_request", object{"code": "1"}, "error"},
		{wire.Shell, "complete_request", object{"code": 1}, "error"},
		{wire.Shell, "inspect_request", object{"code": []int{1}}, "error"},
		{wire.Shell, "is_complete_request", object{"code": object{}}, "error"},
		{wire.Shell, "execute_request", object{"code": 1}, "error"},
		{wire.Shell, "execute_request", nil, "error"},
		{wire.Shell, "execute_request", object{"code": "1", "silent": "yes"}, "error"},
		{wire.Shell, "shutdown_request", object{"restart": "maybe"}, "error"},
	} {
		reply, _ := c.ask(r.ch, r.kind, r.content)
		equal(t, r.kind+" status", reply["status"], `"`+r.status+`"`)
		if r.status == "error" && (reply["ename"] == "" || reply["evalue"] == "" || len(reply["traceback"].([]any)) == 0) {
			t.Errorf("%s: incomplete error %v", r.kind, reply)
		}
	}
	if reply, _ := c.execute("1+1", nil); reply["execution_count"] != 1.0 {
		t.Errorf("the first cell that can be run has number %v", reply["execution_count"])
	}
}

func TestPanicInAHandler(t *testing.T) {
	_, c := serve(t, &fake{})
	reply, _ := c.ask(wire.Shell, "is_complete_request", object{"code": "1"})
	equal(t, "evalue", reply["evalue"], `"the kernel failed on is_complete_request: is_complete in this test"`)
	if reply, _ := c.ask(wire.Shell, "kernel_info_request", nil); reply["status"] != "ok" {
		t.Error("the kernel does not go on")
	}
}

func TestKernelInfo(t *testing.T) {
	k, c := serveCells(t)
	k.version = "1.2.3"
	reply, _ := c.ask(wire.Shell, "kernel_info_request", nil)
	equal(t, "protocol", reply["protocol_version"], `"5.4"`)
	equal(t, "implementation", reply["implementation"], `"linewright"`)
	equal(t, "version", reply["implementation_version"], `"1.2.3"`)
	info := reply["language_info"].(object)
	if v := info["version"].(string); !strings.HasPrefix(v, "1.") {
		t.Errorf("Go version %q", v)
	}
	delete(info, "version")
	equal(t, "language", info, `{"codemirror_mode":"go","file_extension":".go","mimetype":"text/x-go","name":"go","nbconvert_exporter":"","pygments_lexer":"go"}`)
	for _, l := range reply["help_links"].([]any) {
		if link := l.(object); link["text"] == "" || !strings.HasPrefix(link["url"].(string), "https://") || len(link) != 2 {
			t.Errorf("help link %v", link)
		}
	}
}

func TestIsComplete(t *testing.T) {
	_, c := serveCells(t)
	for code, want := range map[string]string{"1+1": "complete", "func f() {": "incomplete", "func = 7q }": "invalid"} {
		reply, _ := c.ask(wire.Shell, "is_complete_request", object{"code": code})
		equal(t, code, reply["status"], `"`+want+`"`)
		if _, indented := reply["indent"].(string); indented != (want == "incomplete") {
			t.Errorf("%s: indent %v", code, reply["indent"])
		}
	}
}

func TestComplete(t *testing.T) {
	_, c := serveCells(t)
	const code = "import \"strings\"\n_ = \"żółć\" + strings.Repe"
	n := len([]rune(code))
	reply, _ := c.ask(wire.Shell, "complete_request", object{"code": code, "cursor_pos": n})
	equal(t, "matches", reply["matches"], `["Repeat"]`)
	equal(t, "range", []any{reply["cursor_start"], reply["cursor_end"]}, fmt.Sprintf("[%d,%d]", n-4, n))
	types := reply["metadata"].(object)["_jupyter_types_experimental"].([]any)
	if m := types[0].(object); m["text"] != "Repeat" || m["type"] != "function" || !strings.Contains(fmt.Sprint(m["signature"]), "count int") {
		t.Errorf("metadata %v", m)
	}
	reply, _ = c.ask(wire.Shell, "complete_request", object{"code": "nosuchthing.x"})
	equal(t, "matches of nothing", reply["matches"], `[]`)
}

func TestInspect(t *testing.T) {
	_, c := serveCells(t)
	reply, _ := c.ask(wire.Shell, "inspect_request", object{"code": "len", "cursor_pos": 3, "detail_level": 0})
	if reply["found"] != true || !strings.Contains(fmt.Sprint(reply["data"].(object)["text/plain"]), "len") {
		t.Errorf("inspect len: %v", reply)
	}
	reply, _ = c.ask(wire.Shell, "inspect_request", object{"code": "nosuchthing", "cursor_pos": 3})
	equal(t, "inspect of nothing", reply, `{"data":{},"found":false,"metadata":{},"status":"ok"}`)
}

// A cell that runs holds up nothing but cells.
func TestAnswersWhileACellRuns(t *testing.T) {
	_, c := serveCells(t)
	id := c.start("for {\n}", nil)
	for c.answer(wire.IOPub, id).Type != "execute_input" {
	}
	for _, kind := range []string{"complete_request", "inspect_request"} {
		if reply, _ := c.ask(wire.Shell, kind, object{"code": "fmt.Pri", "cursor_pos": 7}); reply["status"] != "ok" {
			t.Errorf("%s: %v", kind, reply)
		}
	}
	c.ask(wire.Shell, "is_complete_request", object{"code": "x"})
	c.ask(wire.Shell, "kernel_info_request", nil)
	c.ask(wire.Shell, "history_request", nil)
	c.ask(wire.Control, "kernel_info_request", nil)
	c.ask(wire.Control, "interrupt_request", nil)
	equal(t, "status", decode(t, c.answer(wire.Shell, id))["status"], `"error"`)
}

func TestHistory(t *testing.T) {
	result := func(context.Context, cell.Output) (*plotting.Bundle, error) { b := plain("3"); return &b, nil }
	nothing := func(context.Context, cell.Output) (*plotting.Bundle, error) { return nil, nil }
	failing := func(context.Context, cell.Output) (*plotting.Bundle, error) { return nil, errors.New("no") }
	_, c := serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
		"a := 1": nothing, "1 + 2": result, "a := [1]": failing, "b\nc": nothing,
	}})
	for _, code := range []string{"a := 1", "1 + 2", "a := 1", "a := [1]", "b\nc"} {
		c.execute(code, nil)
	}
	c.execute("1 + 2", object{"silent": true})
	c.execute("1 + 2", object{"store_history": false})
	for _, q := range []struct {
		content object
		want    string
	}{
		{object{"hist_access_type": "tail", "n": 2}, `[[1,4,"a := [1]"],[1,5,"b\nc"]]`},
		{object{"hist_access_type": "tail", "n": 0}, `[]`},
		{object{"hist_access_type": "tail", "n": -3}, `[]`},
		{object{"hist_access_type": "tail", "n": 2, "output": true, "raw": true}, `[[1,4,["a := [1]",null]],[1,5,["b\nc",null]]]`},
		{object{"hist_access_type": "range", "session": 0, "start": 2, "stop": 4}, `[[1,2,"1 + 2"],[1,3,"a := 1"]]`},
		{object{"hist_access_type": "range", "session": 1, "start": 2, "stop": 3, "output": true}, `[[1,2,["1 + 2","3"]]]`},
		{object{"hist_access_type": "range", "session": 0, "start": 5}, `[[1,5,"b\nc"]]`},
		{object{"hist_access_type": "range", "session": -1, "start": 1, "stop": 9}, `[]`},
		{object{"hist_access_type": "search", "pattern": "a*"}, `[[1,1,"a := 1"],[1,3,"a := 1"],[1,4,"a := [1]"]]`},
		{object{"hist_access_type": "search", "pattern": "a*", "unique": true}, `[[1,3,"a := 1"],[1,4,"a := [1]"]]`},
		{object{"hist_access_type": "search", "pattern": "a*", "unique": true, "n": 1}, `[[1,4,"a := [1]"]]`},
		{object{"hist_access_type": "search", "pattern": "? + [0-9]"}, `[[1,2,"1 + 2"]]`},
		{object{"hist_access_type": "search", "pattern": "*[!0-9]"}, `[[1,4,"a := [1]"],[1,5,"b\nc"]]`},
		{object{"hist_access_type": "search", "pattern": "b?c"}, `[[1,5,"b\nc"]]`},
		{object{"hist_access_type": "search", "pattern": "*[[]1]"}, `[[1,4,"a := [1]"]]`},
		{object{"hist_access_type": "search", "pattern": "1"}, `[]`},
		{object{"hist_access_type": "search", "pattern": "*[9-1]"}, `[]`},
		{object{"hist_access_type": "search", "pattern": "a := ["}, `[]`},
	} {
		reply, _ := c.ask(wire.Shell, "history_request", q.content)
		equal(t, fmt.Sprint(q.content), reply["history"], q.want)
	}
}

func TestComms(t *testing.T) {
	_, c := serve(t, &fake{})
	reply, _ := c.ask(wire.Shell, "comm_info_request", object{"target_name": "none.such"})
	equal(t, "comms", reply["comms"], `{}`)
	output := c.output(c.request(wire.Shell, "comm_open", object{"comm_id": "id1", "target_name": "none.such", "data": object{}}))
	equal(t, "answer to comm_open", find(t, output, "comm_close"), `{"comm_id":"id1","data":{}}`)
	for _, kind := range []string{"comm_msg", "comm_close"} {
		if output := c.output(c.request(wire.Shell, kind, object{"comm_id": "unknown", "data": object{}})); len(output) > 0 {
			t.Errorf("%s broadcasts %s", kind, kinds(output))
		}
	}
}

// The kernel ends after a shutdown, which it confirms on the channel that asked and to everybody, in this order and with
// idle as its last word; a cell that runs fails first.
func TestShutdown(t *testing.T) {
	for name, running := range map[string]bool{"idle": false, "busy": true} {
		for _, ch := range []wire.Channel{wire.Control, wire.Shell} {
			t.Run(name+" on "+ch.String(), func(t *testing.T) {
				k, c := serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
					"wait": func(ctx context.Context, _ cell.Output) (*plotting.Bundle, error) {
						<-ctx.Done()
						return nil, context.Cause(ctx)
					},
				}})
				c.ask(wire.Shell, "kernel_info_request", object{}) // a shutdown does not wait for a new client's subscription
				var cells []string
				if running {
					cells = []string{c.start("wait", nil), c.start("wait", nil)}
					for c.answer(wire.IOPub, cells[0]).Type != "execute_input" {
					}
				}
				reply, output := c.ask(ch, "shutdown_request", object{"restart": true})
				equal(t, "reply", reply, `{"restart":true,"status":"ok"}`)
				equal(t, "broadcast", find(t, output, "shutdown_reply"), `{"restart":true,"status":"ok"}`)
				if running {
					equal(t, "the cell", decode(t, c.answer(wire.Shell, cells[0]))["evalue"], `"the kernel shuts down"`)
					equal(t, "the cell behind it", decode(t, c.answer(wire.Shell, cells[1]))["status"], `"aborted"`)
				}
				select {
				case <-k.ended:
				case <-time.After(5 * time.Second):
					t.Error("the kernel does not end")
				}
			})
		}
	}
}

// A kernel without an interpreter ends and says why.
func TestNoInterpreter(t *testing.T) {
	log := slog.New(slog.DiscardHandler)
	server, err := wire.Listen(wire.Connection{Transport: "tcp", IP: "127.0.0.1"}, log)
	if err != nil {
		t.Fatal(err)
	}
	defer server.Close()
	k := newKernel(server, log, func() (interpreter, error) { return nil, errors.New("out of order") })
	if err := k.run(context.Background()); err == nil || err.Error() != "session: no interpreter: out of order" {
		t.Errorf("run ends with %v", err)
	}
}
