package spectrum

import (
	"context"

	"linewright/builtins/internal/markov"
)

// A chainLaw is what the processes on one irreducible machine have in common.
type chainLaw struct {
	machine *machine
	length  int // symbols a step
	graph   *markov.Graph
	period  int   // of the chain, in steps
	cyc     []int // cyclic class of each state
	pi      []float64
}

// A process is a real vector that each edge of a machine emits at each of its positions, less its mean there: the mean
// depends on the position and on the cyclic class of the state, and its sequence over period times length symbols is
// what repeats.
type process struct {
	*chainLaw
	width int       // components of the vector
	out   []float64 // out[(e*length + k)*width + j]: component j at position k of edge e
	mean  []float64 // mean[(c*length + k)*width + j]
}

func newLaw(ctx context.Context, m *machine, length int) (*chainLaw, error) {
	l := &chainLaw{machine: m, length: length, graph: m.graph()}
	l.period, l.cyc = l.graph.Period()
	var err error
	l.pi, err = stationary(ctx, l.graph, l.period, l.cyc)
	return l, err
}

// process takes the mean of each cyclic class off out, in place.
func (l *chainLaw) process(width int, out []float64) *process {
	p := &process{chainLaw: l, width: width, out: out}
	row := l.length * width
	p.mean = make([]float64, l.period*row)
	weight := make([]float64, l.period)
	for i, e := range l.machine.edges {
		w := l.pi[e.from] * e.p
		c := l.cyc[e.from]
		weight[c] += w
		mean := p.mean[c*row : (c+1)*row]
		for n, v := range out[i*row : (i+1)*row] {
			mean[n] += w * v
		}
	}
	for c, w := range weight {
		for n := c * row; n < (c+1)*row; n++ {
			p.mean[n] /= w
		}
	}
	for i, e := range l.machine.edges {
		c := l.cyc[e.from]
		mean := p.mean[c*row : (c+1)*row]
		for n := range mean {
			out[i*row+n] -= mean[n]
		}
	}
	return p
}

// symbols is the process of the basis coefficients of the symbols' waveforms: coef[w] are those of waveform w.
func (l *chainLaw) symbols(width int, coef [][]float64) *process {
	edges := l.machine.edges
	out := make([]float64, len(edges)*l.length*width)
	n := 0
	for i := range edges {
		for _, w := range edges[i].word {
			n += copy(out[n:n+width], coef[w])
		}
	}
	return l.process(width, out)
}

// variance is the sum over the components of the mean square, a symbol.
func (p *process) variance() float64 {
	row := p.length * p.width
	sum := 0.0
	for i, e := range p.machine.edges {
		square := 0.0
		for _, v := range p.out[i*row : (i+1)*row] {
			square += v * v
		}
		sum += p.pi[e.from] * e.p * square
	}
	return sum / float64(p.length)
}

// zero tells whether the process is its mean and rounding: scale is the mean square that rounding is measured by.
func (p *process) zero(scale float64) bool { return p.variance() <= 1e-26*scale }
