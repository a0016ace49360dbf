package batch

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"strings"
	"unicode/utf8"
)

// The types of outputs in nbformat 4.
const (
	stream        = "stream"
	displayData   = "display_data"
	executeResult = "execute_result"
	failure       = "error"
)

// Output is one output of a code cell. Which fields it has depends on its type.
type Output struct {
	Type string // "stream", "display_data", "execute_result" or "error"

	Stream string // of a stream: "stdout" or "stderr"
	Text   string // of a stream

	Data     map[string]any // of a display or result: by MIME type, a string, or any tree for JSON types
	Metadata map[string]any // of a display or result: by MIME type
	Count    int            // of a result: the cell's execution count

	Name      string   // of an error
	Value     string   // of an error
	Traceback []string // of an error: lines, perhaps with terminal colours

	displayID string        // under which a display may be updated
	pending   *bytes.Buffer // a stream's text while it comes in
}

// parseOutput reads an output as a notebook stores it.
func parseOutput(v any) (*Output, error) {
	fields, ok := v.(map[string]any)
	if !ok {
		return nil, errors.New("it is no object")
	}
	o := &Output{}
	o.Type, _ = fields["output_type"].(string)
	switch o.Type {
	case stream:
		o.Stream, _ = fields["name"].(string)
		if o.Text, ok = text(fields["text"]); !ok || o.Stream == "" {
			return nil, errors.New("a stream needs a name and a text")
		}
	case displayData, executeResult:
		if o.Data, ok = fields["data"].(map[string]any); !ok {
			return nil, fmt.Errorf("%s has no data", o.Type)
		}
		for mime, v := range o.Data {
			if joined, ok := text(v); ok && !isJSON(mime) {
				o.Data[mime] = joined
			}
		}
		o.Metadata, _ = fields["metadata"].(map[string]any)
		o.Count, _ = natural(fields["execution_count"])
	case failure:
		o.Name, _ = fields["ename"].(string)
		o.Value, _ = fields["evalue"].(string)
		lines, _ := fields["traceback"].([]any)
		for _, l := range lines {
			s, ok := l.(string)
			if !ok {
				return nil, errors.New("its traceback is no list of texts")
			}
			o.Traceback = append(o.Traceback, s)
		}
	default:
		return nil, fmt.Errorf("output_type is %s; stream, display_data, execute_result and error are known", compact(fields["output_type"]))
	}
	return o, nil
}

// tree returns the output as a notebook stores it.
func (o *Output) tree() map[string]any {
	t := map[string]any{"output_type": o.Type}
	switch o.Type {
	case stream:
		t["name"], t["text"] = o.Stream, lines(o.Text)
	case failure:
		t["ename"], t["evalue"] = o.Name, o.Value
		t["traceback"] = append([]string{}, o.Traceback...)
	default:
		data := map[string]any{}
		for mime, v := range o.Data {
			if s, ok := v.(string); ok && isText(mime) {
				data[mime] = lines(s)
			} else {
				data[mime] = v
			}
		}
		t["data"], t["metadata"] = data, map[string]any{}
		if o.Metadata != nil {
			t["metadata"] = o.Metadata
		}
		if o.Type == executeResult {
			t["execution_count"] = nil
			if o.Count > 0 {
				t["execution_count"] = o.Count
			}
		}
	}
	return t
}

// text returns the data of a MIME type that is text.
func (o *Output) text(mime string) (string, bool) {
	s, ok := o.Data[mime].(string)
	return s, ok
}

// isJSON reports whether a notebook stores data of the MIME type as a tree.
func isJSON(mime string) bool {
	return mime == "application/json" || strings.HasPrefix(mime, "application/") && strings.HasSuffix(mime, "+json")
}

// isText reports whether Jupyter stores data of the MIME type as a list of lines.
func isText(mime string) bool {
	return strings.HasPrefix(mime, "text/") || mime == "image/svg+xml" || mime == "application/javascript"
}

// lines splits s after each line end, which stays. The line ends are those of Python's str.splitlines, by which
// Jupyter splits when it saves a notebook.
func lines(s string) []string {
	all := []string{}
	start := 0
	for i := 0; i < len(s); {
		r, size := utf8.DecodeRuneInString(s[i:])
		i += size
		switch r {
		case '\r':
			if i < len(s) && s[i] == '\n' {
				i++
			}
		case '\n', '\v', '\f', 0x1c, 0x1d, 0x1e, 0x85, 0x2028, 0x2029:
		default:
			continue
		}
		all = append(all, s[start:i])
		start = i
	}
	if start < len(s) {
		all = append(all, s[start:])
	}
	return all
}

// decodeTree decodes JSON with its numbers as they are written.
func decodeTree(b []byte, v any) error {
	dec := json.NewDecoder(bytes.NewReader(b))
	dec.UseNumber()
	return dec.Decode(v)
}
