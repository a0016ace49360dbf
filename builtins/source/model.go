package source

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"linewright/builtins/page"
)

// A Model is a statistical description of source bits: a finite machine that starts in a state drawn from its initial
// distribution and draws one bit a step, with a probability of 1 that the state gives; the bit leads to the next state.
// The zero Model is [Random].
type Model struct {
	name    string
	initial []float64
	one     []float64 // P(1) in each state
	next    [][2]int  // the state after a 0 and after a 1

	pattern []byte // instead of the tables, for data that repeat: the state is the place in it
}

// Random returns the model of independent, equiprobable bits.
func Random() Model { return Biased(0.5) }

// Biased returns the model of independent bits that are 1 with probability p. It panics if p is outside [0, 1].
func Biased(p float64) Model {
	mustBeProbability("Biased", "p", p)
	return Model{name: fmt.Sprintf("P(1) = %v", p), initial: []float64{1}, one: []float64{p}, next: [][2]int{{0, 0}}}
}

// Markov returns the model of bits of which each depends on the one before: p01 = P(1 after 0) and p10 = P(0 after 1).
// Its state is the last bit, which starts in the stationary distribution, P(1) = p01/(p01+p10). It panics if a
// probability is outside [0, 1], or if both are 0, because the data then never change and no start is stationary alone.
func Markov(p01, p10 float64) Model {
	mustBeProbability("Markov", "p01", p01)
	mustBeProbability("Markov", "p10", p10)
	if p01 == 0 && p10 == 0 {
		panic(fmt.Errorf("source: Markov(0, 0) never leaves its first bit; at least one probability must be above 0, or use Biased(0) or Biased(1) for constant data"))
	}
	return Model{
		name:    fmt.Sprintf("P(1 after 0) = %v, P(0 after 1) = %v", p01, p10),
		initial: []float64{p10 / (p01 + p10), p01 / (p01 + p10)},
		one:     []float64{p01, 1 - p10},
		next:    [][2]int{{0, 1}, {0, 1}},
	}
}

// Repeating returns the model of a pattern that repeats for ever, starting with its first bit. It panics if the
// pattern is empty or holds anything but 0 and 1.
func Repeating(bits []byte) Model {
	n := len(bits)
	if n == 0 {
		panic(fmt.Errorf("source: Repeating got no bits; give at least one"))
	}
	for i, b := range bits {
		if b > 1 {
			panic(fmt.Errorf("source: Repeating got %d at position %d; a bit is 0 or 1, one a byte", b, i))
		}
	}
	m := Model{name: fmt.Sprintf("repeating %d bits", n), pattern: slices.Clone(bits)}
	if n == 1 {
		m.name = fmt.Sprintf("all %ds", bits[0])
	}
	return m
}

func mustBeProbability(function, name string, p float64) {
	if !(p >= 0 && p <= 1) {
		panic(fmt.Errorf("source: %s got %s = %v; a probability is from 0 to 1", function, name, p))
	}
}

// Pattern returns the bits of [Repeating], one a byte; nil for other data. The slice is shared: read only.
func (m Model) Pattern() []byte { return m.pattern }

// States returns the number of states of the model.
func (m Model) States() int { return max(1, len(m.one), len(m.pattern)) }

// Initial returns the probability of starting in each state. The slice is a copy.
func (m Model) Initial() []float64 {
	if m.one != nil {
		return slices.Clone(m.initial)
	}
	first := make([]float64, m.States())
	first[0] = 1
	return first
}

// One returns the probability that the bit drawn in the given state is a 1.
func (m Model) One(state int) float64 {
	switch {
	case m.pattern != nil:
		return float64(m.pattern[state])
	case m.one != nil:
		return m.one[state]
	}
	return 0.5
}

// Next returns the state that a bit leads to.
func (m Model) Next(state int, bit byte) int {
	switch {
	case m.pattern != nil:
		return (state + 1) % len(m.pattern)
	case m.one != nil:
		return m.next[state][bit]
	}
	return 0
}

// String returns a label for the data, such as "P(1) = 0.7".
func (m Model) String() string {
	if m.name == "" {
		return Random().name
	}
	return m.name
}

// Bits draws n bits, one a byte, for simulation. The same seed gives the same bits. It panics if n is below 0, and when
// the running cell is interrupted.
func (m Model) Bits(n int, seed uint64) []byte {
	mustBeCount("Bits", n)
	ctx := page.Context()
	random := rand.New(rand.NewPCG(seed, streamOfBits))
	state := m.start(random.Float64())
	bits := make([]byte, n)
	for i := range bits {
		if i%blockOfBits == 0 && ctx.Err() != nil {
			panic(fmt.Errorf("source: interrupted after drawing %d of %d bits: %w", i, n, context.Cause(ctx)))
		}
		if random.Float64() < m.One(state) {
			bits[i] = 1
		}
		state = m.Next(state, bits[i])
	}
	return bits
}

const (
	streamOfBits = 0x6c696e65 // sets these draws apart from others that use the same seed
	blockOfBits  = 1 << 18    // drawn in about 2 ms, between looks at the interrupt
)

// start returns the state that a uniform draw from [0, 1) selects from the initial distribution.
func (m Model) start(draw float64) int {
	last := 0
	for s, p := range m.initial {
		if p == 0 {
			continue
		}
		if draw < p {
			return s
		}
		draw -= p
		last = s
	}
	return last // the probabilities add up to a little less than 1
}

func mustBeCount(function string, n int) {
	if n < 0 || n > math.MaxInt32 {
		panic(fmt.Errorf("source: %s of %d bits; ask for 0 to %d", function, n, math.MaxInt32))
	}
}
