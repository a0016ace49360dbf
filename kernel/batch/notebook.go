package batch

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"regexp"
	"strings"
	"unicode/utf8"
)

// MaxSize is the largest notebook file that is read, in bytes. Larger ones are refused before anything is read.
const MaxSize = 256 << 20

// Notebook is one .ipynb file.
type Notebook struct {
	Minor    int            // of nbformat 4
	Metadata map[string]any // the notebook's own metadata
	Cells    []*Cell

	fields map[string]any // every other top-level field
}

// Cell is one cell of a notebook.
type Cell struct {
	Type    string // "code", "markdown" or "raw"
	ID      string // empty before nbformat 4.5
	Source  string
	Outputs []*Output // of code cells
	Count   int       // execution count of a code cell; 0 means not executed

	fields map[string]any // the cell as it stands in the file
}

// Tagged reports whether the cell's metadata carries the tag.
func (c *Cell) Tagged(tag string) bool {
	meta, _ := c.fields["metadata"].(map[string]any)
	tags, _ := meta["tags"].([]any)
	for _, t := range tags {
		if t == tag {
			return true
		}
	}
	return false
}

// blank reports whether the cell has nothing to execute.
func (c *Cell) blank() bool { return strings.TrimSpace(c.Source) == "" }

// Code returns the code cells that have something to execute, in order.
func (n *Notebook) Code() []*Cell {
	var code []*Cell
	for _, c := range n.Cells {
		if c.Type == "code" && !c.blank() {
			code = append(code, c)
		}
	}
	return code
}

