package spectrum_test

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/cmplx"
	"runtime"
	"strings"
	"testing"
	"time"

	"linewright/builtins/linecode"
	"linewright/builtins/page"
	"linewright/builtins/pulse"
	"linewright/builtins/source"
	"linewright/builtins/spectrum"
)

// Periodic data: tones only, as the direct Fourier series of one period of the waveform has them.
func TestPeriodicData(t *testing.T) {
	prbs := source.PRBS(7).Bits(127)
	tests := []struct {
		code    *linecode.Code
		bits    []byte
		symbols int // of the period that results
	}{
		{linecode.PolarNRZ(), prbs, 127},
		{linecode.HDB3(), prbs, 127},
		{linecode.Code8b10b(), prbs, 1270},
		{linecode.NRZM(), []byte{1, 0, 0, 0, 0, 0, 0}, 14}, // one toggle a pattern: twice the pattern
		{linecode.AMI(), []byte{1}, 2},
		{linecode.HDLC(), []byte{1, 1, 1, 1, 1, 1, 0}, 16}, // one bit stuffed and 2 zeros toggled in each pattern of 7
		{linecode.PolarNRZ(), []byte{1}, 1},
	}
	shape := pulse.Exponential(0.5, 0.1, 0.3)
	for _, test := range tests {
		code := test.code.Fed(source.Repeating(test.bits))
		p := must(spectrum.Exact(code, pulse.Train{Shape: shape}))
		if got := p.At(0.37); got != 0 {
			t.Errorf("%s: density %v, want none", p.Name(), got)
		}
		// Long enough to leave the start behind and to hold several periods.
		bits := make([]byte, 0, 8*1270+200)
		for len(bits) < cap(bits)-len(test.bits)-8 {
			bits = append(bits, test.bits...)
		}
		bits = bits[:len(bits)-len(bits)%code.Bits()]
		levels, err := test.code.Encode(bits)
		if err != nil {
			t.Fatal(err)
		}
		at := 100 * 10
		cycle := levels[at : at+test.symbols]
		for n, a := range levels[at+test.symbols : at+2*test.symbols] {
			if a != cycle[n] {
				t.Fatalf("%s: the symbols do not repeat after %d", p.Name(), test.symbols)
			}
		}
		var want []spectrum.Line
		for k := 0; k <= 2*test.symbols; k++ {
			var sum complex128
			for n, a := range cycle {
				sum += complex(a/float64(len(cycle)), 0) * cmplx.Exp(complex(0, -2*math.Pi*float64(n*k%len(cycle))/float64(len(cycle))))
			}
			nu := float64(k) / float64(test.symbols)
			power := math.Pow(cmplx.Abs(sum*shape.Transform(nu)), 2)
			if k > 0 {
				power *= 2
			}
			if power > 1e-14*p.Total() {
				want = append(want, spectrum.Line{Freq: nu, Power: power})
			}
		}
		lines := p.Lines(2)
		if len(lines) != len(want) {
			t.Errorf("%s: %d lines, want %d", p.Name(), len(lines), len(want))
			continue
		}
		for i, l := range lines {
			if l.Freq != want[i].Freq || math.Abs(l.Power-want[i].Power) > 1e-9*want[i].Power+1e-15 {
				t.Errorf("%s: line %v, want %v", p.Name(), l, want[i])
			}
		}
		closure(t, p)
	}
}

