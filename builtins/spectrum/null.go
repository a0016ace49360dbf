package spectrum

import (
	"context"
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/floats"

	"linewright/builtins/pulse"
)

// Where the density vanishes at 0 Hz the form of the symbols' process is a small difference of large numbers. It is
// replaced there by the form of a process whose density does not vanish, times pulses that do.
//
// With a single pulse of transform G: the density of the centred levels b(n) vanishes at 0 exactly if b is the
// difference of a function of the state, b(n) = x(n+1) - x(n), its running sum (a zero of the spectral density of a
// finite chain is a coboundary: G. L. Pierobon, "Codes for zero spectral density at zero frequency", IEEE Trans. Inform.
// Theory IT-30 (1984) 435-439, from memory). Then
//
//	sum of b(n) z^n = (1/z - 1) sum of x(n) z^n,   z = exp(-j t), t = 2 pi nu,
//
// so the density is (2 sin(t/2))^2 times that of x, with all digits. If x less its mean is such a difference too, the
// null is of order 2, and so on.
//
// With several pulses G_j the areas take the place of the levels. At each order k the waveform is
//
//	(1/z - 1)^k E sum of x(n) z^n + sum over j of D_j sum of c_j(n) z^n,
//
// E = (1 - exp(-s))/s the transform of the full-width rectangle, s = j t, and D_j = O(s^k): at first x = 0 and
// D_j = G_j. If d_j is the coefficient of s^k in D_j, then b(n) = x(n) + sum of d_j c_j(n) decides as before, its
// running sum is the next x, and D_j - d_j (1/z - 1)^k E the next D_j.
type null struct {
	form   *form
	order  int         // the density is O(nu^(2 order))
	taylor [][]float64 // for several pulses: coefficients of s^n in D_j; nil for one
	reach  float64     // largest |nu| (for one pulse: from the nearest whole number) at which this is meant to be used
}

const (
	mostOrder   = 6  // nulls of higher order keep their digits to this one
	taylorTerms = 24 // of D_j
	nearReach   = 0.1
	nearPart    = 0.05 // of the mean density below which the near form is used
)

// densities returns the form of the symbols' process, with at least so many lags, and, where it loses its digits near
// 0 Hz, the form to be used there: nil if none is needed.
func (p *process) densities(ctx context.Context, basis []pulse.Shape, scale float64, lags int) (*form, *null, error) {
	near, q := p.null(basis, scale)
	if near != nil {
		var err error
		if near.form, err = q.spectral(ctx, lags+near.order); err != nil {
			return nil, nil, err
		}
		if near.taylor == nil {
			// Unless the sums are much larger than the levels, their form has all the digits everywhere.
			top := max(near.form.power(0), near.form.at(newAngle(0), []complex128{1}))
			if math.Pow(4, float64(near.order))*top < 1e3*p.power {
				return near.form.raised(near.order), nil, nil
			}
		}
	}
	f, err := p.spectral(ctx, lags)
	return f, near, err
}

// null says how the density vanishes at 0 Hz and which process takes its place there; nil if it does not vanish.
func (p *process) null(basis []pulse.Shape, scale float64) (*null, *process) {
	if p.width == 1 {
		q, order := p, 0
		for order < mostOrder {
			x, size, ok := q.sums(q.out, q.size)
			if !ok {
				break
			}
			next := q.process(1, x, size)
			if next.zero(scale) {
				break
			}
			q = next
			order++
		}
		if order == 0 {
			return nil, nil
		}
		return &null{order: order, reach: nearReach}, q
	}
	x, d, order := p.areas(basis)
	if order == 0 {
		return nil, nil
	}
	far := 1.0
	for _, s := range basis {
		from, to := s.Support()
		far = max(far, -from, to)
	}
	return &null{order: order, taylor: d, reach: 0.5 / (2 * math.Pi * far)}, p.join(x)
}

// sums returns the running sums of a scalar that the edges emit, before each position, if they are bounded: then the sum
// is a function of the state. The scalar must have mean 0 and numbers no larger than size. The sums' size comes back too.
func (l *chainLaw) sums(b [][]float64, size float64) ([][]float64, float64, bool) {
	m := l.machine
	total := make([]float64, len(m.edges))
	for _, v := range b {
		floats.Add(total, v)
	}
	size *= float64(len(b))
	x, ok := l.potential(total, size)
	if !ok {
		return nil, 0, false
	}
	out := vectors(len(b), len(m.edges))
	for i := range m.edges {
		out[0][i] = x[m.edges[i].from]
	}
	for k := 1; k < len(b); k++ {
		floats.AddTo(out[k], out[k-1], b[k-1])
	}
	return out, largest(x) + size, true
}

