package batch

import (
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// job writes a notebook with these cells to a folder and returns the job that runs it.
func job(t *testing.T, sources ...string) Job {
	t.Helper()
	path := filepath.Join(t.TempDir(), "link.ipynb")
	if err := os.WriteFile(path, encoded(t, notebookOf(t, sources...)), 0o644); err != nil {
		t.Fatal(err)
	}
	return Job{In: path, Conditions: under(t, "real"), Program: "Linewright test"}
}

func readFile(t *testing.T, path string) string {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

func TestRunWritesBesideTheInput(t *testing.T) {
	j := job(t, `fmt.Println("done")`)
	before := readFile(t, j.In)
	written, err := j.Run(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	dir := filepath.Dir(j.In)
	want := []string{filepath.Join(dir, "link-run.ipynb"), filepath.Join(dir, "link-run.html")}
	if !slices.Equal(written, want) {
		t.Errorf("wrote %v, want %v", written, want)
	}
	for _, path := range want {
		if !strings.Contains(readFile(t, path), "done") {
			t.Errorf("%s has no output", path)
		}
	}
	validate(t, []byte(readFile(t, want[0])))
	if readFile(t, j.In) != before {
		t.Error("the input has changed")
	}
	if entries, _ := os.ReadDir(dir); len(entries) != 3 {
		t.Errorf("the folder holds %v", entries)
	}
}

func TestRunWritesWhatIsNamed(t *testing.T) {
	j := job(t, `fmt.Println("done")`)
	j.HTML = filepath.Join(t.TempDir(), "report.html")
	written, err := j.Run(t.Context())
	if err != nil || !slices.Equal(written, []string{j.HTML}) {
		t.Errorf("wrote %v, %v", written, err)
	}
	if entries, _ := os.ReadDir(filepath.Dir(j.In)); len(entries) != 1 {
		t.Errorf("beside the input: %v", entries)
	}
	j.HTML, j.Out = "", j.In // in place, because it is named
	if _, err := j.Run(t.Context()); err != nil || !strings.Contains(readFile(t, j.In), "done") {
		t.Errorf("in place: %v", err)
	}
}

func TestRunKeepsWhatWasExecuted(t *testing.T) {
	j := job(t, `fmt.Println("done")`, "1/0", `fmt.Println("never")`)
	written, err := j.Run(t.Context())
	var failed *CellError
	if !errors.As(err, &failed) || failed.Number != 2 || len(written) != 2 {
		t.Errorf("wrote %v, %v", written, err)
	}
	n, err := Read(written[0])
	if err != nil {
		t.Fatal(err)
	}
	if n.Cells[0].Outputs[0].Text != "done\n" || n.Cells[1].Outputs[0].Type != failure || len(n.Cells[2].Outputs) != 0 {
		t.Errorf("stored: %v", readFile(t, written[0]))
	}
	if !strings.Contains(readFile(t, written[1]), "<b>This run failed.</b> Cell 2 failed: ") {
		t.Errorf("the report does not say so:\n%s", readFile(t, written[1]))
	}
}

func TestRunRefusesUnaskedParameters(t *testing.T) {
	j := job(t, `page.Float("bit-rate", 1, "Hz")`, `fmt.Println("done")`)
	j.Parameters = map[string]string{"bit-rate": "2", "bitrate": "3", "a": ""}
	written, err := j.Run(t.Context())
	var unasked *ParameterError
	if !errors.As(err, &unasked) || !slices.Equal(unasked.Names, []string{"a", "bitrate"}) || !strings.Contains(err.Error(), "cells ask for bit-rate") {
		t.Errorf("%v", err)
	}
	if len(written) != 2 || !strings.Contains(readFile(t, written[0]), "done") {
		t.Errorf("wrote %v", written)
	}
}

func TestRunRefusesPlaces(t *testing.T) {
	j := job(t, `fmt.Println("done")`)
	dir := filepath.Dir(j.In)
	before := readFile(t, j.In)
	for _, c := range []struct{ name, out, html, want string }{
		{"the report in place of the notebook", "", j.In, "would replace the notebook"},
		{"that by another path", "", filepath.Join(dir, ".", "x", "..", "link.ipynb"), "would replace the notebook"},
		{"one file for both", filepath.Join(dir, "both"), filepath.Join(dir, "both"), "cannot be one file"},
		{"a missing folder", filepath.Join(dir, "no", "out.ipynb"), "", "cannot write " + filepath.Join(dir, "no", "out.ipynb") + ": no such file or directory"},
		{"a folder", dir, "", "it is no regular file"},
	} {
		j.Out, j.HTML = c.out, c.html
		written, err := j.Run(t.Context())
		if err == nil || !strings.Contains(err.Error(), c.want) || len(written) != 0 {
			t.Errorf("%s: wrote %v, %v; want %s", c.name, written, err, c.want)
		}
	}
	if readFile(t, j.In) != before {
		t.Error("the input has changed")
	}
	if entries, _ := os.ReadDir(dir); len(entries) != 1 {
		t.Errorf("the folder holds %v", entries)
	}
}