// The direct way of data that repeat and the chain of code and data give one spectrum, whatever the driver.
func TestPeriodicDataByChain(t *testing.T) {
	for _, code := range []*linecode.Code{linecode.HDB3(), linecode.Code8b10b(), linecode.HDLC(), linecode.NRZM(), linecode.UnipolarNRZ()} {
		code = code.Fed(source.Repeating(source.PRBS(7).Bits(127)))
		for i, train := range []pulse.Train{
			{Shape: pulse.Exponential(1, 0.2, 1.5), SymbolRate: 3e5},
			{Shapes: map[float64]pulse.Shape{1: pulse.Rect(0.4)}},
			{Transition: func(prev, next float64) pulse.Shape {
				return pulse.Sum(pulse.Scaled(pulse.Rect(1), next), pulse.Scaled(pulse.Rect(0.1), prev-next))
			}},
		} {
			got, want := must(spectrum.Exact(code, train)), must(spectrum.OfChain(code.Chain(), train))
			if got.Name() != want.Name() || math.Abs(got.Total()/want.Total()-1) > 1e-13 {
				t.Errorf("%s, train %d: mean square %v, want that of %s, %v", got.Name(), i, got.Total(), want.Name(), want.Total())
			}
			upto := 2 * want.SymbolRate()
			g, w := got.Lines(upto), want.Lines(upto)
			if len(g) != len(w) {
				t.Errorf("%s, train %d: %d tones, want %d", got.Name(), i, len(g), len(w))
				continue
			}
			for k := range w {
				if g[k].Freq != w[k].Freq || math.Abs(g[k].Power-w[k].Power) > 1e-12*want.Total() {
					t.Errorf("%s, train %d: tone %v, want %v", got.Name(), i, g[k], w[k])
				}
			}
		}
	}
}

// Long patterns: memory for the transform of the symbols and not for a chain, and none at all where there are too many.
func TestMemoryOfLongPatterns(t *testing.T) {
	allocated := func(do func()) uint64 {
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		do()
		runtime.ReadMemStats(&after)
		return after.TotalAlloc - before.TotalAlloc
	}
	const n = 1<<20 - 1
	code := linecode.HDB3().Fed(source.Repeating(source.PRBS(20).Bits(n)))
	if got := allocated(func() { must(spectrum.Exact(code, pulse.Train{})) }) / n; got > 100 {
		t.Errorf("%d bytes a symbol, want no more than 100", got)
	}
	longer := linecode.Code8b10b().Fed(source.Repeating(source.PRBS(23).Bits(1<<23 - 1)))
	var err error
	if got := allocated(func() { _, err = spectrum.Exact(longer, pulse.Train{}) }); got > 1<<20 {
		t.Errorf("%d bytes before a refusal, want less than a megabyte", got)
	}
	const want = "spectrum: linecode: the symbols of 8b/10b, repeating 8388607 bits repeat after 83886070 only; the limit is 12000000; take a shorter pattern"
	if err == nil || err.Error() != want {
		t.Errorf("got  %v\nwant %s", err, want)
	}
}

// A long pattern whose length has a large prime factor (2^17 - 1 is prime), through the public contract: a
// pseudo-random sequence has equal tones but for the one at 0 (S. W. Golomb, Shift Register Sequences, from memory).
func TestLongPattern(t *testing.T) {
	const n = 1<<17 - 1
	bits := make([]byte, n)
	state := uint32(1)
	for i := range bits { // x^17 + x^3 + 1 is primitive
		bits[i] = byte(state & 1)
		state = state>>1 | (state^state>>3)&1<<16
	}
	p := must(spectrum.Exact(linecode.PolarNRZ().Fed(source.Repeating(bits)), pulse.Train{}))
	lines := p.Lines(0.001)
	if len(lines) < 100 {
		t.Fatalf("%d lines below a thousandth of the symbol rate, want %d", len(lines), n/1000)
	}
	if want := 1 / (float64(n) * n); math.Abs(lines[0].Power/want-1) > 1e-6 {
		t.Errorf("tone at 0 of %v, want 1/n^2 = %v", lines[0].Power, want)
	}
	for k, l := range lines[1:] {
		want := 2 * (n + 1) / (float64(n) * n) * sinc2(l.Freq)
		if l.Freq != float64(k+1)/n || math.Abs(l.Power/want-1) > 1e-9 {
			t.Fatalf("tone %d: %v, want %v", k+1, l, want)
		}
	}
}

