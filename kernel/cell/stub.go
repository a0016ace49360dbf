// Package cell is one interpreter session: it checks, lowers and evaluates cells, completes and inspects.
package cell

import (
	"context"

	"linewright/plotting"
)

// Output takes what a running cell puts out. Its methods may be called from any goroutine.
type Output interface {
	Stream(name string, p []byte) // "stdout" or "stderr"; may be called with a few bytes at a time
	Display(b plotting.Bundle, id string, update bool)
	Clear(wait bool)
	Ask(prompt string, secret bool) (string, error) // page.ErrNoReader where nobody can be asked; ctx error on interrupt
}

// Error is a failed cell, ready for the protocol's error message. Trace lines are plain text.
type Error struct {
	Name  string // "compile error", "panic", "interrupted", "error"
	Value string
	Trace []string
}

func (e *Error) Error() string { return e.Name + ": " + e.Value }

type Options struct {
	Parameters map[string]string // values of page parameters set for the run
}

type Interpreter struct{}

func New(opt Options) (*Interpreter, error) { panic("stub") }

// Run executes one cell; n is its number for positions ("cell[3]:2:5"). The bundle is nil if the last statement has no value.
func (in *Interpreter) Run(ctx context.Context, n int, code, cellID string, out Output) (*plotting.Bundle, error) {
	panic("stub")
}

// Evaluate evaluates one expression (user_expressions).
func (in *Interpreter) Evaluate(ctx context.Context, expr string, out Output) (plotting.Bundle, error) {
	panic("stub")
}

// Asked returns the names of the parameters that cells have asked for so far, sorted.
func (in *Interpreter) Asked() []string { panic("stub") }

// IsComplete: status "complete", "incomplete" or "invalid", and the indent of the next line.
func (in *Interpreter) IsComplete(code string) (status, indent string) { panic("stub") }

type Completion struct {
	Start, End int // code points
	Matches    []string
	Types      []string // beside Matches: "function", "module", "class", "instance", "keyword", ... for metadata _jupyter_types_experimental
	Signatures []string // beside Matches
}

// Complete and Inspect may be called while a cell runs. cursor is in code points, clamped.
func (in *Interpreter) Complete(code string, cursor int) Completion { panic("stub") }
func (in *Interpreter) Inspect(code string, cursor, detail int) (plotting.Bundle, bool) {
	panic("stub")
}
