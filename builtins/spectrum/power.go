package spectrum

import (
	"context"
	"fmt"
	"math"
	"sync"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/integrate/quad"
)

// A plan is a quadrature of the spectral matrix over one period of the symbol clock, 0 <= nu < 1: Gauss rules of 16
// points on panels that are halved until each gives what its halves give. The matrix repeats with every symbol rate,
// so one plan serves a band of any width; only the pulses' transforms change. What stands at nu stands, conjugated, at
// 1 - nu, so the panels cover 0 to 1/2 only.
type plan struct {
	edges  []float64 // of the panels: 0 = edges[0] < edges[1] < ... = 1/2
	nu     []float64 // 16 points a panel
	weight []float64
	matrix [][]float64 // at the points, as form.matrix has it
}

const rule = 16

var legendre = sync.OnceValues(func() (x, w []float64) {
	x, w = make([]float64, rule), make([]float64, rule)
	quad.Legendre{}.FixedLocations(x, w, 0, 1)
	return x, w
})

// Limits of integration: the part of the power that a panel may be wrong by, the narrowest panel, and the products that
// a walk along the frequency axis may cost before the asymptote takes over.
const (
	panelError = 1e-13
	narrowest  = 1e-13
	walkWork   = 1e8
)

// quadrature makes the plan. It is the inside check of the engine at the same time: the tones and the integral of the
// matrix over a period must give the mean squares of the time domain. A peak so narrow that no panel saw it fails the
// check, and the panels start out finer.
func (p *PSD) quadrature() *plan {
	p.planned.Lock()
	defer p.planned.Unlock()
	if p.plan != nil {
		return p.plan
	}
	far := 1.0
	var want, power, tones float64 // mean squares of all, of what has a density, and of the tones as they stand
	for _, s := range p.basis {
		from, to := s.Support()
		far = max(far, to-from)
	}
	for _, c := range p.parts {
		for i := range p.basis {
			want += c.prob * c.tones.square(i)
			tones += c.prob * c.tones.sum(i)
			if c.form != nil {
				power += c.prob * c.form.power(i)
			}
		}
	}
	want += power
	const finest = 1 << 16
	for start := int(4 * far); ; start *= 4 {
		q := p.panels(start, power)
		got := tones
		for i := range p.basis {
			got += 2 * floats.Dot(q.weight, q.matrix[i*len(p.basis)+i])
		}
		if math.Abs(got-want) <= 1e-10*want {
			p.plan = q
			return q
		}
		if start > finest {
			panic(fmt.Errorf("spectrum: the inside check fails for %s: its density and tones add up to %v where the time domain has %v; its memory is too long for the digits there are", p.name, got, want))
		}
	}
}

// panels halves start equal panels, and smaller and smaller ones toward 0, where slow data have their peak.
func (p *PSD) panels(start int, power float64) *plan {
	ctx := current()
	w := len(p.basis)
	q := &plan{edges: []float64{0}, matrix: make([][]float64, w*w)}
	type panel struct {
		lo, hi float64
		at     [][]float64
		sum    float64
	}
	sample := func(lo, hi float64) panel {
		stop(ctx)
		x, weight := legendre()
		s := panel{lo: lo, hi: hi, at: vectors(w*w, rule)}
		for k := range x {
			t := newAngle(lo + (hi-lo)*x[k])
			for _, c := range p.parts {
				if c.form != nil {
					c.form.matrix(t, s.at, k, c.prob)
				}
			}
		}
		for i := range w {
			s.sum += (hi - lo) * floats.Dot(weight, s.at[i*w+i])
		}
		return s
	}
	var stack []panel
	for k := start - 1; k >= 0; k-- {
		stack = append(stack, sample(0.5*float64(k)/float64(start), 0.5*float64(k+1)/float64(start)))
	}
	for len(stack) > 0 {
		s := stack[len(stack)-1]
		stack = stack[:len(stack)-1]
		mid := (s.lo + s.hi) / 2
		if s.hi-s.lo > narrowest {
			a, b := sample(s.lo, mid), sample(mid, s.hi)
			if math.Abs(a.sum+b.sum-s.sum) > panelError*power {
				stack = append(stack, b, a)
				continue
			}
		}
		x, weight := legendre()
		q.edges = append(q.edges, s.hi)
		for k := range x {
			q.nu = append(q.nu, s.lo+(s.hi-s.lo)*x[k])
			q.weight = append(q.weight, (s.hi-s.lo)*weight[k])
		}
		for i := range q.matrix {
			q.matrix[i] = append(q.matrix[i], s.at[i]...)
		}
	}
	return q
}

