package main

import (
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"linewright/kernel/batch"
)

func TestStatus(t *testing.T) {
	for _, c := range []struct {
		err  error
		want int
	}{
		{nil, 0},
		{errors.New("a file"), 2},
		{fmt.Errorf("x: %w", &batch.CellError{Output: &batch.Output{}}), 1},
		{fmt.Errorf("x: %w", &batch.ParameterError{}), 1},
		{&batch.DifferenceError{}, 1},
		{fmt.Errorf("cell 2: %w", batch.ErrInterrupted), 130},
	} {
		if got := status(c.err); got != c.want {
			t.Errorf("%v gives %d, want %d", c.err, got, c.want)
		}
	}
}

func TestReportOfAFailedCell(t *testing.T) {
	var b strings.Builder
	report(&b, errors.Join(fmt.Errorf("link.ipynb: %w", &batch.CellError{Number: 2, Output: &batch.Output{
		Name: "panic", Value: "bad", Traceback: []string{"panic: bad", "main.f", "\tcell[2]:1:1"},
	}}), errors.New("cannot write x: full")))
	want := "linewright: link.ipynb: cell 2 failed: panic: bad\nlinewright: cannot write x: full\n  main.f\n  \tcell[2]:1:1\n"
	if b.String() != want {
		t.Errorf("got\n%s\nwant\n%s", b.String(), want)
	}
}

func TestMainIsATable(t *testing.T) {
	src, err := os.ReadFile("main.go")
	if err != nil {
		t.Fatal(err)
	}
	if n := strings.Count(string(src), "func "); n != 2 {
		t.Errorf("main.go has %d functions; it is a table of subcommands and nothing else", n)
	}
}

// TestOtherSystems builds the command for the systems that it is not tested on.
func TestOtherSystems(t *testing.T) {
	if testing.Short() {
		t.Skip("builds everything twice")
	}
	for _, target := range []string{"darwin/arm64", "windows/amd64"} {
		goos, goarch, _ := strings.Cut(target, "/")
		cmd := exec.Command("go", "build", "-o", filepath.Join(t.TempDir(), "linewright"), ".")
		cmd.Env = append(os.Environ(), "GOOS="+goos, "GOARCH="+goarch, "CGO_ENABLED=0")
		if out, err := cmd.CombinedOutput(); err != nil {
			t.Errorf("%s: %v\n%s", target, err, out)
		}
	}
}
