package spectrum_test

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/source"
	"linewright/builtins/spectrum"
)

// A clock is a chain cut into edges of one symbol each, every one with states of its own: the plain construction that
// the engine's shortcuts are held against.
type clock struct {
	n        int
	from, to []int
	p, level []float64
}

// unroll cuts a chain without silent edges.
func unroll(ch *linecode.Chain) *clock {
	c := &clock{n: ch.States}
	for _, e := range ch.Edges {
		from, p := e.From, e.P
		for k, a := range e.Levels {
			to := e.To
			if k < len(e.Levels)-1 {
				to = c.n
				c.n++
			}
			c.from, c.to = append(c.from, from), append(c.to, to)
			c.p, c.level = append(c.p, p), append(c.level, a)
			from, p = to, 1
		}
	}
	return c
}

// stationary solves the balance equations by the library's least squares.
func (c *clock) stationary() []float64 {
	a := mat.NewDense(c.n+1, c.n, nil)
	for i := range c.p {
		a.Set(c.to[i], c.from[i], a.At(c.to[i], c.from[i])+c.p[i])
	}
	for s := range c.n {
		a.Set(s, s, a.At(s, s)-1)
		a.Set(c.n, s, 1)
	}
	b := mat.NewVecDense(c.n+1, nil)
	b.SetVec(c.n, 1)
	var x mat.VecDense
	if err := x.SolveVec(a, b); err != nil {
		panic(err)
	}
	return x.RawVector().Data
}

// correlation runs the chain forward in time: the mean of f(edge now) g(edge l symbols later) for l = 0 .. lags-1. Of
// each it takes off the value far steps on, where only what repeats with the period is left, if far is a multiple of it; far 0 takes off
// nothing.
func (c *clock) correlation(f, g []float64, lags, far int) []float64 {
	pi := c.stationary()
	v, next := make([]float64, c.n), make([]float64, c.n)
	r := make([]float64, far+lags)
	for i := range c.p {
		mass := pi[c.from[i]] * c.p[i]
		r[0] += mass * f[i] * g[i]
		v[c.to[i]] += mass * f[i]
	}
	for l := 1; l < len(r); l++ {
		clear(next)
		for i := range c.p {
			r[l] += v[c.from[i]] * c.p[i] * g[i]
			next[c.to[i]] += v[c.from[i]] * c.p[i]
		}
		v, next = next, v
	}
	if far > 0 {
		for l := range lags {
			r[l] -= r[l+far]
		}
	}
	return r[:lags]
}

// lingers tells whether the last lags are not negligible yet.
func lingers(r []float64) bool {
	for _, v := range r[len(r)-50:] {
		if math.Abs(v) > 1e-13 {
			return true
		}
	}
	return false
}

// drawChain makes an irreducible chain of a few states with words of one or two symbols.
func drawChain(t *rapid.T) *linecode.Chain {
	n := rapid.IntRange(1, 4).Draw(t, "states")
	ch := &linecode.Chain{Name: "drawn", States: n}
	word := func() []float64 {
		return rapid.SliceOfN(rapid.SampledFrom([]float64{-1, 0, 1, 3}), 1, 2).Draw(t, "word")
	}
	for s := range n {
		p := rapid.Float64Range(0.25, 0.75).Draw(t, "p")
		ch.Edges = append(ch.Edges,
			linecode.Edge{From: s, To: (s + 1) % n, P: p, Levels: word()},
			linecode.Edge{From: s, To: rapid.IntRange(0, n-1).Draw(t, "to"), P: 1 - p, Levels: word()})
	}
	return ch
}

// Small machines of any period and word length, against the time recursion of the unrolled chain.
func TestAgainstTimeRecursion(t *testing.T) {
	const lags, far = 2400, 2520 // no cycle is longer than 8 symbols, so every period divides 2520
	rapid.Check(t, func(t *rapid.T) {
		ch := drawChain(t)
		p, err := spectrum.OfChain(ch, pulse.Train{})
		if err != nil {
			t.Fatal(err)
		}
		c := unroll(ch)
		r := c.correlation(c.level, c.level, lags, far)
		if lingers(r) {
			t.Skip("the time recursion is too short for this chain")
		}
		for _, nu := range []float64{0, 0.07, 0.31, 0.5, 0.83} {
			got := p.At(nu) / (2 * sinc2(nu))
			want := r[0]
			for l := 1; l < lags; l++ {
				want += 2 * r[l] * math.Cos(2*math.Pi*nu*float64(l))
			}
			if math.Abs(got-want) > 1e-9*(1+want) {
				t.Errorf("at %v: %v, time recursion %v", nu, got, want)
			}
		}
		closure(t, p)
	})
}

