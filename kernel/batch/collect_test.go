package batch

import (
	"encoding/json"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"linewright/kernel/wire"
)

// message is a broadcast that the request r caused.
func message(kind, content string) *wire.Message {
	return &wire.Message{Type: kind, ParentID: "r", Content: json.RawMessage(content)}
}

// collect returns the outputs that broadcasts leave in a cell.
func collect(t *testing.T, messages ...*wire.Message) []*Output {
	t.Helper()
	c := newCollector()
	cell := &Cell{Type: "code"}
	c.expect("r", cell)
	for _, m := range messages {
		if err := c.take(m); err != nil {
			t.Fatal(err)
		}
	}
	c.finish()
	return cell.Outputs
}

// collected is one output of every type.
func collected(t *testing.T) []*Output {
	return collect(t,
		message("stream", `{"name": "stdout", "text": "a\nb\n"}`),
		message("display_data", `{"data": {"text/plain": "p", "image/png": "iVBORw0KGgo=", "image/svg+xml": "<svg>\n</svg>\n", "application/x+json": {"k": [1.5, "l\nm"]}}, "metadata": {"image/png": {"width": 320}}, "transient": {"display_id": "d"}}`),
		message("execute_result", `{"data": {"text/plain": "3\n4"}, "metadata": {}, "execution_count": 7}`),
		message("error", `{"ename": "panic", "evalue": "bad", "traceback": ["panic: bad", "cell[1]:1:2"]}`),
	)
}

func TestCollect(t *testing.T) {
	out := func(text string) *Output { return &Output{Type: stream, Stream: "stdout", Text: text} }
	shown := func(text string) *Output {
		return &Output{Type: displayData, Data: map[string]any{"text/plain": text}, Metadata: map[string]any{}}
	}
	say := func(text string) *wire.Message { return message("stream", `{"name": "stdout", "text": "`+text+`"}`) }
	show := func(kind, text, id string) *wire.Message {
		return message(kind, `{"data": {"text/plain": "`+text+`"}, "metadata": {}, "transient": {"display_id": "`+id+`"}}`)
	}
	clear := func(wait string) *wire.Message { return message("clear_output", `{"wait": `+wait+`}`) }
	elsewhere := show("update_display_data", "new", "d")
	elsewhere.ParentID = "another cell"

	for _, c := range []struct {
		name     string
		messages []*wire.Message
		want     []*Output
	}{
		{"one stream is one output", []*wire.Message{say("a"), say("b\\n"), say("c")}, []*Output{out("ab\nc")}},
		{"streams keep their order", []*wire.Message{say("a"), message("stream", `{"name": "stderr", "text": "e"}`), say("b")},
			[]*Output{out("a"), {Type: stream, Stream: "stderr", Text: "e"}, out("b")}},
		{"a display between parts a stream", []*wire.Message{say("a"), show("display_data", "x", ""), say("b")}, []*Output{out("a"), shown("x"), out("b")}},
		{"an update changes every place", []*wire.Message{show("display_data", "old", "d"), show("display_data", "older", "d"), elsewhere},
			[]*Output{shown("new"), shown("new")}},
		{"an update of nothing is nothing", []*wire.Message{elsewhere}, nil},
		{"another id is left alone", []*wire.Message{show("display_data", "old", "e"), elsewhere}, []*Output{shown("old")}},
		{"clear", []*wire.Message{say("a"), clear("false"), say("b")}, []*Output{out("b")}},
		{"clear and wait, and nothing comes", []*wire.Message{say("a"), clear("true")}, []*Output{out("a")}},
		{"clear and wait for a stream", []*wire.Message{say("a"), clear("true"), say("b"), say("c")}, []*Output{out("bc")}},
		{"clear and wait for a display", []*wire.Message{say("a"), clear("true"), show("display_data", "x", ""), say("b")}, []*Output{shown("x"), out("b")}},
		{"what was cleared is not updated", []*wire.Message{show("display_data", "old", "d"), clear("false"), elsewhere, show("display_data", "later", "d")},
			[]*Output{shown("later")}},
		{"a line that rewrites itself", []*wire.Message{say("10 %\\r20"), say(" %\\r30 %"), say("\\ndone\\n")}, []*Output{out("30 %\ndone\n")}},
		{"what belongs to nobody", []*wire.Message{{Type: "stream", ParentID: "x", Content: json.RawMessage(`{"name": "stdout", "text": "a"}`)}}, nil},
	} {
		t.Run(c.name, func(t *testing.T) {
			got := collect(t, c.messages...)
			if diff := cmp.Diff(c.want, got, cmpopts.IgnoreUnexported(Output{})); diff != "" {
				t.Error(diff)
			}
		})
	}
}

func TestCollectRefusesMalformed(t *testing.T) {
	c := newCollector()
	c.expect("r", &Cell{})
	if err := c.take(message("stream", `{"name": 1}`)); err == nil {
		t.Error("a stream whose name is a number was taken")
	}
}

func TestOverwrite(t *testing.T) {
	for in, want := range map[string]string{
		"plain\n":          "plain\n",
		"a\r\nb\r\r\n":     "a\nb\n", // the line ends of other systems
		"abc\rx":           "xbc",    // what is not overwritten stays, as in a terminal
		"ab\b\bc":          "cb",
		"\b\bx":            "x",
		"50 %\r":           "50 %", // the cursor alone erases nothing
		"ä\rö\nü\rx\nlast": "ö\nx\nlast",
	} {
		if got := overwrite(in); got != want {
			t.Errorf("overwrite(%q) = %q, want %q", in, got, want)
		}
	}
}