// A start state that chooses, once and for ever, between AMI with probability 1/4 and unipolar marks.
func TestClasses(t *testing.T) {
	mark := func(a float64) []float64 { return []float64{a} }
	ch := &linecode.Chain{Name: "choice", States: 5, Edges: []linecode.Edge{
		{From: 0, To: 1, P: 0.1, Levels: mark(5)}, {From: 0, To: 0, P: 0.6, Levels: mark(7)}, {From: 0, To: 4, P: 0.3, Levels: mark(-5)},
		{From: 1, To: 1, P: 0.5, Levels: mark(0)}, {From: 1, To: 2, P: 0.5, Levels: mark(1)},
		{From: 2, To: 2, P: 0.5, Levels: mark(0)}, {From: 2, To: 1, P: 0.5, Levels: mark(-1)},
		{From: 4, To: 3, P: 1, Levels: mark(9)},
		{From: 3, To: 3, P: 0.5, Levels: mark(0)}, {From: 3, To: 3, P: 0.5, Levels: mark(1)},
	}}
	p := must(spectrum.OfChain(ch, pulse.Train{}))
	classes := p.Classes()
	if len(classes) != 2 || math.Abs(classes[0].Probability-0.25) > 1e-15 || math.Abs(classes[1].Probability-0.75) > 1e-15 {
		t.Fatalf("classes %v, want two with 1/4 and 3/4", classes)
	}
	ami := must(spectrum.Exact(linecode.AMI(), pulse.Train{}))
	unipolar := must(spectrum.Exact(linecode.UnipolarNRZ(), pulse.Train{}))
	for _, nu := range []float64{0, 0.2, 0.5, 1.3} {
		a, u := ami.At(nu), unipolar.At(nu)
		if got := classes[0].Spectrum.At(nu); math.Abs(got-a) > 1e-15 {
			t.Errorf("first class at %v: %v, want AMI's %v", nu, got, a)
		}
		if got := p.At(nu); math.Abs(got-a/4-3*u/4) > 1e-15 {
			t.Errorf("average at %v: %v, want %v", nu, got, a/4+3*u/4)
		}
	}
	if lines := p.Lines(3); len(lines) != 1 || math.Abs(lines[0].Power-0.75/4) > 1e-15 {
		t.Errorf("tones %v, want 3/16 at 0", lines)
	}
	if math.Abs(p.Total()-(0.25*0.5+0.75*0.5)) > 1e-15 {
		t.Errorf("mean square %v, want 1/2", p.Total())
	}
	if s := p.String(); !strings.Contains(s, "average over 2 classes") || !strings.Contains(s, "0.25") {
		t.Errorf("summary %q does not say that it is an average", s)
	}
	if ami.Classes() != nil {
		t.Error("AMI has classes, want nil for one class")
	}
	closure(t, p)
}

// Silent edges (words that send nothing) and words of unequal length, against the same stream of symbols as a chain of
// one symbol an edge.
func TestVariableLength(t *testing.T) {
	// A bit 0 is stored and sent with the next one: after a stored 0 a bit sends two symbols, otherwise a 1 sends one.
	silent := &linecode.Chain{Name: "silent", States: 2, Edges: []linecode.Edge{
		{From: 0, To: 1, P: 0.5}, {From: 0, To: 0, P: 0.5, Levels: []float64{1}},
		{From: 1, To: 0, P: 0.5, Levels: []float64{0, -1}}, {From: 1, To: 0, P: 0.5, Levels: []float64{0, 1}},
	}}
	plain := &linecode.Chain{Name: "plain", States: 2, Edges: []linecode.Edge{
		{From: 0, To: 0, P: 0.5, Levels: []float64{1}}, {From: 0, To: 1, P: 0.5, Levels: []float64{0}},
		{From: 1, To: 0, P: 0.5, Levels: []float64{-1}}, {From: 1, To: 0, P: 0.5, Levels: []float64{1}},
	}}
	// A loop of silent edges, left with probability 1/2 each time.
	loop := &linecode.Chain{Name: "loop", States: 3, Edges: []linecode.Edge{
		{From: 0, To: 1, P: 0.5}, {From: 1, To: 2, P: 1}, {From: 2, To: 0, P: 1},
		{From: 0, To: 0, P: 0.25, Levels: []float64{1}}, {From: 0, To: 0, P: 0.25, Levels: []float64{-1}},
	}}
	nrz := must(spectrum.Exact(linecode.PolarNRZ(), pulse.Train{}))
	a, b, c := must(spectrum.OfChain(silent, pulse.Train{})), must(spectrum.OfChain(plain, pulse.Train{})), must(spectrum.OfChain(loop, pulse.Train{}))
	for _, nu := range frequencies {
		if got, want := a.At(nu), b.At(nu); math.Abs(got-want) > 1e-13 {
			t.Errorf("with silent edges at %v: %v, without %v", nu, got, want)
		}
		if got, want := c.At(nu), nrz.At(nu); math.Abs(got-want) > 1e-13 {
			t.Errorf("with a silent loop at %v: %v, without %v", nu, got, want)
		}
	}
}