// closure holds the integral of density and tones against the mean square of the time domain.
func closure(t interface {
	Helper()
	Errorf(string, ...any)
}, p *spectrum.PSD) {
	t.Helper()
	rate := p.SymbolRate()
	// Walk 300 cells and take the rest from what a pulse with edges leaves: proportional to 1/f.
	const cells = 300
	sum := p.Power(0, cells*rate)
	half := p.Power(0, cells/2*rate)
	total := p.Total()
	rest := total - sum
	if total == 0 {
		if sum != 0 {
			t.Errorf("%s: power %v of nothing", p.Name(), sum)
		}
		return
	}
	if rest < -1e-12*total || math.Abs(total-half-2*rest) > 2e-4*math.Abs(rest)+5e-8*total {
		t.Errorf("%s: %v below %v cells, %v below half of them, mean square %v: the rest is no tail", p.Name(), sum, cells, half, total)
	}
	parts := p.Power(0, 0.3*rate) + p.Power(0.3*rate, 2.25*rate) + p.Power(2.25*rate, math.Inf(1))
	if math.Abs(parts-total) > 1e-9*total {
		t.Errorf("%s: bands add up to %v, mean square %v", p.Name(), parts, total)
	}
	for _, part := range []float64{0.5, 0.9} {
		mean := 0.0
		if lines := p.Lines(0); len(lines) > 0 {
			mean = lines[0].Power
		}
		if total-mean < 1e-12*total {
			continue
		}
		f := p.Within(part)
		above := math.Nextafter(f, math.Inf(1))
		if got := (p.Power(0, above) - mean) / (total - mean); got < part-1e-9 {
			t.Errorf("%s: Within(%v) = %v holds %v only", p.Name(), part, f, got)
		}
		if got := (p.Power(0, f) - mean) / (total - mean); got > part+1e-9 {
			t.Errorf("%s: below Within(%v) = %v there is %v already", p.Name(), part, f, got)
		}
	}
}

func TestParseval(t *testing.T) {
	codes := []*linecode.Code{linecode.UnipolarRZ(0.5), linecode.PolarRZ(1. / 3), linecode.BitStuffing(3)}
	for _, name := range linecode.Names() {
		code, err := linecode.ByName(name)
		if err != nil {
			t.Fatal(err)
		}
		codes = append(codes, code)
	}
	for _, code := range codes {
		for _, data := range []source.Model{source.Random(), source.Biased(0.7), source.Markov(0.1, 0.4), source.Biased(0), source.Biased(1)} {
			for _, train := range []pulse.Train{{SymbolRate: 2e6, Level: 3}, {Shape: pulse.Rect(0.5)}} {
				p, err := spectrum.Exact(code.Fed(data), train)
				if err != nil {
					t.Errorf("%s: %v", code.Name(), err)
					continue
				}
				closure(t, p)
			}
		}
	}
}

// Pulses that reach into their neighbours, and pulses that differ from level to level: the whole spectrum against a sum
// over the pairs of levels with their own transforms.
func TestPulsesAgainstTimeRecursion(t *testing.T) {
	long := pulse.Exponential(1, 0.2, 0.4)
	trains := []struct {
		name   string
		train  pulse.Train
		shapes func(prev, a float64) pulse.Shape
	}{
		{"long", pulse.Train{Shape: long}, func(_, a float64) pulse.Shape { return pulse.Scaled(long, a) }},
		{"by level", pulse.Train{Shape: pulse.Rect(0.5), Shapes: map[float64]pulse.Shape{-1: pulse.HalfSine(0.7), 3: pulse.Delayed(long, -0.3)}},
			func(_, a float64) pulse.Shape {
				switch a {
				case -1:
					return pulse.Scaled(pulse.HalfSine(0.7), a)
				case 3:
					return pulse.Scaled(pulse.Delayed(long, -0.3), a)
				}
				return pulse.Scaled(pulse.Rect(0.5), a)
			}},
		{"transition", pulse.Train{Transition: settle}, settle},
	}
	rapid.Check(t, func(t *rapid.T) {
		ch := drawChain(t)
		c := unroll(ch).remember()
		const lags, far = 1000, 2520
		if lingers(c.correlation(c.level, c.level, lags, far)) {
			t.Skip("the time recursion is too short for this chain")
		}
		for _, test := range trains {
			train := test.train
			if train.Shapes != nil { // those of the levels that the chain has
				train.Shapes = map[float64]pulse.Shape{}
				for _, a := range c.level {
					if s, ok := test.train.Shapes[a]; ok {
						train.Shapes[a] = s
					}
				}
			}
			p, err := spectrum.OfChain(ch, train)
			if err != nil {
				t.Fatal(err)
			}
			kinds := map[[2]float64][]float64{}
			var order [][2]float64
			for i := range c.p {
				k := [2]float64{c.prev[i], c.level[i]}
				if kinds[k] == nil {
					kinds[k] = make([]float64, len(c.p))
					order = append(order, k)
				}
				kinds[k][i] = 1
			}
			nu := rapid.SampledFrom([]float64{0, 0.11, 0.5, 1.7}).Draw(t, "nu")
			want := 0.0
			for _, a := range order {
				for _, b := range order {
					r := c.correlation(kinds[a], kinds[b], lags, far)
					g := cmplx.Conj(test.shapes(a[0], a[1]).Transform(nu)) * test.shapes(b[0], b[1]).Transform(nu)
					sum := complex(r[0], 0)
					for l := 1; l < lags; l++ {
						sum += 2 * complex(r[l], 0) * cmplx.Exp(complex(0, -2*math.Pi*nu*float64(l)))
					}
					want += real(g * sum) // the pair (b, a) supplies the other half of the negative lags
				}
			}
			if got := p.At(nu) / 2; math.Abs(got-want) > 1e-9*(1+want) {
				t.Errorf("%s at %v: %v, time recursion %v", test.name, nu, got, want)
			}
		}
	})
}

