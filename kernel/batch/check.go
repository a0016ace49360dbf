package batch

import (
	"context"
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"github.com/rogpeppe/go-internal/diff"
)

// DifferenceError says that the outputs of a notebook are not those that it has stored.
type DifferenceError struct {
	File  string
	Cells []int // numbers of the cells that differ, from 1, of those with code
}

func (e *DifferenceError) Error() string {
	numbers := strings.Trim(fmt.Sprint(e.Cells), "[]")
	return fmt.Sprintf("%s: the outputs of %d cells differ from those stored: %s", e.File, len(e.Cells), numbers)
}

// Check executes the notebook in the named file and holds the outputs against those stored in it; it changes no file.
// What differs is written to w, cell by cell, and makes a [*DifferenceError]; that nothing does is written too.
//
// Text differs unless it is the same up to numbers within the relative tolerance. A figure differs if its SVG does,
// numbers in it within a twentieth of a unit of the drawing; without an SVG, a PNG differs if more than a thousandth of
// its pixels do visibly. Of an error its name and message count. What changes from run to run anyway does not count:
// execution counts, metadata, how a stream came in pieces.
func Check(ctx context.Context, file string, with Conditions, tolerance float64, w io.Writer) error {
	n, err := Read(file)
	if err != nil {
		return err
	}
	with.Folder = filepath.Dir(file)
	code := n.Code()
	stored := make([][]*Output, len(code))
	for i, c := range code {
		stored[i] = c.Outputs
	}
	_, failed := n.Execute(ctx, with)
	e := &DifferenceError{File: file}
	compare := comparison{tolerance}
	for i, c := range code {
		if failed != nil && c.Count == 0 { // not reached
			break
		}
		if text := compare.cell(stored[i], c.Outputs); text != "" {
			e.Cells = append(e.Cells, i+1)
			fmt.Fprintf(w, "cell %d: %s\n%s", i+1, firstLine(c.Source), text)
		}
	}
	switch {
	case failed != nil:
		return fmt.Errorf("%s: %w", file, failed)
	case e.Cells != nil:
		return e
	}
	_, err = fmt.Fprintf(w, "%s: the outputs of all %d cells are as stored\n", file, len(code))
	return err
}

// cell returns what differs between the stored outputs of a cell and those of now, or "".
func (c comparison) cell(stored, now []*Output) string {
	var b strings.Builder
	for i := range max(len(stored), len(now)) {
		switch {
		case i >= len(now):
			fmt.Fprintf(&b, "  output %d is gone: %s\n", i+1, stored[i].summary())
		case i >= len(stored):
			fmt.Fprintf(&b, "  output %d is new: %s\n", i+1, now[i].summary())
		default:
			if text := c.output(stored[i], now[i]); text != "" {
				fmt.Fprintf(&b, "  output %d %s\n", i+1, text)
			}
		}
	}
	return b.String()
}

// summary returns a few words that tell an output from others.
func (o *Output) summary() string {
	switch o.Type {
	case stream:
		return o.Stream + " " + compact(o.Text)
	case failure:
		return "error " + compact(joinError(o.Name, o.Value))
	}
	if s, ok := o.text("text/plain"); ok {
		return o.Type + " " + compact(s)
	}
	return o.Type
}

// maxDiff is the number of lines of a difference that are printed.
const maxDiff = 40

// show returns the lines in which two texts differ, where numbers that are near enough stand as in the first.
func show(stored, now string) string {
	text := string(diff.Diff("stored", []byte(ended(stored)), "now", []byte(ended(now))))
	var b strings.Builder
	count := 0
	for l := range strings.Lines(text) {
		if strings.HasPrefix(l, "diff ") || strings.HasPrefix(l, "--- ") || strings.HasPrefix(l, "+++ ") {
			continue
		}
		if count++; count > maxDiff {
			b.WriteString("    ...\n")
			break
		}
		b.WriteString("    " + l)
	}
	return strings.TrimRight(b.String(), "\n")
}

func ended(s string) string { return strings.TrimSuffix(s, "\n") + "\n" }