// One pulse in other clothes: several basis shapes that are the same function, and a Transition that only scales, must
// give what the plain train gives, near 0 Hz to all digits.
func TestSamePulseOtherwise(t *testing.T) {
	halves := pulse.Sum(pulse.Rect(0.5), pulse.Delayed(pulse.Rect(0.5), 0.5))
	trains := map[string]pulse.Train{
		"two halves": {Shapes: map[float64]pulse.Shape{-1: halves}},
		"transition": {Transition: func(_, next float64) pulse.Shape { return pulse.Scaled(pulse.Rect(1), next) }},
		"transitions": {Transition: func(prev, next float64) pulse.Shape {
			if prev > next {
				return pulse.Scaled(halves, next)
			}
			return pulse.Scaled(pulse.Rect(1), next)
		}},
	}
	second := scripted(t, 1, func(s int, word uint) (int, []float64) { // its null is of order 2
		return s<<1&3 | int(word), []float64{float64(word) - 2*float64(s&1) + float64(s>>1)}
	})
	for _, code := range []*linecode.Code{linecode.AMI().Fed(source.Biased(0.3)), linecode.HDB3(), linecode.Code8b10b(), linecode.CMI(), linecode.MLT3(), second} {
		want := must(spectrum.Exact(code, pulse.Train{}))
		trains["two halves"] = pulse.Train{Shapes: map[float64]pulse.Shape{code.Levels()[0]: halves}}
		for name, train := range trains {
			got := must(spectrum.Exact(code, train))
			for _, nu := range append(frequencies, 1e-9, 1e-7, 1e-5, 1e-3, 0.02, 0.05) {
				if g, w := got.At(nu), want.At(nu); math.Abs(g-w) > 1e-9*w+1e-14 {
					t.Errorf("%s, %s at %v: %v, want %v", code.Name(), name, nu, g, w)
				}
			}
			for _, nu := range []float64{1e-7, 1e-5, 1e-3} {
				if g, w := got.At(nu), want.At(nu); math.Abs(g/w-1) > 1e-9 {
					t.Errorf("%s, %s at %v: %v, want %v to 1e-9 of itself", code.Name(), name, nu, g, w)
				}
			}
			if math.Abs(got.Total()-want.Total()) > 1e-13 {
				t.Errorf("%s, %s: mean square %v, want %v", code.Name(), name, got.Total(), want.Total())
			}
		}
	}
}

