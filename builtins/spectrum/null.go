package spectrum

import (
	"context"
	"math"
	"math/cmplx"

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
	form  *form
	order int         // the density is O(nu^(2 order))
	taylr [][]float64 // for several pulses: coefficients of s^n in D_j; nil for one
	reach float64     // largest |nu| (for one pulse: from the nearest whole number) at which this is meant to be used
}

const (
	mostOrder   = 6  // nulls of higher order keep their digits to this one
	taylorTerms = 24 // of D_j
	nearReach   = 0.1
	nearPart    = 0.05 // of the mean density below which the near form is used
)

// nearNull returns the form for a density that vanishes at 0 Hz, nil if it does not.
func nearNull(ctx context.Context, p *process, basis []pulse.Shape, scale float64) (*null, error) {
	var n *null
	if p.width == 1 {
		q := p
		order := 0
		for order < mostOrder {
			x, ok := q.sums(q.out)
			if !ok {
				break
			}
			next := q.process(1, x)
			if next.zero(scale) {
				break
			}
			q = next
			order++
		}
		if order == 0 {
			return nil, nil
		}
		n = &null{order: order, reach: nearReach}
		p = q
	} else {
		x, d, order := p.areas(basis)
		if order == 0 {
			return nil, nil
		}
		far := 1.0
		for _, s := range basis {
			from, to := s.Support()
			far = max(far, -from, to)
		}
		n = &null{order: order, taylr: d, reach: 0.5 / (2 * math.Pi * far)}
		p = p.join(x)
	}
	var err error
	n.form, err = p.spectral(ctx, 0)
	return n, err
}

// sums returns the running sums of a scalar that the edges emit, before each position, if they are bounded: then the sum
// is a function of the state. The scalar must have mean 0.
func (l *chainLaw) sums(b []float64) ([]float64, bool) {
	m := l.machine
	n := l.length
	total := make([]float64, len(m.edges))
	top := 0.0
	for i := range m.edges {
		for _, v := range b[i*n : (i+1)*n] {
			total[i] += v
			top = max(top, math.Abs(v))
		}
	}
	x, ok := l.potential(total, top*float64(n))
	if !ok {
		return nil, false
	}
	out := make([]float64, len(b))
	for i, e := range m.edges {
		sum := x[e.from]
		for k := range n {
			out[i*n+k] = sum
			sum += b[i*n+k]
		}
	}
	return out, true
}

// potential returns x with x[to] = x[from] + gain[e] for every edge, x[0] = 0, if there is one. Sums that should agree
// may differ by the rounding of a mean; scale is the largest gain that there could be.
func (l *chainLaw) potential(gain []float64, scale float64) ([]float64, bool) {
	m := l.machine
	tolerance := 1e-10 * scale
	x := make([]float64, m.states)
	known := make([]bool, m.states)
	known[0] = true
	head, order := l.outgoing()
	queue := []int32{0}
	for len(queue) > 0 {
		s := queue[0]
		queue = queue[1:]
		for _, i := range order[head[s]:head[s+1]] {
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

// outgoing lists the numbers of the edges by the state that they leave.
func (l *chainLaw) outgoing() (head, order []int32) {
	m := l.machine
	head = make([]int32, m.states+1)
	for _, e := range m.edges {
		head[e.from+1]++
	}
	for s := range m.states {
		head[s+1] += head[s]
	}
	fill := append([]int32(nil), head[:m.states]...)
	order = make([]int32, len(m.edges))
	for i, e := range m.edges {
		order[fill[e.from]] = int32(i)
		fill[e.from]++
	}
	return head, order
}

// areas goes from order to order as the comment of null says and returns the last x, the coefficients of D_j and the
// order that was reached.
func (p *process) areas(basis []pulse.Shape) (x []float64, d [][]float64, order int) {
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
	x = make([]float64, len(p.out)/p.width)
	for order < mostOrder {
		b := append([]float64(nil), x...)
		for n := range b {
			for j := range d {
				b[n] += d[j][order] * p.out[n*p.width+j]
			}
		}
		next, ok := p.sums(b)
		if !ok {
			break
		}
		x = p.process(1, next).out
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
func (p *process) join(x []float64) *process {
	w := p.width + 1
	out := make([]float64, 0, len(x)*w)
	for n, v := range x {
		out = append(out, v)
		out = append(out, p.out[n*p.width:(n+1)*p.width]...)
	}
	return p.process(w, out)
}

// at is the form at the angle t; energy is |G|^2 at the full frequency, which only one pulse needs.
func (n *null) at(t angle, energy float64) float64 {
	if n.taylr == nil {
		lift := 4 * t.half * t.half
		return math.Pow(lift, float64(n.order)) * n.form.at(t, []complex128{1}) * energy
	}
	s := complex(0, 2*math.Pi*t.nu)
	h := make([]complex128, len(n.taylr)+1)
	h[0] = pulse.Rect(1).Transform(t.nu)
	lift := complex(-2*t.half*t.half, t.sin) // exp(s) - 1
	for range n.order {
		h[0] *= lift
	}
	for j, d := range n.taylr {
		var sum complex128
		for i := len(d) - 1; i >= n.order; i-- {
			sum = sum*s + complex(d[i], 0)
		}
		h[j+1] = sum * cmplx.Pow(s, complex(float64(n.order), 0))
	}
	return n.form.at(t, h)
}
