package pulse

import (
	"errors"
	"fmt"
	"math"
	"slices"
)

// A Train says how symbols become volts: one pulse a symbol, equally spaced. Its zero value sends 1 symbol/s at 1 V per
// unit of symbol level in full-width rectangles.
type Train struct {
	// BitRate is the rate of source bits in Hz. It needs a code whose rate no data can change; for others (bit stuffing)
	// give SymbolRate. Give at most one of the two; none means 1 symbol/s.
	BitRate float64
	// SymbolRate is the rate of symbols in Hz. Give at most one of BitRate and SymbolRate; none means 1 symbol/s.
	SymbolRate float64
	// Level is in volts per unit of symbol level, across the load as sent. Give at most one of Level and Peak; none means
	// Level 1.
	Level float64
	// Peak is in volts at the code's largest level, across the load as sent. Give at most one of Level and Peak; none
	// means Level 1.
	Peak float64
	// Load is in ohms. Zero means not stated: then only V^2 is given, and asking for watts or dBm is an error.
	Load float64
	// Shape is the pulse of one symbol: a symbol of level a is Level a Shape(t/T). The zero value is a full-width
	// rectangle.
	Shape Shape
	// Shapes replaces Shape for single levels and keeps the factor a.
	Shapes map[float64]Shape
	// Transition, for drivers whose edges differ, gives the whole waveform of one symbol in units of Level, without
	// the factor a and within its own symbol (0 <= x <= 1), given the level before it, which is 0 before the first
	// symbol. It excludes Shape and Shapes.
	Transition func(prev, next float64) Shape
}

// A Coder is what a train has to know of a code.
type Coder interface {
	// Name is the code's name, for messages.
	Name() string
	// Levels are the levels of its symbols.
	Levels() []float64
	// FixedRate gives the source bits and the symbols of a cycle in lowest terms; fixed is false where data change the
	// ratio, as in bit stuffing.
	FixedRate() (bits, symbols int, fixed bool)
}

// A Drive is a [Train] with everything that depends on the code settled.
type Drive struct {
	SymbolRate float64 // Hz
	Volts      float64 // volts per unit of symbol level
	Load       float64 // ohms; 0 means not stated

	shape      Shape
	shapes     map[float64]Shape
	transition func(prev, next float64) Shape
}

// Drive settles the train for a code. It is an error if a rate, level or load is negative or not finite, if both of
// BitRate and SymbolRate or both of Level and Peak are given, if BitRate is given for a code whose rate its data change,
// if Peak is given for a code all of whose levels are 0, if Shapes names a level that the code does not have, and if
// Transition stands beside Shape or Shapes.
func (t Train) Drive(c Coder) (*Drive, error) {
	if c == nil {
		return nil, errors.New("pulse: Drive got no code; give it one from linecode")
	}
	for _, q := range []struct {
		name string
		v    float64
		unit string
	}{
		{"BitRate", t.BitRate, "Hz"}, {"SymbolRate", t.SymbolRate, "Hz"}, {"Level", t.Level, "volts"},
		{"Peak", t.Peak, "volts"}, {"Load", t.Load, "ohms"},
	} {
		if !(q.v >= 0) || math.IsInf(q.v, 0) {
			return nil, fmt.Errorf("pulse: %s is %v; give a finite number of %s greater than 0, or leave it out", q.name, q.v, q.unit)
		}
	}
	d := &Drive{SymbolRate: 1, Volts: 1, Load: t.Load, shape: t.Shape, transition: t.Transition}
	switch {
	case t.BitRate != 0 && t.SymbolRate != 0:
		return nil, fmt.Errorf("pulse: both BitRate %v Hz and SymbolRate %v Hz are given; give one", t.BitRate, t.SymbolRate)
	case t.SymbolRate != 0:
		d.SymbolRate = t.SymbolRate
	case t.BitRate != 0:
		bits, symbols, fixed := c.FixedRate()
		if !fixed {
			return nil, fmt.Errorf("pulse: BitRate %v Hz does not fix the symbols of %s, whose data change how many bits a symbol carries; give SymbolRate, the rate of the line's clock", t.BitRate, c.Name())
		}
		if bits == 0 {
			return nil, fmt.Errorf("pulse: BitRate %v Hz does not fix the symbols of %s, which carry no bits; give SymbolRate", t.BitRate, c.Name())
		}
		d.SymbolRate = t.BitRate * float64(symbols) / float64(bits)
	}
	levels := c.Levels()
	switch {
	case t.Level != 0 && t.Peak != 0:
		return nil, fmt.Errorf("pulse: both Level %v and Peak %v volts are given; give one", t.Level, t.Peak)
	case t.Level != 0:
		d.Volts = t.Level
	case t.Peak != 0:
		top := 0.0
		for _, a := range levels {
			top = max(top, math.Abs(a))
		}
		if top == 0 {
			return nil, fmt.Errorf("pulse: Peak %v V cannot be reached by %s, all of whose levels are 0; give Level", t.Peak, c.Name())
		}
		d.Volts = t.Peak / top
	}
	if t.Transition != nil && (t.Shape.made || len(t.Shapes) > 0) {
		return nil, errors.New("pulse: Transition gives a symbol's whole waveform and excludes Shape and Shapes; give one or the other")
	}
	for a := range t.Shapes {
		if !slices.Contains(levels, a) {
			return nil, fmt.Errorf("pulse: Shapes has a pulse for level %v, which %s does not have; its levels are %v", unknownLevel(t.Shapes, levels), c.Name(), levels)
		}
	}
	if len(t.Shapes) > 0 {
		d.shapes = make(map[float64]Shape, len(t.Shapes))
		for a, s := range t.Shapes {
			d.shapes[a] = s
		}
	}
	return d, nil
}

// unknownLevel is the least level of shapes that the code does not have, so that the message does not depend on the
// order of a map; NaN, which is less than nothing, if there is no other.
func unknownLevel(shapes map[float64]Shape, levels []float64) float64 {
	least := math.NaN()
	for a := range shapes {
		if !slices.Contains(levels, a) && !(a >= least) {
			least = a
		}
	}
	return least
}

// Transitional tells whether a symbol's waveform depends on the level before it.
func (d *Drive) Transitional() bool { return d.transition != nil }

// Single returns the pulse that every level scales, if there is one pulse for all: no Shapes and no Transition.
func (d *Drive) Single() (s Shape, ok bool) {
	return d.shape, d.transition == nil && len(d.shapes) == 0
}

// Symbol returns the waveform of one symbol of level next after one of level prev, in units of Volts and with the
// factor of the level included. It is an error if the train's Transition panics or gives a shape that leaves its own
// symbol.
func (d *Drive) Symbol(prev, next float64) (s Shape, err error) {
	if d.transition == nil {
		if own, ok := d.shapes[next]; ok {
			return Scaled(own, next), nil
		}
		return Scaled(d.shape, next), nil
	}
	defer func() {
		if r := recover(); r != nil {
			s, err = Shape{}, fmt.Errorf("pulse: Transition(%v, %v) failed: %v", prev, next, r)
		}
	}()
	s = d.transition(prev, next)
	const slack = 1e-12 // sums of edges such as 0.7 + 0.3 may pass 1 by a rounding
	if from, to := s.Support(); from < -slack || to > 1+slack {
		return Shape{}, fmt.Errorf("pulse: Transition(%v, %v) gives a shape over %v to %v; it must stay within its own symbol, 0 to 1", prev, next, from, to)
	}
	return s, nil
}
