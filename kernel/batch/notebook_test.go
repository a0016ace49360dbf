package batch

import (
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"
)

// notebookFile writes a file into a folder of the test and returns its path.
func notebookFile(t *testing.T, content string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "n.ipynb")
	if err := os.WriteFile(path, []byte(content), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// withCells returns a notebook of that minor version whose cells are given as JSON, each on a line of its own from
// line 2 on.
func withCells(minor int, cells ...string) string {
	return fmt.Sprintf("{\"metadata\": {}, \"nbformat\": 4, \"nbformat_minor\": %d, \"cells\": [\n%s\n]}", minor, strings.Join(cells, ",\n"))
}

const codeCell = `{"cell_type": "code", "id": "a", "metadata": {}, "source": "1", "outputs": [], "execution_count": null}`

func TestReadRefuses(t *testing.T) {
	edit := func(old, new string) string { return withCells(5, strings.Replace(codeCell, old, new, 1)) }
	for _, c := range []struct{ name, content, want string }{
		{"empty file", "", ":1: not JSON: unexpected end of JSON input at byte 0"},
		{"cut off", "{\n\"cells\": [", ":2: not JSON: unexpected end of JSON input"},
		{"no JSON", "{\n  'a': 1}", ":2: not JSON: invalid character '\\'' looking for beginning of object key string at byte 4"},
		{"something after it", withCells(5, codeCell) + "\n]", ":4: not JSON"},
		{"not UTF-8", withCells(5, strings.Replace(codeCell, `"1"`, "\"\xff\"", 1)), ":2: not UTF-8: byte 0xFF at byte"},
		{"a list", "[]", "not a notebook: it is no JSON object"},
		{"any other JSON", `{"name": "package"}`, "not a notebook: it does not say which nbformat it has"},
		{"nbformat 3", `{"metadata": {}, "nbformat": 3, "nbformat_minor": 0, "worksheets": []}`, "nbformat 3; 4.0 to 4.5 are read"},
		{"nbformat 5", `{"metadata": {}, "nbformat": 5, "nbformat_minor": 0, "cells": []}`, "nbformat 5.0; 4.0 to 4.5 are read"},
		{"nbformat 4.6", `{"metadata": {}, "nbformat": 4, "nbformat_minor": 6, "cells": []}`, "nbformat 4.6; 4.0 to 4.5 are read"},
		{"nbformat as text", `{"metadata": {}, "nbformat": "4", "nbformat_minor": 5, "cells": []}`, "does not say which nbformat"},
		{"no minor", `{"metadata": {}, "nbformat": 4, "cells": []}`, "nbformat_minor is missing"},
		{"no cells", `{"metadata": {}, "nbformat": 4, "nbformat_minor": 5}`, "it has no list of cells"},
		{"cells are no list", `{"metadata": {}, "nbformat": 4, "nbformat_minor": 5, "cells": {}}`, "its cells are no list"},
		{"no metadata", `{"nbformat": 4, "nbformat_minor": 5, "cells": []}`, "its metadata is missing"},
		{"another kernel", `{"metadata": {"kernelspec": {"name": "python3", "language": "python"}}, "nbformat": 4, "nbformat_minor": 5, "cells": []}`,
			"its cells are in python (metadata.kernelspec.language), not in go"},
		{"another language", `{"metadata": {"language_info": {"name": "R"}}, "nbformat": 4, "nbformat_minor": 5, "cells": []}`,
			"its cells are in R (metadata.language_info.name), not in go"},
		{"no code", withCells(5, `{"cell_type": "markdown", "id": "a", "metadata": {}, "source": "text"}`), "no code"},
		{"blank code", edit(`"1"`, `" \n"`), "no code"},
		{"cell is no object", withCells(5, codeCell, "7"), ":3: cell 2 is no object"},
		{"unknown cell type", edit(`"code"`, `"heading"`), `:2: cell 1: cell_type is "heading"`},
		{"source is a number", edit(`"1"`, `1`), ":2: cell 1: its source is neither"},
		{"no cell metadata", edit(`"metadata": {}, `, ``), ":2: cell 1: its metadata is missing"},
		{"bad id", edit(`"id": "a"`, `"id": "a b"`), `:2: cell 1: id "a b"; an id has 1 to 64 letters`},
		{"id too long", edit(`"id": "a"`, `"id": "`+strings.Repeat("a", 65)+`"`), ":2: cell 1: id "},
		{"same id twice", withCells(5, codeCell, codeCell), `:3: cell 2: id "a" is that of cell 1`},
		{"id in 4.4", withCells(4, codeCell), ":2: cell 1 has an id, which nbformat 4.4 forbids"},
		{"no outputs", edit(`"outputs": [], `, ``), ":2: cell 1: its outputs are missing"},
		{"bad count", edit(`null`, `"1"`), `:2: cell 1: execution_count is "1"`},
		{"unknown output", edit(`[]`, `[{"output_type": "pyout"}]`), `:2: cell 1: output 1: output_type is "pyout"`},
		{"output without data", edit(`[]`, `[{"output_type": "display_data"}]`), ":2: cell 1: output 1: display_data has no data"},
		{"stream without text", edit(`[]`, `[{"output_type": "stream", "name": "stdout"}]`), ":2: cell 1: output 1: a stream needs"},
	} {
		path := notebookFile(t, c.content)
		_, err := Read(path)
		if err == nil {
			t.Errorf("%s: accepted", c.name)
			continue
		}
		if got := err.Error(); !strings.HasPrefix(got, path) || !strings.Contains(got, c.want) || strings.Contains(got, "\n") {
			t.Errorf("%s: %s\nwant one line with %s", c.name, got, c.want)
		}
	}
}

func TestReadRefusesWhatIsNoFile(t *testing.T) {
	dir := t.TempDir()
	if _, err := Read(dir); err == nil || err.Error() != dir+": not a file" {
		t.Errorf("a folder: %v", err)
	}
	missing := filepath.Join(dir, "missing.ipynb")
	if _, err := Read(missing); err == nil || err.Error() != missing+": no such file or directory" {
		t.Errorf("a missing file: %v", err)
	}
	huge := filepath.Join(dir, "huge.ipynb")
	if err := os.WriteFile(huge, nil, 0o644); err != nil {
		t.Fatal(err)
	}
	if err := os.Truncate(huge, MaxSize+1); err != nil {
		t.Fatal(err)
	}
	if _, err := Read(huge); err == nil || err.Error() != huge+": 268435457 bytes; notebooks of more than 256 MB are not read" {
		t.Errorf("a huge file: %v", err)
	}
}

// saved.ipynb was written by Jupyter's own nbformat 5.5.0; it has every type of cell and output, text with all the line
// ends at which Jupyter splits, characters that need escapes, and fields that nobody knows.
func TestEncodeWritesWhatJupyterWrites(t *testing.T) {
	want, err := os.ReadFile("testdata/saved.ipynb")
	if err != nil {
		t.Fatal(err)
	}
	n, err := Read("testdata/saved.ipynb")
	if err != nil {
		t.Fatal(err)
	}
	if got := encoded(t, n); !bytes.Equal(got, want) {
		at := 0
		for at < min(len(got), len(want)) && got[at] == want[at] {
			at++
		}
		t.Errorf("from byte %d on:\n%.200q\nwant\n%.200q", at, got[at:], want[at:])
	}
}

func encoded(t *testing.T, n *Notebook) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := n.Encode(&b); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func TestOlderMinorIsKept(t *testing.T) {
	for minor := range 5 {
		cell := strings.Replace(codeCell, `"id": "a", `, "", 1)
		n, err := Read(notebookFile(t, withCells(minor, cell)))
		if err != nil {
			t.Fatal(err)
		}
		b := encoded(t, n)
		if !bytes.Contains(b, fmt.Appendf(nil, `"nbformat_minor": %d`, minor)) || bytes.Contains(b, []byte(`"id"`)) {
			t.Errorf("4.%d:\n%s", minor, b)
		}
		validate(t, b)
	}
}

func TestMissingIDsDependOnThePlaceAlone(t *testing.T) {
	bare := strings.Replace(codeCell, `"id": "a", `, "", 1)
	taken := strings.Replace(codeCell, `"id": "a"`, `"id": "cell-2"`, 1)
	n, err := Read(notebookFile(t, withCells(5, bare, bare, taken)))
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []string{"cell-1", "cell-2-2", "cell-2"} {
		if got := n.Cells[i].ID; got != want {
			t.Errorf("cell %d has id %s, want %s", i+1, got, want)
		}
	}
	validate(t, encoded(t, n))
}

func TestNumbersStayAsWritten(t *testing.T) {
	n, err := Read(notebookFile(t, strings.Replace(withCells(5, codeCell), `"metadata": {},`, `"metadata": {"x": [1e3, 0.10, 12345678901234567890]},`, 1)))
	if err != nil {
		t.Fatal(err)
	}
	b := encoded(t, n)
	for _, want := range []string{"1e3", "0.10", "12345678901234567890"} {
		if !bytes.Contains(b, []byte(want)) {
			t.Errorf("%s is lost:\n%s", want, b)
		}
	}
}

// validate holds a notebook against the published schema of its version, and against nbformat's own check where Debian's
// Python has it.
func validate(t *testing.T, notebook []byte) {
	t.Helper()
	v, err := jsonschema.UnmarshalJSON(bytes.NewReader(notebook))
	if err != nil {
		t.Fatal(err)
	}
	minor := v.(map[string]any)["nbformat_minor"].(json.Number)
	schema, err := jsonschema.NewCompiler().Compile("testdata/schema/nbformat.v4." + minor.String() + ".schema.json")
	if err != nil {
		t.Fatal(err)
	}
	if err := schema.Validate(v); err != nil {
		t.Errorf("%v\n%.2000s", err, notebook)
	}
}

// python is Debian's own: another python3 may come first on PATH and lacks the packages.
const python = "/usr/bin/python3"

// TestJupyterReadsAndKeepsWhatIsWritten lets Jupyter's own library check a notebook, and save it again: nothing changes.
func TestJupyterReadsAndKeepsWhatIsWritten(t *testing.T) {
	if exec.Command(python, "-c", "import nbformat").Run() != nil {
		const text = "nbformat is not installed; on Debian: apt-get install -y python3-nbformat"
		if os.Getenv("LINEWRIGHT_FRONTENDS") == "require" {
			t.Fatal(text)
		}
		t.Skip(text)
	}
	n, err := Read("testdata/saved.ipynb")
	if err != nil {
		t.Fatal(err)
	}
	n.Cells[1].Outputs = collected(t)
	path := notebookFile(t, string(encoded(t, n)))
	out, err := exec.Command(python, "-W", "error", "-c", `
import json, sys, nbformat
with open(sys.argv[1]) as f: nbformat.validate(json.load(f))
sys.stdout.buffer.write((nbformat.writes(nbformat.read(sys.argv[1], as_version=4)) + "\n").encode())`, path).CombinedOutput()
	if err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	if want, _ := os.ReadFile(path); !bytes.Equal(out, want) {
		t.Errorf("Jupyter saves it as\n%s\nwant\n%s", out, want)
	}
}

// FuzzParse feeds the reader foreign bytes: it never panics, and what it accepts it writes so that it reads the same.
func FuzzParse(f *testing.F) {
	saved, err := os.ReadFile("testdata/saved.ipynb")
	if err != nil {
		f.Fatal(err)
	}
	for _, s := range []string{string(saved), withCells(5, codeCell), withCells(4, codeCell), `{"cells": [], "cells": {}}`, "[[[", "\ufeff{}", `{"cells": [1, ]}`} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		n, err := parse(data)
		if err != nil {
			return
		}
		first := encoded(t, n)
		again, err := parse(first)
		if err != nil {
			t.Fatalf("what was written is refused: %v\n%s", err, first)
		}
		if second := encoded(t, again); !bytes.Equal(first, second) {
			t.Errorf("written\n%s\nthen\n%s", first, second)
		}
	})
}