// AMI whose pulses differ in form but not in area keeps its null. With G+ and G- the transforms of the pulses of the
// positive and negative marks at p = 1/2, marks alternate: the means of products follow from
//
//	sum over l > 0 of P(next mark of the same sign after l) z^l = q^2/(1-q^2), of the other sign q/(1-q^2),
//
// with q = (z/2)/(1 - z/2) the transform of the gap between marks. Written for G+ + d/2 and G- - d/2 around their mean it
// is what alternates plus a part in d that does not, and both vanish as nu^2: here to be evaluated without cancellation.
func TestNullOfUnequalPulses(t *testing.T) {
	plus, minus := pulse.Rect(1), pulse.Scaled(pulse.Rect(0.5), 2)
	p := must(spectrum.Exact(linecode.AMI(), pulse.Train{Shapes: map[float64]pulse.Shape{1: plus, -1: minus}}))
	for _, nu := range []float64{1e-8, 1e-6, 1e-4, 1e-2, 0.3, 1.4} {
		w := 2 * math.Pi * nu
		z := cmplx.Exp(complex(0, -w))
		// 1 - z = 2j sin(w/2) exp(-j w/2) exactly.
		gap := complex(0, 2*math.Sin(w/2)) * cmplx.Exp(complex(0, -w/2))
		q := z / (2 - z)
		oneMinus := 2 * gap / (2 - z) // 1 - q
		// The alternating part: signs (-1)^n on marks of density 1/2 and pulse (G+ + G-)/2.
		alternating := 0.5 * real(oneMinus/(1+q)) // 1 + 2 Re sum (-q)^n
		// The common part: marks of density 1/2 at random, pulse (G+ - G-)/2, whose area is 0.
		common := 0.25 // p (1-p)
		// Cross terms between signs and marks: odd and even moments of a symmetric stream are uncorrelated.
		mean := (plus.Transform(nu) + minus.Transform(nu)) / 2
		half := difference(nu)
		want := alternating*math.Pow(cmplx.Abs(mean), 2) + common*math.Pow(cmplx.Abs(half), 2)
		if got := p.At(nu) / 2; math.Abs(got/want-1) > 1e-9 {
			t.Errorf("at %v: %v, want %v", nu, got, want)
		}
	}
}

// difference is (G+ - G-)/2 of the test above: with u = exp(-j pi nu), Rect(1) has G(1+u) and 2 Rect(1/2) has 2 G where
// G is the transform of Rect(1/2), so half the difference is -G (1-u)/2.
func difference(nu float64) complex128 {
	one := complex(0, 2*math.Sin(math.Pi*nu/2)) * cmplx.Exp(complex(0, -math.Pi*nu/2)) // 1 - u
	return -pulse.Rect(0.5).Transform(nu) * one / 2
}

// Long memories: the routes that end in a resolvent and in a ratio against a plain sum of a very long autocovariance.
func TestLongMemory(t *testing.T) {
	const n = 60
	walk := &linecode.Chain{Name: "walk", States: n} // between two walls: levels are the steps, sums stay bounded
	for s := range n {
		up, down := min(s+1, n-1), max(s-1, 0)
		walk.Edges = append(walk.Edges,
			linecode.Edge{From: s, To: up, P: 0.5, Levels: []float64{float64(up - s)}},
			linecode.Edge{From: s, To: down, P: 0.5, Levels: []float64{float64(down - s)}})
	}
	drift := &linecode.Chain{Name: "drift", States: n} // levels are the places themselves
	for _, e := range walk.Edges {
		e.Levels = []float64{float64(e.From)}
		drift.Edges = append(drift.Edges, e)
	}
	for _, ch := range []*linecode.Chain{walk, drift} {
		r := centred(unroll(ch), 60000)
		for name, train := range map[string]pulse.Train{
			"one pulse":  {},
			"two pulses": {Shapes: map[float64]pulse.Shape{1: pulse.Sum(pulse.Rect(0.5), pulse.Delayed(pulse.Rect(0.5), 0.5))}},
		} {
			p := must(spectrum.OfChain(ch, train))
			for _, nu := range []float64{1e-4, 1e-3, 0.01, 0.1, 0.25, 0.5, 0.77} {
				want := r[0]
				for l := 1; l < len(r); l++ {
					want += 2 * r[l] * math.Cos(2*math.Pi*nu*float64(l))
				}
				want *= sinc2(nu)
				if got := p.At(nu) / 2; math.Abs(got-want) > 1e-9*want+1e-11*r[0] {
					t.Errorf("%s, %s at %v: %v, want %v", ch.Name, name, nu, got, want)
				}
			}
			closure(t, p)
		}
	}
}

