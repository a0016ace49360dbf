package linecode

import (
	"fmt"

	"linewright/builtins/internal/markov"
	"linewright/builtins/page"
)

// FixedRate reports whether no data can change the code's rate: whether every cycle of its graph, whatever the data,
// has the same ratio of source bits to symbols. Fixed framing has, stuffing has not. The ratio is bits to symbols in
// lowest terms; both are 0 where the rate is not fixed.
func (c *Code) FixedRate() (bits, symbols int, fixed bool) {
	m := c.made().machine
	component, count := m.graph().Components()
	// In each component the ratio is fixed if the symbols that are ahead of the mean are a function of the state. A walk
	// through the component measures that against the ratio of one cycle, in units that keep all numbers whole.
	depth := make([]int, m.states)   // steps from the component's first state
	emitted := make([]int, m.states) // symbols on that way
	first := make([]int, count)
	for i := range first {
		first[i] = -1
	}
	var order []int // states, component by component, each after one that leads to it
	for s := range m.states {
		if first[component[s]] >= 0 {
			continue
		}
		first[component[s]] = s
		seen := len(order)
		order = append(order, s)
		depth[s] = 1
		for ; seen < len(order); seen++ {
			at := order[seen]
			for w := range m.words() {
				to, out := m.step(at, w)
				if component[to] == component[s] && depth[to] == 0 {
					depth[to], emitted[to] = depth[at]+1, emitted[at]+len(out)
					order = append(order, to)
				}
			}
		}
	}
	// An edge that the walk did not take closes a cycle: a difference of two ways between the same states.
	steps, total := 0, 0
	for _, s := range order {
		for w := range m.words() {
			to, out := m.step(s, w)
			if component[to] != component[s] {
				continue
			}
			d, n := depth[s]+1-depth[to], emitted[s]+len(out)-emitted[to]
			if steps == 0 && d != 0 {
				steps, total = d, n
			}
			if d*total != n*steps || d == 0 && n != 0 {
				return 0, 0, false
			}
		}
	}
	b, n := m.bits*steps, total
	if b < 0 {
		b, n = -b, -n
	}
	g := markov.GCD(b, n)
	return b / g, n / g, true
}

// graph returns the encoder's graph, whatever the data: all words count.
func (m *machine) graph() *markov.Graph {
	return markov.New(m.states, len(m.next), func(i int) (from, to int, p float64) { return i >> m.bits, int(m.next[i]), 1 })
}

// Rate returns the mean number of source bits per symbol under the code's data, over a long time. Where the data can
// end in one of several closed classes of states, it is the mean of the rates of the classes, weighted with the
// probabilities of ending in each. It panics if the chain of the code and its data is too large, and when the running
// cell is interrupted.
func (c *Code) Rate() float64 {
	if bits, symbols, fixed := c.FixedRate(); fixed {
		return float64(bits) / float64(symbols)
	}
	rate, err := c.meanRate()
	if err != nil {
		panic(fmt.Errorf("linecode: rate of %s: %w", c.name, err))
	}
	return rate
}

func (c *Code) meanRate() (float64, error) {
	ctx := page.Context()
	if c.data.Pattern() != nil {
		_, laps, symbols, err := c.cycle(ctx)
		return float64(laps*c.lapWords()*c.machine.bits) / float64(symbols), err
	}
	chain := c.Chain()
	g := chain.graph()
	symbols := make([]float64, chain.States) // mean per step from each state
	for _, e := range chain.Edges {
		symbols[e.From] += e.P * float64(len(e.Levels))
	}
	closed := g.Closed()
	ends, err := g.Absorption(ctx, chain.Start, closed)
	if err != nil {
		return 0, err
	}
	var rate float64
	for i, class := range closed {
		pi, err := g.Sub(class).Stationary(ctx)
		if err != nil {
			return 0, err
		}
		var perStep float64
		for k, s := range class {
			perStep += pi[k] * symbols[s]
		}
		rate += ends[i] * float64(c.machine.bits) / perStep
	}
	return rate, nil
}
