package cell

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"sync"
	"testing"
	"time"

	"linewright/builtins/page"
	"linewright/plotting"
)

// raceDetector is true in tests with the race detector.
var raceDetector bool

// recorder is an Output that keeps everything.
type recorder struct {
	mu      sync.Mutex
	stdout  strings.Builder
	stderr  strings.Builder
	shown   []string // "id|update|text/plain"
	cleared int
	answer  func(prompt string, secret bool) (string, error)
}

func (r *recorder) Stream(name string, p []byte) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if name == "stdout" {
		r.stdout.Write(p)
	} else {
		r.stderr.Write(p)
	}
}

func (r *recorder) Display(b plotting.Bundle, id string, update bool) {
	r.mu.Lock()
	defer r.mu.Unlock()
	r.shown = append(r.shown, fmt.Sprintf("%s|%v|%v", id, update, b.Data["text/plain"]))
}

func (r *recorder) Clear(bool) {
	r.mu.Lock()
	defer r.mu.Unlock()
	r.cleared++
}

func (r *recorder) Ask(prompt string, secret bool) (string, error) {
	switch {
	case prompt == "?":
		select {} // a reader who never answers
	case r.answer == nil:
		return "", page.ErrNoReader
	}
	return r.answer(prompt, secret)
}

// session runs cells and keeps what they put out.
type session struct {
	*testing.T
	in  *Interpreter
	n   int
	out *recorder
}

func start(t *testing.T) *session {
	t.Helper()
	in, err := New(Options{})
	if err != nil {
		t.Fatal(err)
	}
	return &session{T: t, in: in}
}

// run runs a cell with a time limit; it returns the text of its value and its error.
func (s *session) run(code string) (string, error) {
	s.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	return s.runContext(ctx, code)
}

func (s *session) runContext(ctx context.Context, code string) (string, error) {
	s.n++
	s.out = &recorder{}
	b, err := s.in.Run(ctx, s.n, code, "", s.out)
	if b == nil {
		return "", err
	}
	return fmt.Sprint(b.Data["text/plain"]), err
}

// is runs a cell and compares what it prints and shows. Want is the standard output and the value, or "error: " and a part
// of the error.
func (s *session) is(code, want string) {
	s.Helper()
	got, err := s.run(code)
	got = s.out.stdout.String() + got
	if part, ok := strings.CutPrefix(want, "error: "); ok {
		if err == nil {
			s.Errorf("%s\ngave %q; want an error with %q", code, got, part)
		} else if text := err.Error() + "\n" + strings.Join(trace(err), "\n"); !strings.Contains(text, part) {
			s.Errorf("%s\nfailed with %q; want an error with %q", code, text, part)
		}
		return
	}
	if err != nil {
		s.Errorf("%s\nfailed: %v\n%s", code, err, strings.Join(trace(err), "\n"))
	} else if got != want {
		s.Errorf("%s\ngave %q; want %q", code, got, want)
	}
}

func trace(err error) []string {
	var e *Error
	if errors.As(err, &e) {
		return e.Trace
	}
	return nil
}

// cells runs cells that stand in a table as code, want, code, want.
func (s *session) cells(pairs ...string) {
	s.Helper()
	for i := 0; i+1 < len(pairs); i += 2 {
		s.is(pairs[i], pairs[i+1])
	}
}