// centred is the autocovariance of an aperiodic chain, its mean taken off first.
func centred(c *clock, lags int) []float64 {
	mean := 0.0
	pi := c.stationary()
	for i := range c.p {
		mean += pi[c.from[i]] * c.p[i] * c.level[i]
	}
	for i := range c.level {
		c.level[i] -= mean
	}
	return c.correlation(c.level, c.level, lags, 0)
}

func TestRefusals(t *testing.T) {
	p := must(spectrum.Exact(linecode.AMI(), pulse.Train{}))
	nan, inf := math.NaN(), math.Inf(1)
	panics := []struct {
		do   func()
		want string
	}{
		{func() { p.At(-1) }, "density at -1 Hz"},
		{func() { p.At(nan) }, "density at NaN Hz"},
		{func() { p.Density(make([]float64, 1), []float64{1, 2}) }, "2 frequencies into 1 values"},
		{func() { p.Lines(inf) }, "Lines(+Inf)"},
		{func() { p.Lines(-1) }, "Lines(-1)"},
		{func() { p.Power(2, 1) }, "Power(2, 1)"},
		{func() { p.Power(-1, 1) }, "Power(-1, 1)"},
		{func() { p.Power(0, nan) }, "Power(0, NaN)"},
		{func() { p.Within(1) }, "Within(1)"},
		{func() { p.Within(0) }, "Within(0)"},
	}
	for _, test := range panics {
		if got := failure(test.do); !strings.HasPrefix(got, "spectrum: ") || !strings.Contains(got, test.want) {
			t.Errorf("message %q does not have %q", got, test.want)
		}
	}
	one := []float64{1}
	chains := []struct {
		chain linecode.Chain
		want  string
	}{
		{linecode.Chain{}, "0 states"},
		{linecode.Chain{States: 1, Edges: []linecode.Edge{{To: 1, P: 1, Levels: one}}}, "from state 0 to 1; states are 0 to 0"},
		{linecode.Chain{States: 1, Edges: []linecode.Edge{{P: 0.4, Levels: one}}}, "leave state 0 add up to 0.4"},
		{linecode.Chain{States: 1, Edges: []linecode.Edge{{P: -1, Levels: one}}}, "probability -1"},
		{linecode.Chain{States: 1, Edges: []linecode.Edge{{P: 1, Levels: []float64{nan}}}}, "level NaN"},
		{linecode.Chain{States: 1, Start: []float64{0.5}, Edges: []linecode.Edge{{P: 1, Levels: one}}}, "sum 0.5"},
		{linecode.Chain{States: 1, Edges: []linecode.Edge{{P: 1}}}, "no symbols for ever"},
		{linecode.Chain{States: 2, Edges: []linecode.Edge{{To: 0, P: 0.5}, {To: 1, P: 0.5}, {From: 1, P: 1}}}, "no symbols for ever"},
	}
	for _, test := range chains {
		_, err := spectrum.OfChain(&test.chain, pulse.Train{})
		if err == nil || !strings.HasPrefix(err.Error(), "spectrum: ") || !strings.Contains(err.Error(), test.want) {
			t.Errorf("error %v does not have %q", err, test.want)
		}
	}
	if _, err := spectrum.Exact(linecode.HDLC(), pulse.Train{BitRate: 64e3}); err == nil || !strings.Contains(err.Error(), "SymbolRate") {
		t.Errorf("BitRate of a code with stuffing: error %v does not name SymbolRate", err)
	}
	if _, err := p.DBm(1); err == nil || !strings.Contains(err.Error(), "Load") {
		t.Errorf("dBm without a load: error %v does not name Load", err)
	}
	loaded := must(spectrum.Exact(linecode.AMI(), pulse.Train{Load: 120}))
	for _, v2 := range []float64{-1, nan, inf, -inf} {
		for _, convert := range []func(float64) (float64, error){loaded.Watts, loaded.DBm} {
			if v, err := convert(v2); v != 0 || err == nil || !strings.HasPrefix(err.Error(), fmt.Sprintf("spectrum: %v V^2 is no power", v2)) {
				t.Errorf("of %v V^2: %v and error %v", v2, v, err)
			}
		}
	}
	if v, err := loaded.DBm(0); !math.IsInf(v, -1) || err != nil {
		t.Errorf("of 0 V^2: %v dBm, error %v, want -Inf", v, err)
	}
	if _, err := spectrum.Exact(linecode.AMI(), pulse.Train{Shape: pulse.HalfSine(1e6)}); err == nil || !strings.Contains(err.Error(), "too long") {
		t.Errorf("a pulse of a million symbols: error %v", err)
	}
	late := func(_, _ float64) pulse.Shape { return pulse.Delayed(pulse.Rect(1), 0.5) }
	if _, err := spectrum.Exact(linecode.AMI(), pulse.Train{Transition: late}); err == nil || !strings.Contains(err.Error(), "within its own symbol") {
		t.Errorf("a transition beyond its symbol: error %v", err)
	}
}

