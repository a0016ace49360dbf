package batch

import (
	"bytes"
	"strings"

	"linewright/kernel/wire"
)

// collector turns what a kernel broadcasts into the outputs of cells, as a front end does.
type collector struct {
	sinks map[string]*sink     // by the msg_id of the request that executes the cell
	shown map[string][]*Output // displays that can be updated, by display_id
}

// sink is one cell's outputs while they come in.
type sink struct {
	cell  *Cell
	clear bool // the outputs go when the next one comes
}

func newCollector() *collector {
	return &collector{map[string]*sink{}, map[string][]*Output{}}
}

// expect makes the cell the place for what the request with that msg_id causes, also after it is done.
func (c *collector) expect(id string, cell *Cell) { c.sinks[id] = &sink{cell: cell} }

// content is the union of what the broadcasts that matter here carry.
type content struct {
	State string `json:"execution_state"`

	Name string `json:"name"`
	Text string `json:"text"`

	Data      map[string]any `json:"data"`
	Metadata  map[string]any `json:"metadata"`
	Count     int            `json:"execution_count"`
	Transient struct {
		DisplayID string `json:"display_id"`
	} `json:"transient"`

	Wait bool `json:"wait"`

	EName     string   `json:"ename"`
	EValue    string   `json:"evalue"`
	Traceback []string `json:"traceback"`
}

// take takes one broadcast. A message that is not as the protocol has it is an error.
func (c *collector) take(m *wire.Message) error {
	var v content
	if err := decodeTree(m.Content, &v); err != nil {
		return err
	}
	if m.Type == "update_display_data" { // from any cell, also one that is not known here
		for _, o := range c.shown[v.Transient.DisplayID] {
			o.Data, o.Metadata = v.Data, v.Metadata
		}
		return nil
	}
	s := c.sinks[m.ParentID]
	if s == nil {
		return nil
	}
	switch m.Type {
	case "execute_input":
		s.cell.Count = v.Count
	case stream:
		s.stream(c, v.Name, v.Text)
	case displayData, executeResult:
		o := &Output{Type: m.Type, Data: v.Data, Metadata: v.Metadata, displayID: v.Transient.DisplayID}
		if m.Type == executeResult {
			o.Count = v.Count
		}
		s.add(c, o)
		if o.displayID != "" {
			c.shown[o.displayID] = append(c.shown[o.displayID], o)
		}
	case failure:
		s.add(c, &Output{Type: failure, Name: v.EName, Value: v.EValue, Traceback: v.Traceback})
	case "clear_output":
		if s.clear = v.Wait; !v.Wait {
			s.empty(c)
		}
	}
	return nil
}

func (s *sink) add(c *collector, o *Output) {
	if s.clear {
		s.clear = false
		s.empty(c)
	}
	s.cell.Outputs = append(s.cell.Outputs, o)
}

// stream appends to the last output if it is the same stream.
func (s *sink) stream(c *collector, name, text string) {
	if n := len(s.cell.Outputs); n > 0 && !s.clear {
		if last := s.cell.Outputs[n-1]; last.Type == stream && last.Stream == name {
			last.pending.WriteString(text)
			return
		}
	}
	o := &Output{Type: stream, Stream: name, pending: new(bytes.Buffer)}
	o.pending.WriteString(text)
	s.add(c, o)
}

// empty removes the cell's outputs; displays among them are no longer updated.
func (s *sink) empty(c *collector) {
	for _, gone := range s.cell.Outputs {
		all := c.shown[gone.displayID]
		for i, o := range all {
			if o == gone {
				c.shown[gone.displayID] = append(all[:i:i], all[i+1:]...)
				break
			}
		}
	}
	s.cell.Outputs = nil
}

// finish gives streams the text that a reader sees in the end.
func (c *collector) finish() {
	for _, s := range c.sinks {
		for _, o := range s.cell.Outputs {
			if o.pending != nil {
				o.Text, o.pending = overwrite(o.pending.String()), nil
			}
		}
	}
}

// overwrite applies carriage returns and backspaces within their line, as front ends do before they show or save a
// stream: of a progress line that rewrites itself the last state stays.
func overwrite(s string) string {
	if !strings.ContainsAny(s, "\r\b") {
		return s
	}
	var b strings.Builder
	for l := range strings.Lines(s) {
		body, end := l, ""
		if strings.HasSuffix(l, "\n") {
			body, end = strings.TrimRight(l[:len(l)-1], "\r"), "\n"
		}
		b.WriteString(overwriteLine(body))
		b.WriteString(end)
	}
	return b.String()
}

func overwriteLine(s string) string {
	if !strings.ContainsAny(s, "\r\b") {
		return s
	}
	var out []rune
	col := 0
	for _, r := range s {
		switch {
		case r == '\r':
			col = 0
		case r == '\b':
			col = max(col-1, 0)
		case col < len(out):
			out[col] = r
			col++
		default:
			out = append(out, r)
			col++
		}
	}
	return string(out)
}