// potential returns x with x[to] = x[from] + gain[e] for every edge, x[0] = 0, if there is one. Sums that should agree
// may differ by the rounding of means.
func (l *chainLaw) potential(gain []float64, scale float64) ([]float64, bool) {
	m := l.machine
	tolerance := 1e-10 * scale
	x := make([]float64, m.states)
	known := make([]bool, m.states)
	known[0] = true
	queue := []int32{0}
	for len(queue) > 0 {
		s := queue[0]
		queue = queue[1:]
		for i := l.head[s]; i < l.head[s+1]; i++ {
			t := m.edges[i].to
			v := x[s] + gain[i]
			if !known[t] {
				known[t] = true
				x[t] = v
				queue = append(queue, t)
			} else if math.Abs(v-x[t]) > tolerance {
				return nil, false
			}
		}
	}
	return x, true
}

// areas goes from order to order as the comment of null says and returns the last x, the coefficients of D_j and the
// order that was reached.
func (p *process) areas(basis []pulse.Shape) (x *process, d [][]float64, order int) {
	d = make([][]float64, len(basis))
	for j, s := range basis {
		d[j] = make([]float64, taylorTerms)
		sign := 1.0
		for n := range d[j] {
			d[j][n] = sign * s.Moment(n)
			sign /= -float64(n + 1)
		}
		if math.Abs(d[j][0]) < 1e-15*math.Sqrt(s.Overlap(s, 0)) {
			d[j][0] = 0
		}
	}
	unit := rectangle() // coefficients of (1/z - 1)^k E
	x = &process{out: vectors(p.length, len(p.mass))}
	for order < mostOrder {
		b := vectors(p.length, len(p.mass))
		size := x.size
		for j := range d {
			size += p.size * math.Abs(d[j][order])
		}
		for k := range b {
			copy(b[k], x.out[k])
			for j := range d {
				floats.AddScaled(b[k], d[j][order], p.out[k*p.width+j])
			}
		}
		next, size, ok := p.sums(b, size)
		if !ok {
			break
		}
		x = p.process(1, next, size)
		for j := range d {
			k := d[j][order]
			for n := range d[j] {
				d[j][n] -= k * unit[n]
			}
			d[j][order] = 0
		}
		unit = advance(unit)
		order++
	}
	return x, d, order
}

// rectangle gives the coefficients of E = (1 - exp(-s))/s.
func rectangle() []float64 {
	c := make([]float64, taylorTerms)
	v := 1.0
	for n := range c {
		v /= float64(n + 1)
		c[n] = v
		v = -v
	}
	return c
}

// advance multiplies a power series by 1/z - 1 = exp(s) - 1.
func advance(c []float64) []float64 {
	out := make([]float64, len(c))
	for i, v := range c {
		w := v
		for n := i + 1; n < len(out); n++ {
			w /= float64(n - i)
			out[n] += w
		}
	}
	return out
}

// join is the process of the vector (x, c).
func (p *process) join(x *process) *process {
	var out [][]float64
	for k, v := range x.out {
		out = append(out, v)
		out = append(out, p.out[k*p.width:(k+1)*p.width]...)
	}
	return p.process(p.width+1, out, max(x.size, p.size))
}

// at is the form at the angle t; energy is |G|^2 at the full frequency, which only one pulse needs.
func (n *null) at(t angle, energy float64) float64 {
	if n.taylor == nil {
		lift := 4 * t.half * t.half
		return math.Pow(lift, float64(n.order)) * n.form.at(t, []complex128{1}) * energy
	}
	s := complex(0, 2*math.Pi*t.nu)
	h := make([]complex128, len(n.taylor)+1)
	h[0] = pulse.Rect(1).Transform(t.nu)
	lift := complex(-2*t.half*t.half, t.sin) // exp(s) - 1
	for range n.order {
		h[0] *= lift
	}
	for j, d := range n.taylor {
		var sum complex128
		for i := len(d) - 1; i >= n.order; i-- {
			sum = sum*s + complex(d[i], 0)
		}
		h[j+1] = sum * cmplx.Pow(s, complex(float64(n.order), 0))
	}
	return n.form.at(t, h)
}
