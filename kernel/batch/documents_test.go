package batch

import (
	"bytes"
	"path/filepath"
	"strings"
	"testing"
)

// TestNotebooksAreAsStored re-executes every notebook of the project and holds it against its stored outputs.
func TestNotebooksAreAsStored(t *testing.T) {
	files, err := filepath.Glob("../../notebooks/*.ipynb")
	if err != nil {
		t.Fatal(err)
	}
	checked := 0
	for _, file := range files {
		if strings.HasSuffix(file, "-run.ipynb") {
			continue
		}
		checked++
		var b bytes.Buffer
		if err := Check(t.Context(), file, under(t, "real"), 1e-6, &b); err != nil {
			t.Errorf("%v\n%s", err, &b)
		}
	}
	if checked == 0 {
		t.Error("no notebooks found")
	}
}

// TestReadme runs the cells that the README shows, in their order, in one session.
func TestReadme(t *testing.T) {
	var cells []string
	for _, part := range strings.Split(readFile(t, "../../README.md"), "\n```go\n")[1:] {
		cell, _, _ := strings.Cut(part, "\n```")
		cells = append(cells, cell)
	}
	if len(cells) < 4 {
		t.Fatalf("the README shows %d cells", len(cells))
	}
	j := job(t, cells...)
	if _, err := j.Run(t.Context()); err != nil {
		t.Error(err)
	}
}