// whole is the continuous power in n <= nu < n+1, one-sided, in squared volts of the drive.
func (p *PSD) whole(q *plan, n int) float64 {
	sum := 0.0
	if len(p.basis) == 1 {
		for k, nu := range q.nu {
			both := p.basis[0].Energy(float64(n)+nu) + p.basis[0].Energy(float64(n+1)-nu)
			sum += q.weight[k] * q.matrix[0][k] * both
		}
		return 2 * sum
	}
	w := len(p.basis)
	h := make([]complex128, w)
	for k, nu := range q.nu {
		for side, at := range []float64{float64(n) + nu, float64(n+1) - nu} {
			for j := range h {
				h[j] = p.basis[j].Transform(at)
			}
			for i := range h {
				sum += q.weight[k] * q.matrix[i*w+i][k] * square(h[i])
				for j := i + 1; j < w; j++ {
					x := h[j] * complex(real(h[i]), -imag(h[i]))
					d := q.matrix[j*w+i][k]
					if side == 1 {
						d = -d
					}
					sum += q.weight[k] * 2 * (real(x)*q.matrix[i*w+j][k] + imag(x)*d)
				}
			}
		}
	}
	return 2 * sum
}

// band is the continuous power in lo <= nu < hi, both within the cell n <= nu <= n+1: whole panels where it can, and
// the rule afresh on what is cut off of one.
func (p *PSD) band(ctx context.Context, q *plan, lo, hi float64) float64 {
	n := math.Floor(lo)
	if hi <= lo {
		return 0
	}
	if lo == n && hi == n+1 {
		return p.whole(q, int(n))
	}
	x, weight := legendre()
	nu, v := make([]float64, rule), make([]float64, rule)
	sum := 0.0
	piece := func(a, b float64) {
		a, b = max(a, lo), min(b, hi)
		if b <= a {
			return
		}
		for k := range nu {
			nu[k] = a + (b-a)*x[k]
		}
		p.evaluate(ctx, v, nu)
		sum += 2 * (b - a) * floats.Dot(weight, v)
	}
	for i := 1; i < len(q.edges); i++ {
		piece(n+q.edges[i-1], n+q.edges[i])
	}
	for i := len(q.edges) - 1; i > 0; i-- {
		piece(n+1-q.edges[i], n+1-q.edges[i-1])
	}
	return sum
}

// cells is the number of cells that a walk along the frequency axis takes one by one.
func (p *PSD) cells(q *plan) float64 {
	each := 2 * len(q.nu) * len(p.basis) * len(p.basis)
	for _, c := range p.parts {
		each += c.tones.period
	}
	return math.Max(16, math.Floor(walkWork/float64(each)))
}

// between is the power in lo <= f < hi in squared volts of the drive, tones included, for hi within the cells.
func (p *PSD) between(ctx context.Context, q *plan, lo, hi float64) float64 {
	sum := 0.0
	for _, c := range p.parts {
		if c.prob > 0 {
			p.each(ctx, c.tones, lo, hi, func(_ int, power float64) { sum += c.prob * power })
		}
	}
	a, b := whole(lo/p.drive.SymbolRate), whole(hi/p.drive.SymbolRate)
	for n := math.Floor(a); n < b; n++ {
		stop(ctx)
		sum += p.band(ctx, q, max(a, n), min(b, n+1))
	}
	return sum
}

