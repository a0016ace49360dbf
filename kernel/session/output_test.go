package session

import (
	"bytes"
	"context"
	"encoding/base64"
	"encoding/json"
	"math"
	"os"
	"regexp"
	"strings"
	"testing"
	"unicode/utf8"

	"pgregory.net/rapid"

	"linewright/kernel/cell"
	"linewright/kernel/wire"
	"linewright/plotting"
)

// run serves one cell, "cell", and returns what it broadcasts without execute_input.
func run(t *testing.T, f func(out cell.Output)) []*wire.Message {
	t.Helper()
	_, c := serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
		"cell": func(_ context.Context, out cell.Output) (*plotting.Bundle, error) { f(out); return nil, nil },
	}})
	_, output := c.execute("cell", nil)
	return output[1:]
}

// Many small pieces become few messages; what is shown in between keeps its place.
func TestStreamsAreCollected(t *testing.T) {
	output := run(t, func(out cell.Output) {
		for range 1000 {
			out.Stream("stdout", []byte("line\n"))
		}
		out.Stream("stderr", []byte("err"))
		out.Display(plain("shown"), "", false)
		out.Stream("stdout", []byte("a"))
		out.Stream("stdout", []byte("b"))
		out.Clear(true)
		out.Stream("stdout", []byte("c"))
	})
	if got := kinds(output); got != "stream stream display_data stream clear_output stream" {
		t.Errorf("messages %s", got)
	}
	equal(t, "clear_output", find(t, output, "clear_output"), `{"wait":true}`)
	if got := text(t, output, "stdout"); got != strings.Repeat("line\n", 1000)+"abc" {
		t.Errorf("%d bytes on stdout", len(got))
	}
	if got := text(t, output, "stderr"); got != "err" {
		t.Errorf("stderr %q", got)
	}
}

// Text does not wait for the cell's end, and much of it does not wait at all.
func TestStreamsAreSentInTime(t *testing.T) {
	next := make(chan bool)
	_, c := serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
		"cell": func(_ context.Context, out cell.Output) (*plotting.Bundle, error) {
			out.Stream("stdout", []byte("soon"))
			<-next
			out.Stream("stdout", make([]byte, collectSize))
			<-next
			return nil, nil
		},
	}})
	id := c.start("cell", object{"silent": true})
	for _, want := range []int{len("soon"), collectSize} {
		m := c.answer(wire.IOPub, id)
		for m.Type != "stream" {
			m = c.answer(wire.IOPub, id)
		}
		if got := decode(t, m)["text"].(string); len(got) != want {
			t.Errorf("%d bytes, want %d", len(got), want)
		}
		next <- true
	}
}

// Characters are whole however they are written; bytes that are no UTF-8 are replaced and nothing else is lost.
func TestStreamsKeepCharacters(t *testing.T) {
	const sent = "żółć 日本 😀"
	output := run(t, func(out cell.Output) {
		for i := range len(sent) {
			out.Stream("stdout", []byte{sent[i]})
			out.Clear(false) // sends what is complete
		}
		out.Stream("stdout", []byte("\xff|\xe6\x97"))
	})
	for _, m := range output {
		if m.Type == "stream" && !utf8.Valid(m.Content) {
			t.Errorf("%q", m.Content)
		}
	}
	if got := text(t, output, "stdout"); got != sent+"\ufffd|\ufffd\ufffd" {
		t.Errorf("%q", got)
	}
}

// What comes from goroutines after their cell has ended belongs to that cell.
func TestOutputKeepsItsCell(t *testing.T) {
	later := make(chan cell.Output, 1)
	_, c := serve(t, &fake{cells: map[string]func(context.Context, cell.Output) (*plotting.Bundle, error){
		"first": func(_ context.Context, out cell.Output) (*plotting.Bundle, error) { later <- out; return nil, nil },
		"second": func(_ context.Context, out cell.Output) (*plotting.Bundle, error) {
			(<-later).Stream("stdout", []byte("of the first"))
			return nil, nil
		},
	}})
	first := c.start("first", nil)
	c.output(first)
	_, output := c.execute("second", nil)
	if got := kinds(output); got != "execute_input" {
		t.Errorf("the second cell broadcasts %s", got)
	}
	equal(t, "output", decode(t, c.answer(wire.IOPub, first))["text"], `"of the first"`)
}