func failure(do func()) (message string) {
	defer func() {
		if err, ok := recover().(error); ok {
			message = err.Error()
		}
	}()
	do()
	return "no panic"
}

// Chains know their own rate where no data change it.
func TestChainRate(t *testing.T) {
	fixed := linecode.Code8b10b().Chain()
	p := must(spectrum.OfChain(fixed, pulse.Train{BitRate: 1e9}))
	if got := p.SymbolRate(); got != 1.25e9 {
		t.Errorf("8b/10b at 1 Gbit/s: %v symbols/s, want 1.25e9", got)
	}
	if _, err := spectrum.OfChain(linecode.BitStuffing(5).Chain(), pulse.Train{BitRate: 1e6}); err == nil {
		t.Error("bit stuffing took a bit rate")
	}
}

func TestNothing(t *testing.T) {
	p := must(spectrum.OfChain(&linecode.Chain{Name: "nothing", States: 1, Edges: []linecode.Edge{{P: 0.5, Levels: []float64{0}}, {P: 0.5, Levels: []float64{0}}}}, pulse.Train{}))
	if p.Total() != 0 || p.At(0.1) != 0 || p.Lines(2) != nil || p.Power(0, math.Inf(1)) != 0 || p.Within(0.9) != 0 {
		t.Errorf("a code of zeros has power: %v", p)
	}
}

// host gives the functions of page a context.
type host struct{ ctx context.Context }

func (host) Show(any, string)                 {}
func (host) Clear()                           {}
func (host) Ask(string, bool) (string, error) { return "", page.ErrNoReader }
func (host) Parameter(string) (string, bool)  { return "", false }
func (h host) Context() context.Context       { return h.ctx }

// An interrupt in the midst of long work is answered; the contract's 0.2 s with slack for a busy machine.
func TestInterrupt(t *testing.T) {
	defer page.Attach(host{context.Background()})
	stopped := errors.New("interrupted by the test")
	const n = 20000
	walk := &linecode.Chain{Name: "walk", States: n} // mixes slowly, and its levels have no order
	for s := range n {
		level := []float64{float64(s * s % 7)}
		walk.Edges = append(walk.Edges,
			linecode.Edge{From: s, To: min(s+1, n-1), P: 0.5, Levels: level},
			linecode.Edge{From: s, To: max(s-1, 0), P: 0.5, Levels: level})
	}
	ami := must(spectrum.Exact(linecode.AMI(), pulse.Train{}))
	many := make([]float64, 1<<24)
	long := linecode.HDB3().Fed(source.Repeating(source.PRBS(23).Bits(1<<23 - 1)))
	jobs := map[string]func() error{
		"exact":   func() error { _, err := spectrum.OfChain(walk, pulse.Train{}); return err },
		"repeat":  func() error { _, err := spectrum.Exact(long, pulse.Train{}); return err },
		"density": func() (err error) { defer recovered(&err); ami.Density(many, many); return nil },
		"lines":   func() (err error) { defer recovered(&err); ami.Lines(1e300); return nil },
		"power":   func() (err error) { defer recovered(&err); ami.Lines(1e11); ami.Power(0, 1e9); return nil },
	}
	for name, job := range jobs {
		ctx, cancel := context.WithCancelCause(context.Background())
		page.Attach(host{ctx})
		var cut time.Time
		timer := time.AfterFunc(50*time.Millisecond, func() { cut = time.Now(); cancel(stopped) })
		err := job()
		late := time.Since(cut)
		if timer.Stop() {
			t.Errorf("%s was done before the interrupt", name)
			continue
		}
		if !errors.Is(err, stopped) {
			t.Errorf("%s: error %v, want the cause of the interrupt", name, err)
		}
		if late > time.Second {
			t.Errorf("%s: answered an interrupt after %v", name, late)
		}
	}
}

