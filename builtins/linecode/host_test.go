package linecode

import (
	"context"
	"errors"
	"reflect"
	"testing"

	"linewright/builtins/page"
)

// cell is the host of a running cell, of which only the interrupt matters here.
type cell struct {
	page.Host
	ctx context.Context
}

func (c cell) Context() context.Context { return c.ctx }

var errStop = errors.New("stop")

// interruptible runs the test as a cell and returns what interrupts it.
func interruptible(t *testing.T) (interrupt func()) {
	ctx, cancel := context.WithCancelCause(context.Background())
	page.Attach(cell{ctx: ctx})
	t.Cleanup(func() { page.Attach(cell{ctx: context.Background()}) })
	return func() { cancel(errStop) }
}

// panicOf returns the error that f panics with.
func panicOf(t *testing.T, f func()) (err error) {
	t.Helper()
	defer func() {
		var ok bool
		if err, ok = recover().(error); !ok {
			t.Fatal("no panic with an error")
		}
	}()
	f()
	return nil
}

// must makes a code that the test takes for granted.
func must(t testing.TB, spec Spec) *Code {
	t.Helper()
	c, err := New(spec)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// balancedMarks is a scripted code: 0 is 0 0, and a 1 is a mark in the first half that keeps the sum at 0 or 1.
func balancedMarks() Spec {
	type st struct{ sum int }
	return Spec{
		Name:  "balanced marks",
		Bits:  1,
		Start: st{},
		Step: func(s any, word uint) (any, []float64) {
			v := s.(st)
			if word == 0 {
				return v, []float64{0, 0}
			}
			if v.sum > 0 {
				return st{0}, []float64{-1, 0}
			}
			return st{1}, []float64{1, 0}
		},
	}
}

// bitsOf returns the bits that a text of 0s and 1s spells.
func bitsOf(text string) []byte {
	bits := make([]byte, 0, len(text))
	for _, r := range text {
		if r == '0' || r == '1' {
			bits = append(bits, byte(r-'0'))
		}
	}
	return bits
}

func wantEqual(t testing.TB, what string, got, want any) {
	t.Helper()
	if !reflect.DeepEqual(got, want) {
		t.Errorf("%s: got %v, want %v", what, got, want)
	}
}