// whole rounds a frequency in symbol rates that misses a whole number by the rounding of its division.
func whole(nu float64) float64 {
	if r := math.Round(nu); math.Abs(nu-r) <= 4e-16*r {
		return r
	}
	return nu
}

// Power returns the power in lo <= f < hi, in V^2 over Hz, tones included. hi may be +Inf. It panics unless
// 0 <= lo <= hi.
//
// Smooth stretches are integrated by Gauss rules on panels that follow the density's peaks, to about 1e-11 of the total.
// Above all cells of one symbol rate that are worth walking (some 100,000 for a simple code) the rest of [PSD.Total] is
// spread as the tail of a pulse with edges, proportional to 1/f; it is then less than about 1e-5 of the total.
func (p *PSD) Power(lo, hi float64) float64 {
	if !(lo >= 0 && lo <= hi) || math.IsInf(lo, 0) {
		panic(fmt.Errorf("spectrum: Power(%v, %v): give 0 <= lo <= hi in Hz; hi may be +Inf", lo, hi))
	}
	return p.made().volts2() * p.power(current(), p.quadrature(), lo, hi)
}

func (p *PSD) power(ctx context.Context, q *plan, lo, hi float64) float64 {
	far := p.cells(q) * p.drive.SymbolRate
	switch {
	case lo == hi:
		return 0
	case hi <= far:
		return p.between(ctx, q, lo, hi)
	case lo <= far:
		// From the time domain: what lies below lo and above hi is taken off the whole.
		rest := 0.0
		if !math.IsInf(hi, 1) {
			rest = p.above(ctx, q, far) * far / hi
		}
		return max(0, p.total/p.volts2()-p.between(ctx, q, 0, lo)-rest)
	}
	tail := p.above(ctx, q, far) * far
	if math.IsInf(hi, 1) {
		return tail / lo
	}
	return tail * (1/lo - 1/hi)
}

// above is the power from far upward.
func (p *PSD) above(ctx context.Context, q *plan, far float64) float64 {
	return max(0, p.total/p.volts2()-p.between(ctx, q, 0, far))
}

// Within returns the frequency f in Hz for which 0 < f' <= f holds the given part of the power above 0 Hz: the mean is
// left out. It returns 0 if there is no power above 0 Hz, and panics unless 0 < part < 1.
//
// It is a plain statement about this spectrum and no occupied bandwidth in the sense of radio regulations, which
// leaves equal parts out on both sides and is measured as they say.
func (p *PSD) Within(part float64) float64 {
	if !(part > 0 && part < 1) {
		panic(fmt.Errorf("spectrum: Within(%v): give a part of the power greater than 0 and less than 1", part))
	}
	ctx := current()
	q := p.made().quadrature()
	mean := 0.0
	for _, c := range p.parts {
		mean += c.prob * p.tone(c.tones, 0)
	}
	all := p.total/p.volts2() - mean
	if all <= absent*p.total/p.volts2() {
		return 0
	}
	want := part * all
	sum := -mean
	rate := p.drive.SymbolRate
	far := p.cells(q)
	for n := 0.0; n < far; n++ {
		stop(ctx)
		here := p.between(ctx, q, n*rate, (n+1)*rate)
		if sum+here >= want {
			return p.search(ctx, q, n*rate, (n+1)*rate, want-sum)
		}
		sum += here
	}
	return far * rate * (all - sum) / (all - want)
}

// search finds f in lo <= f <= hi so that the power from lo up to and including f is want: halving, down to
// neighbouring numbers if a tone is what decides.
func (p *PSD) search(ctx context.Context, q *plan, lo, hi, want float64) float64 {
	for {
		mid := lo + (hi-lo)/2
		if mid <= lo || mid >= hi {
			if p.between(ctx, q, lo, math.Nextafter(lo, math.Inf(1))) >= want {
				return lo
			}
			return hi
		}
		below := p.between(ctx, q, lo, math.Nextafter(mid, math.Inf(1)))
		if below >= want {
			hi = mid
		} else {
			want -= below
			lo = math.Nextafter(mid, math.Inf(1))
		}
	}
}
