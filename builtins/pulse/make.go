package pulse

import (
	"fmt"
	"math"
)

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

func shape(parts ...piece) Shape { return Shape{pieces: parts, made: true} }

// Rect returns a rectangle of height 1 over the first part of the symbol: 0 <= x < duty. It panics unless
// 0 < duty <= 1; for a pulse that reaches beyond its symbol use [Points].
func Rect(duty float64) Shape {
	if !(duty > 0 && duty <= 1) {
		panic(fmt.Errorf("pulse: Rect(%v): a duty is greater than 0 and at most 1 (the part of the symbol that the pulse fills)", duty))
	}
	return shape(piece{width: duty, c0: 1})
}

// Points returns the straight lines through (t[i], v[i]), t in symbols from the symbol's start; the shape jumps where a
// t stands twice and is 0 outside. It panics unless t and v have the same length, at least 2, all finite, and t does not
// fall, has no time more than twice, and spans some time.
func Points(t, v []float64) Shape {
	if len(t) != len(v) || len(t) < 2 {
		panic(fmt.Errorf("pulse: Points with %d times and %d values; give as many of one as of the other, at least 2", len(t), len(v)))
	}
	var parts []piece
	for i := range t {
		switch {
		case !finite(t[i]) || !finite(v[i]):
			panic(fmt.Errorf("pulse: Points: point %d is (%v, %v); both must be finite numbers", i, t[i], v[i]))
		case i > 0 && t[i] < t[i-1]:
			panic(fmt.Errorf("pulse: Points: time %v of point %d comes after %v; times must not fall", t[i], i, t[i-1]))
		case i > 1 && t[i] == t[i-2]:
			panic(fmt.Errorf("pulse: Points: time %v stands three times (point %d); a jump is two points at one time", t[i], i))
		case i > 0 && t[i] > t[i-1] && (v[i-1] != 0 || v[i] != 0):
			w := t[i] - t[i-1]
			parts = append(parts, piece{from: t[i-1], width: w, c0: complex(v[i-1], 0), c1: complex(v[i]-v[i-1], 0)})
		}
	}
	if t[len(t)-1] == t[0] {
		panic(fmt.Errorf("pulse: Points: all %d points are at time %v; a shape needs some width", len(t), t[0]))
	}
	return shape(parts...)
}

// Trapezoid returns straight edges: from 0 to 1 over rise, flat at 1 over top, back to 0 over fall, all in parts of the
// symbol, beginning at the symbol's start. Each may be 0, not all of them. It panics on negative or non-finite values.
func Trapezoid(rise, top, fall float64) Shape {
	for _, w := range []float64{rise, top, fall} {
		if !(w >= 0) || math.IsInf(w, 0) {
			panic(fmt.Errorf("pulse: Trapezoid(%v, %v, %v): rise, top and fall are parts of the symbol, none below 0", rise, top, fall))
		}
	}
	if rise+top+fall == 0 {
		panic(fmt.Errorf("pulse: Trapezoid(0, 0, 0) has no width; give rise, top or fall as a part of the symbol"))
	}
	var parts []piece
	if rise > 0 {
		parts = append(parts, piece{width: rise, c1: 1})
	}
	if top > 0 {
		parts = append(parts, piece{from: rise, width: top, c0: 1})
	}
	if fall > 0 {
		parts = append(parts, piece{from: rise + top, width: fall, c0: 1, c1: -1})
	}
	return shape(parts...)
}

func width(name string, w float64) {
	if !(w > instant) || math.IsInf(w, 0) {
		panic(fmt.Errorf("pulse: %s(%v): the width is a finite number of symbols greater than 0", name, w))
	}
}

// HalfSine returns sin(pi x/width) over 0 <= x < width, width in symbols. It panics unless width is greater than 0.
func HalfSine(w float64) Shape {
	width("HalfSine", w)
	return shape(piece{width: w, c0: -1i, turns: 1 / (2 * w)})
}

// RaisedCosine returns (1 - cos(2 pi x/width))/2 over 0 <= x < width, width in symbols: a raised cosine in time, not
// the spectrum of that name. It panics unless width is greater than 0.
func RaisedCosine(w float64) Shape {
	width("RaisedCosine", w)
	return shape(piece{width: w, c0: 0.5}, piece{width: w, c0: -0.5, turns: 1 / w})
}

const (
	tail    = 40    // time constants after which an exponential is cut off: exp(-40) is below the last digit
	instant = 1e-18 // symbols up to which a time constant is none
)

// Exponential returns the pulse of a driver with one time constant each way: while it is on, 0 <= x < on, the pulse
// rises as 1 - exp(-x/rise); then it falls from what it has reached as exp(-(x-on)/fall), on into later symbols. All are
// in symbols; rise or fall 0 is an edge without delay. It panics unless on > 0, rise >= 0 and fall >= 0.
func Exponential(on, rise, fall float64) Shape {
	if !(on > 0 && rise >= 0 && fall >= 0) || math.IsInf(on+rise+fall, 0) {
		panic(fmt.Errorf("pulse: Exponential(%v, %v, %v): on is greater than 0, the time constants rise and fall are at least 0, all in symbols", on, rise, fall))
	}
	parts := []piece{{width: on, c0: 1}}
	top := 1.0
	if rise > instant {
		parts = append(parts, piece{width: on, c0: -1, rate: -1 / rise})
		top = -math.Expm1(-on / rise)
	}
	if fall > instant {
		parts = append(parts, piece{from: on, width: tail * fall, c0: complex(top, 0), rate: -1 / fall})
	}
	return shape(parts...)
}

// Settle returns one whole symbol, 0 <= x < 1, that starts at the value from and settles at the value to as
// to + (from - to) exp(-x/tau), tau in symbols: what a driver with one time constant gives in a [Train]'s Transition.
// With tau = 0 it is at to all the time. It panics unless the values are finite and tau at least 0.
func Settle(from, to, tau float64) Shape {
	if !finite(from) || !finite(to) || !(tau >= 0) || math.IsInf(tau, 0) {
		panic(fmt.Errorf("pulse: Settle(%v, %v, %v): from and to are finite, the time constant is at least 0 symbols", from, to, tau))
	}
	parts := []piece{{width: 1, c0: complex(to, 0)}}
	if tau > instant {
		parts = append(parts, piece{width: 1, c0: complex(from-to, 0), rate: -1 / tau})
	}
	return shape(parts...)
}

// Scaled returns k times the shape. It panics unless k is finite.
func Scaled(s Shape, k float64) Shape {
	if !finite(k) {
		panic(fmt.Errorf("pulse: Scaled by %v; the factor must be a finite number", k))
	}
	if k == 0 {
		return shape()
	}
	parts := append([]piece(nil), s.parts()...)
	for i := range parts {
		parts[i].c0 *= complex(k, 0)
		parts[i].c1 *= complex(k, 0)
	}
	return shape(parts...)
}

// Delayed returns the shape dt symbols later, earlier if dt is negative. It panics unless dt is finite.
func Delayed(s Shape, dt float64) Shape {
	if !finite(dt) {
		panic(fmt.Errorf("pulse: Delayed by %v; the delay is a finite number of symbols", dt))
	}
	parts := append([]piece(nil), s.parts()...)
	for i := range parts {
		parts[i].from += dt
	}
	return shape(parts...)
}

// Sum returns the sum of the shapes; of none it is 0 everywhere.
func Sum(shapes ...Shape) Shape {
	var parts []piece
	for _, s := range shapes {
		parts = append(parts, s.parts()...)
	}
	return shape(parts...)
}