func TestDisplay(t *testing.T) {
	output := run(t, func(out cell.Output) {
		out.Display(plain("one"), "slot", false)
		out.Display(plain("two"), "slot", true)
	})
	equal(t, "display", find(t, output, "display_data"), `{"data":{"text/plain":"one"},"metadata":{},"transient":{"display_id":"slot"}}`)
	equal(t, "update", find(t, output, "update_display_data"), `{"data":{"text/plain":"two"},"metadata":{},"transient":{"display_id":"slot"}}`)
}

// Texts go as they are, binary forms as one line of base64, JSON as JSON; what JSON cannot hold does not spoil the rest.
func TestBundle(t *testing.T) {
	png := bytes.Repeat([]byte{0x89, 'P', 'N', 'G', 0}, 100)
	b := plotting.Bundle{
		Data: map[string]any{
			"text/plain": "<a> & \"b\"\u2028", "image/png": png, "application/vnd.x+json": map[string]any{"k": []int{1, 2}},
			"application/bad+json": math.NaN(),
		},
		Metadata: map[string]any{"image/png": map[string]int{"width": 320, "height": 200}},
	}
	text := raw(map[string]any{"execution_count": 3}, b)
	var got object
	if err := json.Unmarshal(text, &got); err != nil {
		t.Fatal(err)
	}
	data := got["data"].(object)
	if len(data) != 3 || data["text/plain"] != "<a> & \"b\"\u2028" || data["image/png"] != base64.StdEncoding.EncodeToString(png) {
		t.Errorf("data %v", data)
	}
	equal(t, "JSON form", data["application/vnd.x+json"], `{"k":[1,2]}`)
	equal(t, "metadata", got["metadata"], `{"image/png":{"height":200,"width":320}}`)
	equal(t, "count", got["execution_count"], "3")
	if !bytes.Contains(text, []byte("<a> & ")) {
		t.Errorf("escapes that no front end needs: %s", text)
	}
}

// A text that is appended as JSON is what package json reads.
func TestAppendText(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := string(rapid.OneOf(rapid.SliceOf(rapid.Byte()), rapid.Map(rapid.String(), func(s string) []byte { return []byte(s) })).Draw(t, "text"))
		var got string
		if err := json.Unmarshal(appendText(nil, s), &got); err != nil {
			t.Fatalf("%q: %v", s, err)
		}
		var want string // package json replaces as we do
		b, _ := json.Marshal(s)
		json.Unmarshal(b, &want)
		if got != want {
			t.Fatalf("%q becomes %q, want %q", s, got, want)
		}
	})
}

// Of one cell no more than the limit is sent; the cell says so, and the file that it names has everything.
func TestTextLimit(t *testing.T) {
	t.Setenv("TMPDIR", t.TempDir())
	chunk := bytes.Repeat([]byte("0123456789abcde\n"), 1<<16) // 1 MB
	const chunks = textLimit>>20 + 3
	output := run(t, func(out cell.Output) {
		for range chunks {
			out.Stream("stdout", chunk)
		}
	})
	sent := text(t, output, "stdout")
	if len(sent) < textLimit || len(sent) > textLimit+1000 {
		t.Errorf("%d bytes sent, want %d and a note", len(sent), textLimit)
	}
	path := regexp.MustCompile(`the whole is in (\S+)\]`).FindStringSubmatch(sent[textLimit:])
	if path == nil {
		t.Fatalf("the note names no file: %q", sent[textLimit:])
	}
	if whole, err := os.ReadFile(path[1]); err != nil || !bytes.Equal(whole, bytes.Repeat(chunk, chunks)) {
		t.Errorf("the file has %d bytes (%v), want %d", len(whole), err, chunks<<20)
	}
	if got := text(t, output, "stderr"); !strings.Contains(got, "bytes of text in all, 3145728 not shown") {
		t.Errorf("at the end: %q", got)
	}
}

// Without a file the text is sent all the same, and the cell says that the rest is lost.
func TestTextLimitWithoutFile(t *testing.T) {
	t.Setenv("TMPDIR", t.TempDir()+"/none")
	output := run(t, func(out cell.Output) {
		for range textLimit>>20 + 1 {
			out.Stream("stdout", make([]byte, 1<<20))
		}
	})
	if sent := text(t, output, "stdout"); !strings.HasPrefix(sent[textLimit:], "\n[linewright: this cell has put out 64 MB of text; the rest is not shown here, the whole is not kept: no file can be written") {
		t.Errorf("the note: %q", sent[textLimit:])
	}
}

