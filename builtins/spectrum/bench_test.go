package spectrum_test

import (
	"testing"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/spectrum"
)

// grid is 1001 frequencies from 0 to twice the symbol rate.
func grid() []float64 {
	f := make([]float64, 1001)
	for i := range f {
		f[i] = 2 * float64(i) / float64(len(f)-1)
	}
	return f
}

// Everything after the code's tables: the chain's analysis and the density at 1001 frequencies.
func BenchmarkFirst1001(b *testing.B) {
	f := grid()
	for _, code := range []*linecode.Code{linecode.HDB3(), linecode.Code8b10b(), linecode.AMI(), linecode.DelayModulation()} {
		b.Run(code.Name(), func(b *testing.B) {
			chain := code.Chain()
			dst := make([]float64, len(f))
			for b.Loop() {
				p, err := spectrum.OfChain(chain, pulse.Train{})
				if err != nil {
					b.Fatal(err)
				}
				p.Density(dst, f)
			}
		})
	}
}

// A further train of the same code: what is known of its symbols is kept.
func BenchmarkNext1001(b *testing.B) {
	f := grid()
	for _, code := range []*linecode.Code{linecode.HDB3(), linecode.Code8b10b()} {
		b.Run(code.Name(), func(b *testing.B) {
			dst := make([]float64, len(f))
			for b.Loop() {
				p, err := spectrum.Exact(code, pulse.Train{})
				if err != nil {
					b.Fatal(err)
				}
				p.Density(dst, f)
			}
		})
	}
}

// scatter gives a level between -3 and 3 without order.
func scatter(n int) []float64 { return []float64{float64((n*n*7+n*3)%7) - 3} }

// shiftRegister is a code of 512 states whose symbols depend on the last ten bits.
func shiftRegister() *linecode.Chain {
	const n = 512
	ch := &linecode.Chain{Name: "shift register", States: n}
	for s := range n {
		for bit := range 2 {
			ch.Edges = append(ch.Edges, linecode.Edge{From: s, To: (s<<1 | bit) & (n - 1), P: 0.5, Levels: scatter(s<<1 | bit)})
		}
	}
	return ch
}

// lingering is a machine of n states that changes its place once in 2000 symbols, to any of the others: its memory
// has full rank.
func lingering(n int) *linecode.Chain {
	ch := &linecode.Chain{Name: "lingering", States: n}
	for s := range n {
		stay := 0.9995 + 0.0004*float64(s)/float64(n)
		ch.Edges = append(ch.Edges,
			linecode.Edge{From: s, To: s, P: stay, Levels: scatter(s)},
			linecode.Edge{From: s, To: (s + 1) % n, P: (1 - stay) / 2, Levels: scatter(2 * s)},
			linecode.Edge{From: s, To: s * 181 % n, P: (1 - stay) / 2, Levels: scatter(3 * s)})
	}
	return ch
}

// wandering is a walk of n places between two walls.
func wandering(n int) *linecode.Chain {
	ch := &linecode.Chain{Name: "wandering", States: n}
	for s := range n {
		ch.Edges = append(ch.Edges,
			linecode.Edge{From: s, To: min(s+1, n-1), P: 0.5, Levels: scatter(s)},
			linecode.Edge{From: s, To: max(s-1, 0), P: 0.5, Levels: scatter(5 * s)})
	}
	return ch
}

func Benchmark512States(b *testing.B) {
	f := grid()
	for _, ch := range []*linecode.Chain{shiftRegister(), lingering(512), wandering(512)} {
		b.Run(ch.Name, func(b *testing.B) {
			dst := make([]float64, len(f))
			for b.Loop() {
				p, err := spectrum.OfChain(ch, pulse.Train{})
				if err != nil {
					b.Fatal(err)
				}
				p.Density(dst, f)
			}
		})
	}
}

func BenchmarkPower(b *testing.B) {
	for b.Loop() {
		p := must(spectrum.Exact(linecode.HDB3(), pulse.Train{}))
		p.Power(0, 2)
		p.Within(0.99)
	}
}
