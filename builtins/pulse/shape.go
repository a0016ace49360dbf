package pulse

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/integrate/quad"
)

// A Shape is a real waveform over x = t/T, the time from the symbol's start in symbol periods. The zero value is a
// rectangle of full width, Rect(1). Shapes are values: nothing changes them once they are made.
type Shape struct {
	pieces []piece
	made   bool // false in the zero value, which is the full-width rectangle
}

var full = []piece{{width: 1, c0: 1}}

func (s Shape) parts() []piece {
	if !s.made {
		return full
	}
	return s.pieces
}

// At returns the shape's value at x. At a jump it is the value to the right.
func (s Shape) At(x float64) float64 {
	v := 0.0
	for i, parts := 0, s.parts(); i < len(parts); i++ {
		if p := &parts[i]; p.from <= x && x < p.from+p.width {
			v += p.at(x - p.from)
		}
	}
	return v
}

// Transform returns the integral of s(x) exp(-2 pi j nu x) over all x, where nu is a frequency in symbol rates. It is
// a closed form: good to about 1e-15 of the integral of |s|, and exactly 0 at the nulls of a rectangle.
func (s Shape) Transform(nu float64) complex128 {
	var sum complex128
	for i, parts := 0, s.parts(); i < len(parts); i++ {
		sum += parts[i].transform(nu)
	}
	return sum
}

// Energy returns |Transform(nu)|^2.
func (s Shape) Energy(nu float64) float64 {
	if parts := s.parts(); len(parts) == 1 && parts[0].real() && parts[0].c1 == 0 && parts[0].rate == 0 {
		p := &parts[0] // a rectangle: the commonest shape needs one sine
		a := real(p.c0) * p.width
		if turns := nu * p.width; turns != 0 {
			if r := turns - math.Round(turns); r != 0 {
				a *= math.Sin(math.Pi*r) / (math.Pi * turns)
			} else {
				a = 0
			}
		}
		return a * a
	}
	g := s.Transform(nu)
	return real(g)*real(g) + imag(g)*imag(g)
}

// Support returns the interval outside which the shape is 0.
func (s Shape) Support() (from, to float64) {
	parts := s.parts()
	if len(parts) == 0 {
		return 0, 0
	}
	from, to = math.Inf(1), math.Inf(-1)
	for i := range parts {
		from = min(from, parts[i].from)
		to = max(to, parts[i].from+parts[i].width)
	}
	return from, to
}

// Overlap returns the integral of s(x) o(x - shift) over all x, in closed form. The energy of a shape is its overlap
// with itself at shift 0.
func (s Shape) Overlap(o Shape, shift float64) float64 {
	sum := 0.0
	a, b := s.parts(), o.parts()
	for i := range a {
		for j := range b {
			q := b[j]
			q.from += shift
			sum += overlap(&a[i], &q)
		}
	}
	return sum
}

// Moment returns the integral of x^n s(x) over all x. Moment(0) is the shape's area.
//
// Gauss rules of 24 points over parts in which the exponential changes by less than a factor of e^2 give it to the
// last digits for n up to about 20.
func (s Shape) Moment(n int) float64 {
	x, w := gauss24()
	sum := 0.0
	for i, parts := 0, s.parts(); i < len(parts); i++ {
		p := &parts[i]
		width := p.width
		if p.rate < 0 {
			width = min(width, tail/-p.rate) // after that nothing is left
		}
		panels := 1 + int(width*(math.Abs(p.rate)+2*math.Pi*math.Abs(p.turns))/2)
		h := width / float64(panels)
		for k := range panels {
			for j := range x {
				u := (float64(k) + x[j]) * h
				sum += h * w[j] * math.Pow(p.from+u, float64(n)) * p.at(u)
			}
		}
	}
	return sum
}

var gauss24 = sync.OnceValues(func() (x, w []float64) {
	x, w = make([]float64, 24), make([]float64, 24)
	quad.Legendre{}.FixedLocations(x, w, 0, 1)
	return x, w
})