// Read reads the notebook in the named file. Its errors are one line, with the file's name and, where the trouble has
// a place, the line; a file that is no notebook of nbformat 4 for cells in Go, or that has no code, is refused.
func Read(name string) (*Notebook, error) {
	info, err := os.Stat(name)
	if err != nil {
		return nil, plain(name, err)
	}
	if !info.Mode().IsRegular() {
		return nil, fmt.Errorf("%s: not a file", name)
	}
	if info.Size() > MaxSize {
		return nil, fmt.Errorf("%s: %d bytes; notebooks of more than %d MB are not read", name, info.Size(), MaxSize>>20)
	}
	data, err := os.ReadFile(name)
	if err != nil {
		return nil, plain(name, err)
	}
	n, err := parse(data)
	if err != nil {
		var at *placeError
		if errors.As(err, &at) {
			return nil, fmt.Errorf("%s:%d: %w", name, line(data, at.offset), err)
		}
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	return n, nil
}

// plain says what is wrong with a file without the name of the system call.
func plain(name string, err error) error {
	var p *fs.PathError
	if errors.As(err, &p) {
		err = p.Err
	}
	return fmt.Errorf("%s: %w", name, err)
}

// placeError is an error at a byte offset of the file.
type placeError struct {
	offset int64
	text   string
}

func (e *placeError) Error() string { return e.text }

func at(offset int64, format string, args ...any) error {
	return &placeError{offset, fmt.Sprintf(format, args...)}
}

// line returns the number of the line, from 1, that holds the byte at offset.
func line(data []byte, offset int64) int {
	offset = min(offset, int64(len(data)))
	return 1 + bytes.Count(data[:offset], []byte("\n"))
}

// parse reads a notebook from the bytes of its file.
func parse(data []byte) (*Notebook, error) {
	if err := wellFormed(data); err != nil {
		return nil, err
	}
	top, cells, err := split(data)
	if err != nil {
		return nil, err
	}
	n := &Notebook{fields: top}
	if n.Minor, err = version(top); err != nil {
		return nil, err
	}
	if cells == nil {
		return nil, errors.New("not a notebook: it has no list of cells")
	}
	var ok bool
	if n.Metadata, ok = top["metadata"].(map[string]any); !ok {
		return nil, errors.New("not a notebook: its metadata is missing or no object")
	}
	if err := language(n.Metadata); err != nil {
		return nil, err
	}
	ids := map[string]int{}
	for i, raw := range *cells {
		c, err := n.cell(raw, i+1, ids)
		if err != nil {
			return nil, err
		}
		n.Cells = append(n.Cells, c)
	}
	if len(n.Code()) == 0 {
		return nil, errors.New("no code: none of its cells has anything to execute")
	}
	n.identify(ids)
	return n, nil
}

// wellFormed checks that data is one JSON text in UTF-8.
func wellFormed(data []byte) error {
	var raw json.RawMessage
	if err := json.Unmarshal(data, &raw); err != nil {
		var syntax *json.SyntaxError
		if errors.As(err, &syntax) {
			return at(max(syntax.Offset-1, 0), "not JSON: %s at byte %d", syntax, max(syntax.Offset-1, 0))
		}
		return fmt.Errorf("not JSON: %w", err)
	}
	if utf8.Valid(data) {
		return nil
	}
	i := 0
	for i < len(data) {
		r, size := utf8.DecodeRune(data[i:])
		if r == utf8.RuneError && size == 1 {
			break
		}
		i += size
	}
	return at(int64(i), "not UTF-8: byte 0x%02X at byte %d", data[i], i)
}

// rawCell is a cell before it is looked at, and where it starts.
type rawCell struct {
	offset int64
	value  any
}

// split decodes a well-formed file into its top-level fields without the cells, and the cells with their places; no
// list of cells gives nil. Numbers stay as they are written.
func split(data []byte) (map[string]any, *[]rawCell, error) {
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.UseNumber()
	if t, err := dec.Token(); err != nil || t != json.Delim('{') {
		return nil, nil, errors.New("not a notebook: it is no JSON object")
	}
	top := map[string]any{}
	var cells *[]rawCell
	for dec.More() {
		key, err := dec.Token()
		if err != nil {
			return nil, nil, err
		}
		if key != "cells" {
			var v any
			if err := dec.Decode(&v); err != nil {
				return nil, nil, err
			}
			top[key.(string)] = v
			continue
		}
		if t, err := dec.Token(); err != nil || t != json.Delim('[') {
			return nil, nil, errors.New("not a notebook: its cells are no list")
		}
		cells = &[]rawCell{}
		for dec.More() {
			start := dec.InputOffset()
			start += int64(len(data[start:]) - len(bytes.TrimLeft(data[start:], ", \t\r\n")))
			var v any
			if err := dec.Decode(&v); err != nil {
				return nil, nil, err
			}
			*cells = append(*cells, rawCell{start, v})
		}
		if _, err := dec.Token(); err != nil {
			return nil, nil, err
		}
	}
	return top, cells, nil
}

// version returns the minor version of nbformat 4.
func version(top map[string]any) (int, error) {
	major, ok := natural(top["nbformat"])
	if !ok {
		return 0, errors.New("not a notebook: it does not say which nbformat it has")
	}
	minor, ok := natural(top["nbformat_minor"])
	switch {
	case major < 4:
		return 0, fmt.Errorf("nbformat %d; 4.0 to 4.5 are read: open and save it in a current front end", major)
	case major > 4, minor > 5:
		return 0, fmt.Errorf("nbformat %d.%d; 4.0 to 4.5 are read", major, minor)
	case !ok:
		return 0, errors.New("not a notebook: nbformat_minor is missing or no whole number")
	}
	return minor, nil
}

// natural returns the value of a JSON number that is a whole number and not negative.
func natural(v any) (int, bool) {
	num, _ := v.(json.Number)
	i, err := num.Int64()
	return int(i), err == nil && i >= 0
}

// language refuses a notebook whose cells are not in Go. One that names no language is taken as Go.
func language(meta map[string]any) error {
	for _, place := range [][2]string{{"kernelspec", "language"}, {"language_info", "name"}} {
		m, _ := meta[place[0]].(map[string]any)
		if lang, ok := m[place[1]].(string); ok && !strings.EqualFold(lang, "go") {
			return fmt.Errorf("its cells are in %s (metadata.%s.%s), not in go", lang, place[0], place[1])
		}
	}
	return nil
}

// validID is the pattern of cell ids in the schema of nbformat 4.5.
var validID = regexp.MustCompile(`^[a-zA-Z0-9-_]{1,64}$`)

// cell reads the cell with number k, from 1. ids maps the ids so far to their cells' numbers.
func (n *Notebook) cell(raw rawCell, k int, ids map[string]int) (*Cell, error) {
	fields, ok := raw.value.(map[string]any)
	if !ok {
		return nil, at(raw.offset, "cell %d is no object", k)
	}
	c := &Cell{fields: fields}
	switch c.Type, _ = fields["cell_type"].(string); c.Type {
	case "code", "markdown", "raw":
	default:
		return nil, at(raw.offset, "cell %d: cell_type is %s; code, markdown and raw are known", k, compact(fields["cell_type"]))
	}
	if c.Source, ok = text(fields["source"]); !ok {
		return nil, at(raw.offset, "cell %d: its source is neither a text nor a list of texts", k)
	}
	if _, ok := fields["metadata"].(map[string]any); !ok {
		return nil, at(raw.offset, "cell %d: its metadata is missing or no object", k)
	}
	if id, has := fields["id"]; has {
		c.ID, _ = id.(string)
		switch {
		case n.Minor < 5:
			return nil, at(raw.offset, "cell %d has an id, which nbformat 4.%d forbids; nbformat_minor should be 5", k, n.Minor)
		case !validID.MatchString(c.ID):
			return nil, at(raw.offset, "cell %d: id %s; an id has 1 to 64 letters, digits, - and _", k, compact(id))
		case ids[c.ID] != 0:
			return nil, at(raw.offset, "cell %d: id %s is that of cell %d", k, compact(id), ids[c.ID])
		}
		ids[c.ID] = k
	}
	if c.Type != "code" {
		return c, nil
	}
	if count, ok := natural(fields["execution_count"]); ok {
		c.Count = count
	} else if fields["execution_count"] != nil {
		return nil, at(raw.offset, "cell %d: execution_count is %s; it is a whole number or null", k, compact(fields["execution_count"]))
	}
	outputs, ok := fields["outputs"].([]any)
	if !ok {
		return nil, at(raw.offset, "cell %d: its outputs are missing or no list", k)
	}
	for i, v := range outputs {
		out, err := parseOutput(v)
		if err != nil {
			return nil, at(raw.offset, "cell %d: output %d: %v", k, i+1, err)
		}
		c.Outputs = append(c.Outputs, out)
	}
	return c, nil
}

// identify gives cells of nbformat 4.5 that have no id one that depends on their number alone.
func (n *Notebook) identify(ids map[string]int) {
	if n.Minor < 5 {
		return
	}
	for i, c := range n.Cells {
		if c.ID != "" {
			continue
		}
		id := fmt.Sprintf("cell-%d", i+1)
		for k := 2; ids[id] != 0; k++ {
			id = fmt.Sprintf("cell-%d-%d", i+1, k)
		}
		ids[id] = i + 1
		c.ID, c.fields["id"] = id, id
	}
}

// text returns the text that nbformat stores as one string or as a list of strings.
func text(v any) (string, bool) {
	switch v := v.(type) {
	case string:
		return v, true
	case []any:
		var b strings.Builder
		for _, part := range v {
			s, ok := part.(string)
			if !ok {
				return "", false
			}
			b.WriteString(s)
		}
		return b.String(), true
	}
	return "", false
}

// compact returns a value as short JSON for an error message.
func compact(v any) string {
	b, err := json.Marshal(v)
	if err != nil {
		return fmt.Sprint(v)
	}
	if len(b) > 60 {
		return string(b[:57]) + "..."
	}
	return string(b)
}