// settle is a driver that falls faster than it rises.
func settle(prev, next float64) pulse.Shape {
	if next < prev {
		return pulse.Settle(prev, next, 0.05)
	}
	return pulse.Settle(prev, next, 0.2)
}

type remembering struct {
	clock
	prev []float64
}

// remember joins the level before to the state.
func (c *clock) remember() *remembering {
	type pair struct {
		state int
		level float64
	}
	number := map[pair]int{}
	var queue []pair
	visit := func(p pair) int {
		if n, ok := number[p]; ok {
			return n
		}
		number[p] = len(queue)
		queue = append(queue, p)
		return len(queue) - 1
	}
	// The recurrent pairs alone: start from one after a long walk.
	random := rand.New(rand.NewPCG(1, 2))
	at := pair{c.from[0], 0}
	for range 10000 {
		x := random.Float64()
		for i := range c.p {
			if c.from[i] != at.state {
				continue
			}
			if x -= c.p[i]; x < 0 {
				at = pair{c.to[i], c.level[i]}
				break
			}
		}
	}
	visit(at)
	r := &remembering{}
	for n := 0; n < len(queue); n++ {
		for i := range c.p {
			if c.from[i] == queue[n].state {
				r.from, r.to = append(r.from, n), append(r.to, visit(pair{c.to[i], c.level[i]}))
				r.p, r.level, r.prev = append(r.p, c.p[i]), append(r.level, c.level[i]), append(r.prev, queue[n].level)
			}
		}
	}
	r.n = len(queue)
	return r
}

// direct is the symbols' density by the definition: with m the centred mean that a state emits, u the centred symbols
// that enter it and K = P - 1 pi,
//
//	R(0) + 2 Re[z u' (I - z K)^-1 m],
//
// the linear system solved as a real one of twice the size. For aperiodic chains.
func (c *clock) direct(nu float64) float64 {
	pi := c.stationary()
	mean := 0.0
	for i := range c.p {
		mean += pi[c.from[i]] * c.p[i] * c.level[i]
	}
	n := c.n
	m, u := make([]float64, n), make([]float64, n)
	k := mat.NewDense(n, n, nil)
	for s := range n {
		for t := range n {
			k.Set(s, t, -pi[t])
		}
	}
	r := 0.0
	for i := range c.p {
		a := c.level[i] - mean
		mass := pi[c.from[i]] * c.p[i]
		r += mass * a * a
		m[c.from[i]] += c.p[i] * a
		u[c.to[i]] += mass * a
		k.Set(c.from[i], c.to[i], k.At(c.from[i], c.to[i])+c.p[i])
	}
	cos, sin := math.Cos(2*math.Pi*nu), math.Sin(2*math.Pi*nu) // z = cos - j sin
	a := mat.NewDense(2*n, 2*n, nil)
	b := mat.NewVecDense(2*n, nil)
	for s := range n {
		b.SetVec(s, m[s])
		for t := range n {
			re, im := -cos*k.At(s, t), sin*k.At(s, t)
			if s == t {
				re++
			}
			a.Set(s, t, re)
			a.Set(n+s, n+t, re)
			a.Set(s, n+t, -im)
			a.Set(n+s, t, im)
		}
	}
	var x mat.VecDense
	if err := x.SolveVec(a, b); err != nil {
		panic(err)
	}
	re, im := 0.0, 0.0
	for s := range n {
		re += u[s] * x.AtVec(s)
		im += u[s] * x.AtVec(n+s)
	}
	return r + 2*(cos*re+sin*im)
}

// Slow machines of full rank, whose sums end in a resolvent.
func TestAgainstDirectSolution(t *testing.T) {
	for _, ch := range []*linecode.Chain{lingering(100), wandering(100), shiftRegister()} {
		if ch.Name == "shift register" && testing.Short() {
			continue
		}
		p := must(spectrum.OfChain(ch, pulse.Train{}))
		c := unroll(ch)
		peak := 0.0
		for _, nu := range []float64{1e-5, 1e-3, 0.05, 0.17, 0.5, 0.9} {
			want := c.direct(nu) * sinc2(nu)
			peak = max(peak, want)
			if got := p.At(nu) / 2; math.Abs(got-want) > 1e-9*want+1e-11*peak {
				t.Errorf("%s at %v: %v, want %v", ch.Name, nu, got, want)
			}
		}
	}
}
