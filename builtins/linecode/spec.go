package linecode

import (
	"context"
	"fmt"

	"linewright/builtins/page"
)

// A Spec describes an encoder for [New].
type Spec struct {
	// Name labels the code in cards and figures. Empty means "unnamed code".
	Name string

	// Bits is the number of source bits per step, 1 to 16.
	Bits int

	// Start is the state before the first word: any comparable value, nil for an encoder without states.
	Start any

	// Step returns the state after word, and the levels that the encoder emits meanwhile, in the order of time. The
	// word holds Bits source bits, the first in time in its most significant place. Step must depend on its arguments
	// alone. It is called once for each state that can be reached and each word, when the code is made, never later.
	Step func(s any, word uint) (any, []float64)

	// Delay is for an encoder that looks ahead through a delay line: the symbols that leave before the first bit's own.
	// [Code.Encode] leaves them out. Zero means none.
	Delay int

	// Flush returns the symbols still owed in state s when the data end. Nil means none.
	Flush func(s any) []float64

	// MaxStates is the number of states above which the encoder is refused. Zero means 200,000.
	MaxStates int
}

// Limits of a Spec.
const (
	maxBits       = 16
	standardMax   = 200000  // states, where MaxStates is 0
	maxSteps      = 1 << 26 // states times words; the tables then hold 512 MB
	maxStepLength = 1 << 16 // symbols of one step
)

// New makes a code from its description. It enumerates the encoder breadth first from its start, in the order of the
// words. A description that is no machine is refused with an error that says where: a Step that panics, a state that is
// not comparable, a level that is not finite, symbols that never come, more states than MaxStates, or more than 2^26
// pairs of a state and a word. An interrupt of the running cell ends it with an error.
//
// A code whose data cannot be told apart from its symbols is accepted; see [Code.Decodable].
func New(spec Spec) (*Code, error) {
	if spec.Name == "" {
		spec.Name = "unnamed code"
	}
	if spec.MaxStates == 0 {
		spec.MaxStates = standardMax
	}
	switch {
	case spec.Bits < 1 || spec.Bits > maxBits:
		return nil, fmt.Errorf("linecode: %s has Bits = %d; a word holds 1 to %d source bits", spec.Name, spec.Bits, maxBits)
	case spec.Step == nil:
		return nil, fmt.Errorf("linecode: %s has no Step; give the function that encodes one word", spec.Name)
	case spec.Delay < 0:
		return nil, fmt.Errorf("linecode: %s has Delay = %d; it is a number of symbols, 0 or more", spec.Name, spec.Delay)
	case spec.MaxStates < 0:
		return nil, fmt.Errorf("linecode: %s has MaxStates = %d; give a number of states, or 0 for %d", spec.Name, spec.MaxStates, standardMax)
	}
	m, err := enumerate(page.Context(), spec)
	if err != nil {
		return nil, err
	}
	return &Code{name: spec.Name, machine: m}, nil
}

// interrupted is the error of work that the reader stopped.
func interrupted(ctx context.Context, doing, name string) error {
	return fmt.Errorf("linecode: interrupted while %s %s: %w", doing, name, context.Cause(ctx))
}
