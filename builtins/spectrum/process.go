package spectrum

import (
	"context"

	"gonum.org/v1/gonum/floats"

	"linewright/builtins/internal/markov"
)

// A chainLaw is what the processes on one irreducible machine have in common. Its edges are sorted by the state that
// they leave: those of state s are head[s] .. head[s+1]-1.
type chainLaw struct {
	machine *machine
	length  int // symbols a step
	graph   *markov.Graph
	period  int   // of the chain, in steps
	cyc     []int // cyclic class of each state
	pi      []float64
	head    []int32
	p       []float64 // probability of each edge given its state
	mass    []float64 // probability of each edge
}

func newLaw(ctx context.Context, m *machine, length int) (*chainLaw, error) {
	m.sort()
	l := &chainLaw{machine: m, length: length, graph: m.graph()}
	l.period, l.cyc = l.graph.Period()
	var err error
	if l.pi, err = stationary(ctx, l.graph, l.period, l.cyc); err != nil {
		return nil, err
	}
	l.head = make([]int32, m.states+1)
	l.p, l.mass = make([]float64, len(m.edges)), make([]float64, len(m.edges))
	for i := range m.edges {
		e := &m.edges[i]
		l.head[e.from+1]++
		l.p[i], l.mass[i] = e.p, l.pi[e.from]*e.p
	}
	for s := range m.states {
		l.head[s+1] += l.head[s]
	}
	return l, nil
}

// A process is a real vector that each edge of a machine emits at each of its positions, less its mean there: the mean
// depends on the position and on the cyclic class of the state, and its sequence over period times length symbols is
// what repeats.
type process struct {
	*chainLaw
	width int         // components of the vector
	out   [][]float64 // out[k*width+j][e]: component j at position k of edge e
	mean  [][]float64 // mean[k*width+j][c] in cyclic class c
	power float64     // the sum over the components of the mean square of out, a symbol
	size  float64     // no number in out is larger: what rounding is measured by
}

// process takes the mean of each cyclic class off out, in place. No number in out is larger than size.
func (l *chainLaw) process(width int, out [][]float64, size float64) *process {
	p := &process{chainLaw: l, width: width, out: out, mean: vectors(len(out), l.period), size: 2 * size}
	for n, v := range out {
		l.centre(v, p.mean[n])
	}
	work := make([]float64, len(l.mass))
	for _, v := range out {
		p.power += floats.Dot(floats.MulTo(work, l.mass, v), v) / float64(l.length)
	}
	return p
}

// centre takes the mean of each cyclic class off v.
func (l *chainLaw) centre(v, mean []float64) {
	if l.period == 1 {
		mean[0] = floats.Dot(l.mass, v)
		floats.AddConst(-mean[0], v)
		return
	}
	for s, c := range l.cyc {
		lo, hi := l.head[s], l.head[s+1]
		mean[c] += floats.Dot(l.mass[lo:hi], v[lo:hi])
	}
	for c := range mean {
		mean[c] *= float64(l.period) // each cyclic class has the probability 1/period
	}
	for s, c := range l.cyc {
		for i := l.head[s]; i < l.head[s+1]; i++ {
			v[i] -= mean[c]
		}
	}
}

// symbols is the process of the basis coefficients of the symbols' waveforms: coef[w] are those of waveform w.
func (l *chainLaw) symbols(width int, coef [][]float64) *process {
	edges := l.machine.edges
	out := vectors(l.length*width, len(edges))
	size := 0.0
	for j := range width {
		of := make([]float64, len(coef)) // of each waveform
		for w := range coef {
			of[w] = coef[w][j]
		}
		size = max(size, largest(of))
		for i := range edges {
			for k, w := range edges[i].word {
				out[k*width+j][i] = of[w]
			}
		}
	}
	return l.process(width, out, size)
}

// zero tells whether the process is its mean and rounding: scale is the mean square that rounding is measured by.
func (p *process) zero(scale float64) bool { return p.power <= 1e-26*scale }

// vectors makes n vectors of one size in one piece of memory.
func vectors(n, size int) [][]float64 {
	all := make([]float64, n*size)
	v := make([][]float64, n)
	for i := range v {
		v[i] = all[i*size : (i+1)*size : (i+1)*size]
	}
	return v
}
