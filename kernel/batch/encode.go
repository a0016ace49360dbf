package batch

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"maps"
	"slices"
)

// Encode writes the notebook in the form in which Jupyter writes it, so that saving there changes no line: keys in
// order, one space of indent, text beyond ASCII as it stands.
func (n *Notebook) Encode(w io.Writer) error {
	cells := make([]any, len(n.Cells))
	for i, c := range n.Cells {
		fields := maps.Clone(c.fields)
		fields["source"] = lines(c.Source)
		if c.Type == "code" {
			outputs := make([]any, len(c.Outputs))
			for j, o := range c.Outputs {
				outputs[j] = o.tree()
			}
			fields["outputs"] = outputs
			fields["execution_count"] = nil
			if c.Count > 0 {
				fields["execution_count"] = c.Count
			}
		}
		cells[i] = fields
	}
	top := maps.Clone(n.fields)
	top["cells"], top["metadata"] = cells, n.Metadata
	e := encoder{}
	if err := e.value(top, 0); err != nil {
		return err
	}
	e.WriteByte('\n')
	_, err := w.Write(e.Bytes())
	return err
}

// encoder writes JSON trees of nil, bool, int, json.Number, string, []string, []any and map[string]any.
type encoder struct{ bytes.Buffer }

func (e *encoder) value(v any, depth int) error {
	switch v := v.(type) {
	case nil:
		e.WriteString("null")
	case bool, int:
		fmt.Fprint(e, v)
	case json.Number:
		e.WriteString(v.String())
	case string:
		e.text(v)
	case []string:
		return e.list('[', ']', len(v), depth, func(i int) error {
			e.text(v[i])
			return nil
		})
	case []any:
		return e.list('[', ']', len(v), depth, func(i int) error { return e.value(v[i], depth+1) })
	case map[string]any:
		keys := slices.Sorted(maps.Keys(v))
		return e.list('{', '}', len(keys), depth, func(i int) error {
			e.text(keys[i])
			e.WriteString(": ")
			return e.value(v[keys[i]], depth+1)
		})
	default:
		return fmt.Errorf("batch: a %T cannot be part of a notebook", v)
	}
	return nil
}

// list writes n items between two brackets, each on a line of its own.
func (e *encoder) list(open, shut byte, n, depth int, item func(i int) error) error {
	e.WriteByte(open)
	for i := range n {
		if i > 0 {
			e.WriteByte(',')
		}
		e.newline(depth + 1)
		if err := item(i); err != nil {
			return err
		}
	}
	if n > 0 {
		e.newline(depth)
	}
	e.WriteByte(shut)
	return nil
}

func (e *encoder) newline(depth int) {
	e.WriteByte('\n')
	for range depth {
		e.WriteByte(' ')
	}
}

// text writes a JSON string with no more escapes than JSON needs, as Python's json module does.
func (e *encoder) text(s string) {
	e.WriteByte('"')
	from := 0
	for i := range len(s) {
		c := s[i]
		if c >= ' ' && c != '"' && c != '\\' {
			continue
		}
		e.WriteString(s[from:i])
		from = i + 1
		switch c {
		case '"', '\\':
			e.WriteByte('\\')
			e.WriteByte(c)
		case '\n':
			e.WriteString(`\n`)
		case '\r':
			e.WriteString(`\r`)
		case '\t':
			e.WriteString(`\t`)
		case '\b':
			e.WriteString(`\b`)
		case '\f':
			e.WriteString(`\f`)
		default:
			fmt.Fprintf(e, `\u%04x`, c)
		}
	}
	e.WriteString(s[from:])
	e.WriteByte('"')
}
