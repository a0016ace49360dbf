package cell

import (
	"bytes"
	"crypto/sha256"
	"flag"
	"fmt"
	"go/token"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"golang.org/x/tools/txtar"
)

var update = flag.Bool("update", false, "run the programs of testdata/same with the go command and store what they print")

// generated is the number of programs that come from the generator.
const generated = 300

// A cell prints what the same program prints that the go command has compiled. The programs written by hand are pairs
// NAME.cell and NAME.out.SUM in an archive of testdata/same, of those that the generator makes there is only the output; SUM
// says of which text. Option -update writes the outputs.
func TestSame(t *testing.T) {
	if *update {
		updateSame(t)
	}
	for _, file := range sameArchives(t) {
		a, err := txtar.ParseFile(file)
		if err != nil {
			t.Fatal(err)
		}
		outputs := map[string]string{}
		for _, f := range a.Files {
			outputs[f.Name] = string(f.Data)
		}
		t.Run(strings.TrimSuffix(filepath.Base(file), ".txtar"), func(t *testing.T) {
			t.Parallel()
			s := start(t)
			for _, p := range samePrograms(file, a) {
				if raceDetector && (strings.Contains(p.text, "go func") || strings.Contains(p.text, ".Go(")) {
					continue // goroutines of one function write its mark at the same time; see marks.go
				}
				want, ok := outputs[p.output()]
				if !ok {
					t.Errorf("%s has changed since it was run; run go test -run TestSame -update", p.name)
					continue
				}
				_, err := s.run(p.text)
				got := s.out.stdout.String()
				if err != nil {
					got += panicLine(err)
				}
				if strings.TrimSuffix(got, "\n") != strings.TrimSuffix(want, "\n") {
					t.Errorf("%s\n%sprints\n%s\nas a cell, and compiled\n%s%s", p.name, p.text, got, want, strings.Join(trace(err), "\n"))
				}
			}
		})
	}
}

// panicLine is the end of the output of a program that panics. Go's own panics say more than cells' do.
func panicLine(err error) string {
	_, value, _ := strings.Cut(err.Error(), "panic: ")
	if strings.HasPrefix(value, "runtime error: ") {
		return "panic\n"
	}
	if value == "" {
		return err.Error() + "\n"
	}
	return "panic: " + value + "\n"
}

func sameArchives(t *testing.T) []string {
	t.Helper()
	files, err := filepath.Glob(filepath.Join("testdata", "same", "*.txtar"))
	if err != nil || len(files) == 0 {
		t.Fatalf("no programs: %v", err)
	}
	return files
}

// samePair is a program and, in its archive, its output.
type samePair struct{ name, text string }

func (p samePair) output() string {
	return fmt.Sprintf("%s.out.%x", p.name, sha256.Sum256([]byte(p.text)))[:len(p.name)+13]
}

const generatedFile = "generated.txtar"

// samePrograms returns the programs of an archive.
func samePrograms(file string, a *txtar.Archive) []samePair {
	var list []samePair
	if filepath.Base(file) == generatedFile {
		for i := range generated {
			list = append(list, samePair{fmt.Sprintf("p%03d", i), sameProgram(uint64(i))})
		}
	}
	for _, f := range a.Files {
		if name, ok := strings.CutSuffix(f.Name, ".cell"); ok {
			list = append(list, samePair{name, string(f.Data)})
		}
	}
	return list
}

// updateSame compiles all programs into one command and stores what each prints.
func updateSame(t *testing.T) {
	t.Helper()
	dir := t.TempDir()
	write := func(name, text string) {
		t.Helper()
		name = filepath.Join(dir, name)
		if err := os.MkdirAll(filepath.Dir(name), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(name, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	archives := map[string]*txtar.Archive{}
	var imports, calls strings.Builder
	n := 0
	for _, file := range sameArchives(t) {
		a, err := txtar.ParseFile(file)
		if err != nil {
			t.Fatal(err)
		}
		archives[file] = a
		for _, p := range samePrograms(file, a) {
			write(fmt.Sprintf("p%d/p.go", n), goProgram(n, p.text))
			fmt.Fprintf(&imports, "\t\"same/p%d\"\n", n)
			fmt.Fprintf(&calls, "\trun(p%d.Run)\n", n)
			n++
		}
	}
	write("go.mod", "module same\n\ngo 1.26\n")
	write("main.go", "package main\n\nimport (\n\t\"fmt\"\n\t\"runtime\"\n\t\"strings\"\n"+imports.String()+`)

func run(f func()) {
	defer fmt.Print("\x00")
	defer func() {
		v := recover()
		if err, ok := v.(runtime.Error); ok && strings.HasPrefix(err.Error(), "runtime error: ") {
			fmt.Println("panic")
		} else if v != nil {
			fmt.Println("panic:", v)
		}
	}()
	f()
}

func main() {
`+calls.String()+"}\n")
	cmd := exec.Command("go", "run", ".")
	cmd.Dir = dir
	var errs bytes.Buffer
	cmd.Stderr = &errs
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("%v\n%s", err, errs.Bytes())
	}
	outputs := strings.Split(string(out), "\x00")
	n = 0
	for _, file := range sameArchives(t) {
		a := archives[file]
		fresh := &txtar.Archive{Comment: a.Comment}
		for _, p := range samePrograms(file, a) {
			if filepath.Base(file) != generatedFile {
				fresh.Files = append(fresh.Files, txtar.File{Name: p.name + ".cell", Data: []byte(p.text)})
			}
			fresh.Files = append(fresh.Files, txtar.File{Name: p.output(), Data: []byte(outputs[n])})
			n++
		}
		if err := os.WriteFile(file, txtar.Format(fresh), 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

// goProgram makes a package of a cell: its statements become function Run, but for variables before all others, which its
// functions may use.
func goProgram(n int, text string) string {
	var imports, decls, statements strings.Builder
	for _, c := range split(text) {
		b := &decls
		switch c.kind {
		case token.ILLEGAL:
			if statements.Len() > 0 || !strings.HasPrefix(text[c.start:], "var ") {
				b = &statements
			}
		case token.IMPORT:
			b = &imports
		}
		b.WriteString(strings.TrimRight(text[c.start:c.end], "\n") + "\n")
	}
	return fmt.Sprintf("package p%d\n\nimport \"fmt\"\n%s\nvar _ = fmt.Print\n\n%s\nfunc Run() {\n%s}\n", n, &imports, &decls, &statements)
}
