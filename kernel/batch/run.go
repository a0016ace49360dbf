package batch

import (
	"context"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"

	"linewright/kernel/whole"
)

// Job is one run of a notebook from file to files.
type Job struct {
	In   string // the notebook
	Out  string // the executed notebook; empty means none, unless HTML is empty as well
	HTML string // the report; likewise. With both empty they are IN-run.ipynb and IN-run.html beside the input

	Conditions        // Folder is that of In
	Program    string // what executes the notebook, with its version, for the report
}

// Run runs the job and returns the files that it has written. They appear whole or not at all, and they are also
// written, with what was executed so far, when a cell fails, the kernel dies, or ctx ends: the error is then that of
// [Notebook.Execute]. A parameter that was set and that no cell asked for is an error as well, once every cell has been
// executed. A job that cannot be right, such as one whose report would replace its input, is refused before any cell
// is executed.
func (j Job) Run(ctx context.Context) (written []string, err error) {
	if err := j.places(); err != nil {
		return nil, err
	}
	n, err := Read(j.In)
	if err != nil {
		return nil, err
	}
	j.Folder = filepath.Dir(j.In)
	asked, failed := n.Execute(ctx, j.Conditions)
	if failed == nil {
		failed = unasked(j.Parameters, asked)
	}
	about := About{File: filepath.Base(j.In), Folder: j.Folder, Program: j.Program, Parameters: j.Parameters}
	if failed != nil {
		about.Failure = sentence(failed.Error())
	}
	var errs []error
	if failed != nil {
		errs = append(errs, fmt.Errorf("%s: %w", j.In, failed))
	}
	for _, f := range []struct {
		path string
		fill func(io.Writer) error
	}{{j.Out, n.Encode}, {j.HTML, func(w io.Writer) error { return n.Report(w, about) }}} {
		if f.path == "" {
			continue
		}
		if err := whole.Write(f.path, 0o644, f.fill); err != nil {
			errs = append(errs, fmt.Errorf("cannot write %w", plain(f.path, err)))
		} else {
			written = append(written, f.path)
		}
	}
	return written, errors.Join(errs...)
}

// places fills in where the files go and refuses places where they cannot.
func (j *Job) places() error {
	if j.Out == "" && j.HTML == "" {
		stem := strings.TrimSuffix(j.In, filepath.Ext(j.In))
		j.Out, j.HTML = stem+"-run.ipynb", stem+"-run.html"
	}
	switch {
	case j.HTML != "" && same(j.HTML, j.In):
		return fmt.Errorf("%s: the report would replace the notebook that it reports on; give it another name", j.HTML)
	case j.HTML != "" && j.Out != "" && same(j.HTML, j.Out):
		return fmt.Errorf("%s: the notebook and the report cannot be one file", j.HTML)
	}
	for _, path := range []string{j.Out, j.HTML} {
		if path == "" {
			continue
		}
		if err := whole.Check(path); err != nil {
			return fmt.Errorf("cannot write %w", plain(path, err))
		}
	}
	return nil
}

// same reports whether two paths lead to one file, existing or not.
func same(a, b string) bool {
	ia, errA := os.Stat(a)
	ib, errB := os.Stat(b)
	if errA == nil && errB == nil {
		return os.SameFile(ia, ib)
	}
	absA, errA := filepath.Abs(a)
	absB, errB := filepath.Abs(b)
	return errA == nil && errB == nil && absA == absB
}

// unasked is the error for parameters that were set and that no cell asked for, or nil.
func unasked(set map[string]string, asked []string) error {
	var left []string
	for _, name := range slices.Sorted(maps.Keys(set)) {
		if !slices.Contains(asked, name) {
			left = append(left, name)
		}
	}
	if left == nil {
		return nil
	}
	known := "no cell asks for a parameter"
	if len(asked) > 0 {
		known = "cells ask for " + strings.Join(asked, ", ")
	}
	return &ParameterError{left, known}
}

// ParameterError says that parameters were set which no executed cell asked for.
type ParameterError struct {
	Names []string // of those parameters, sorted
	known string   // what is asked for
}

func (e *ParameterError) Error() string {
	return fmt.Sprintf("no executed cell asked for %s, which was set; %s", strings.Join(e.Names, ", "), e.known)
}

// sentence returns a message as a sentence.
func sentence(s string) string {
	first, size := utf8.DecodeRuneInString(s)
	return string(unicode.ToUpper(first)) + s[size:] + "."
}