// A record stops at its limit.
func TestRecordLimit(t *testing.T) {
	t.Setenv("TMPDIR", t.TempDir())
	var r record
	r.add(make([]byte, recordFrom+1))
	r.write()
	r.size = recordMost - 3 // as if so much had been written
	r.add([]byte("abcdef"))
	if r.size != recordMost || !r.full {
		t.Errorf("%d bytes kept, full %t", r.size, r.full)
	}
	info, err := r.file.Stat()
	if err != nil || info.Size() != recordFrom+1+3 {
		t.Errorf("the file has %d bytes, %v", info.Size(), err)
	}
	r.end()
}

// A cell below the limit is sent whole and leaves no file.
func TestTextBelowTheLimit(t *testing.T) {
	dir := t.TempDir()
	t.Setenv("TMPDIR", dir)
	output := run(t, func(out cell.Output) {
		for range 4 {
			out.Stream("stdout", make([]byte, 1<<20))
		}
	})
	if n := len(text(t, output, "stdout")); n != 4<<20 {
		t.Errorf("%d bytes", n)
	}
	if files, err := os.ReadDir(dir); err != nil || len(files) > 0 {
		t.Errorf("files left: %v, %v", files, err)
	}
}

// Cells in the real interpreter: streams, slots, figures, clearing, a large display.
func TestCellOutput(t *testing.T) {
	_, c := serveCells(t)
	for code, want := range map[string]string{
		`println("x")`:                                  "x\n",
		`fmt.Println("żółć 日本 😀")`:                      "żółć 日本 😀\n",
		"for i := 0; i < 3; i++ {\n\tfmt.Println(i)\n}": "0\n1\n2\n",
		"import \"sync\"\nvar w sync.WaitGroup\nw.Add(1)\ngo func() { fmt.Print(\"g\"); w.Done() }()\nw.Wait()": "g",
	} {
		_, output := c.execute(code, nil)
		if got := text(t, output, "stdout") + text(t, output, "stderr"); got != want {
			t.Errorf("%s: %q, want %q", code, got, want)
		}
	}
	_, output := c.execute(`page.Slot("best").Set("one")`, nil)
	equal(t, "slot", find(t, output, "display_data"), `{"data":{"text/plain":"one"},"metadata":{},"transient":{"display_id":"best"}}`)
	_, output = c.execute(`page.Slot("best").Set("two")`, nil)
	equal(t, "slot again", find(t, output, "update_display_data"), `{"data":{"text/plain":"two"},"metadata":{},"transient":{"display_id":"best"}}`)
	_, output = c.execute(`page.Clear()`, nil)
	equal(t, "clear", find(t, output, "clear_output"), `{"wait":true}`)
	_, output = c.execute("p, err := spectrum.Exact(linecode.AMI(), pulse.Train{})\npage.Show(plotting.Spectrum(p))", nil)
	data := find(t, output, "display_data")["data"].(object)
	for _, kind := range []string{"image/svg+xml", "image/png", "text/plain"} {
		if s, ok := data[kind].(string); !ok || s == "" || kind == "image/png" && strings.Contains(s, "\n") {
			t.Errorf("form %s of a figure: %.40q", kind, s)
		}
	}
	_, output = c.execute("import \"strings\"\npage.Show(strings.Repeat(\"A\", 10<<20))", nil)
	if n := len(find(t, output, "display_data")["data"].(object)["text/plain"].(string)); n != 10<<20 {
		t.Errorf("a display of 10 MiB has %d bytes", n)
	}
}

func BenchmarkRoundTrip(b *testing.B) {
	_, c := serveCells(b)
	c.execute("1+1", nil)
	for b.Loop() {
		c.execute("1+1", nil)
	}
}

func BenchmarkText(b *testing.B) {
	_, c := serveCells(b)
	b.SetBytes(10 << 20)
	for b.Loop() {
		c.execute("import \"strings\"\nfor i := 0; i < 10240; i++ {\n\tfmt.Println(strings.Repeat(\"x\", 1023))\n}", nil)
	}
}

func BenchmarkLines(b *testing.B) {
	_, c := serveCells(b)
	for b.Loop() {
		c.execute("for i := 0; i < 20000; i++ {\n\tfmt.Println(i)\n}", nil)
	}
	b.ReportMetric(20000*float64(b.N)/b.Elapsed().Seconds(), "lines/s")
}
