package spectrum

import (
	"testing"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
)

func BenchmarkRef(b *testing.B) {
	for _, c := range refs(b) {
		switch c.ID {
		case "hdb3_p50", "8b10b_p50", "mms43_p50":
		default:
			continue
		}
		ch := chainOf(c)
		f := make([]float64, 1001)
		for i := range f {
			f[i] = float64(i) * 0.002
		}
		tr := pulse.Train{}
		b.Run(c.ID+"/exact", func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				if _, err := OfChain(ch, tr); err != nil {
					b.Fatal(err)
				}
			}
		})
		p, _ := OfChain(ch, tr)
		dst := make([]float64, len(f))
		b.Run(c.ID+"/density", func(b *testing.B) {
			for b.Loop() {
				p.Density(dst, f)
			}
		})
	}
}

func (p *PSD) rank() int {
	if r := p.parts[0].form.rest; r != nil {
		return len(r.columns)
	}
	return 0
}

func shiftRegister(bits int, p float64, table func(int) float64) *linecode.Chain {
	n := 1 << bits
	ch := &linecode.Chain{Name: "sr", States: n}
	for s := range n {
		ch.Edges = append(ch.Edges,
			linecode.Edge{From: s, To: s << 1 & (n - 1), P: 1 - p, Levels: []float64{table(s << 1)}, Bits: 1},
			linecode.Edge{From: s, To: (s<<1 | 1) & (n - 1), P: p, Levels: []float64{table(s<<1 | 1)}, Bits: 1})
	}
	return ch
}

func BenchmarkBig(b *testing.B) {
	h := func(x int) float64 { return float64(int(mix(uint64(x))%7)) - 3 }
	f := make([]float64, 1001)
	for i := range f {
		f[i] = float64(i) * 0.002
	}
	slow := &linecode.Chain{Name: "slow", States: 512}
	for s := range 512 {
		// random targets that mostly stay put
		for k, p := range []float64{0.9995, 0.0003, 0.0002} {
			to := s
			if k > 0 {
				to = int(mix(uint64(3*s+k)) % 512)
			}
			slow.Edges = append(slow.Edges, linecode.Edge{From: s, To: to, P: p, Levels: []float64{h(s*7 + k)}})
		}
	}
	walk := &linecode.Chain{Name: "walk", States: 512}
	for s := range 512 {
		up, down := s+1, s-1
		if up == 512 {
			up = s
		}
		if down < 0 {
			down = 0
		}
		walk.Edges = append(walk.Edges, linecode.Edge{From: s, To: up, P: 0.5, Levels: []float64{float64(up - s)}}, linecode.Edge{From: s, To: down, P: 0.5, Levels: []float64{float64(down - s)}})
	}
	rnd := &linecode.Chain{Name: "rnd", States: 512}
	for s := range 512 {
		a, c := int(mix(uint64(s))%512), int(mix(uint64(s)+999999)%512)
		if s%2 == 0 {
			a = (s + 1) % 512
		}
		rnd.Edges = append(rnd.Edges, linecode.Edge{From: s, To: a, P: 0.5, Levels: []float64{h(s)}}, linecode.Edge{From: s, To: c, P: 0.5, Levels: []float64{h(s + 12345)}})
	}
	for _, ch := range []*linecode.Chain{shiftRegister(9, 0.5, h), shiftRegister(9, 0.6, h), slow, walk, rnd} {
		b.Run(ch.Name+"/all", func(b *testing.B) {
			for b.Loop() {
				p, err := OfChain(ch, pulse.Train{})
				if err != nil {
					b.Fatal(err)
				}
				p.Density(nil, f)
				b.ReportMetric(float64(len(p.parts[0].form.lags[0])), "lags")
				b.ReportMetric(float64(p.rank()), "rank")
			}
		})
	}
}