func recovered(err *error) {
	if e, ok := recover().(error); ok {
		*err = e
	}
}

// What is kept with a code serves other trains: other pulses, also longer ones, other rates, another level.
func TestFurtherTrains(t *testing.T) {
	code := linecode.HDB3().Fed(source.Biased(0.4))
	trains := []pulse.Train{
		{}, {Shape: pulse.Rect(0.5), Level: 2}, {SymbolRate: 1e6}, {Shape: pulse.Exponential(1, 0.2, 1.5)}, {Shape: pulse.HalfSine(2)}, {},
	}
	for i, train := range trains {
		got := must(spectrum.Exact(code, train))
		want := must(spectrum.OfChain(code.Chain(), train)) // nothing kept
		rate := want.SymbolRate()
		for _, nu := range frequencies {
			if g, w := got.At(nu*rate), want.At(nu*rate); math.Abs(g-w) > 1e-12*w {
				t.Errorf("train %d at %v: %v, want %v", i, nu, g, w)
			}
		}
		if g, w := got.Total(), want.Total(); math.Abs(g/w-1) > 1e-13 {
			t.Errorf("train %d: mean square %v, want %v", i, g, w)
		}
		closure(t, got)
	}
}

// Classes that repeat with periods of 4 and 6 symbols: tones at one frequency, 1/2 and whole numbers, are one line, and
// their powers are averaged.
func TestClassesWithTones(t *testing.T) {
	ch := &linecode.Chain{Name: "two rings", States: 11, Edges: []linecode.Edge{
		{From: 0, To: 1, P: 0.5, Levels: []float64{0}}, {From: 0, To: 5, P: 0.5, Levels: []float64{0}},
	}}
	ring := func(first int, levels ...float64) {
		for i, a := range levels {
			ch.Edges = append(ch.Edges, linecode.Edge{From: first + i, To: first + (i+1)%len(levels), P: 1, Levels: []float64{a}})
		}
	}
	ring(1, 1, 0, 0, 0)
	ring(5, 1, 0, 0, 0, 0, 0)
	p := must(spectrum.OfChain(ch, pulse.Train{}))
	want := []spectrum.Line{ // one pulse in n symbols: 1/n^2 for each k/n, twice above 0, times sinc^2
		{Freq: 0, Power: (1./16 + 1./36) / 2},
		{Freq: 1. / 6, Power: 1. / 36 * sinc2(1./6)},
		{Freq: 1. / 4, Power: 1. / 16 * sinc2(1./4)},
		{Freq: 1. / 3, Power: 1. / 36 * sinc2(1./3)},
		{Freq: 1. / 2, Power: (1./16 + 1./36) * sinc2(1./2)},
		{Freq: 2. / 3, Power: 1. / 36 * sinc2(2./3)},
		{Freq: 3. / 4, Power: 1. / 16 * sinc2(3./4)},
		{Freq: 5. / 6, Power: 1. / 36 * sinc2(5./6)},
	}
	lines := p.Lines(1)
	if len(lines) != len(want) {
		t.Fatalf("lines %v, want %v", lines, want)
	}
	for i, l := range lines {
		if l.Freq != want[i].Freq || math.Abs(l.Power/want[i].Power-1) > 1e-12 {
			t.Errorf("line %v, want %v", l, want[i])
		}
	}
	closure(t, p)
}
