package spectrum

import (
	"context"
	"math"

	"linewright/builtins/internal/markov"
)

// closed returns the classes of states that the data may end in, each as a machine of its own, and the probability of
// each. States that are left for ever do not count: they have no part in a stationary average.
func (m *machine) closed(ctx context.Context) ([]*machine, []float64, error) {
	g := m.graph()
	reached := g.Reach(m.start)
	var sets [][]int
	for _, set := range g.Closed() {
		if reached[set[0]] {
			sets = append(sets, set)
		}
	}
	if len(sets) == 1 && len(sets[0]) == m.states {
		return []*machine{m}, []float64{1}, nil
	}
	prob, err := g.Absorption(ctx, m.start, sets)
	if err != nil {
		return nil, nil, err
	}
	class := make([]int32, m.states)
	place := make([]int32, m.states)
	for i := range class {
		class[i] = -1
	}
	parts := make([]*machine, len(sets))
	for c, set := range sets {
		parts[c] = &machine{states: len(set)}
		for i, s := range set {
			class[s], place[s] = int32(c), int32(i)
		}
	}
	for _, e := range m.edges {
		if c := class[e.from]; c >= 0 {
			e.from, e.to = place[e.from], place[e.to]
			parts[c].edges = append(parts[c].edges, e)
		}
	}
	return parts, prob, nil
}

// stationary is the stationary distribution of an irreducible chain of period d with cyclic classes cyc. From the
// uniform distribution within each cyclic class, codes forget in a few steps (shift registers in as many as they have
// stages); what has not settled to the last digits by then is solved for.
func stationary(ctx context.Context, g *markov.Graph, d int, cyc []int) ([]float64, error) {
	n := g.Len()
	size := make([]int, d)
	for _, c := range cyc {
		size[c]++
	}
	now, next := make([]float64, n), make([]float64, n)
	for s, c := range cyc {
		now[s] = 1 / float64(d*size[c])
	}
	const patience = 64
	still := 0
	for range patience {
		clear(next)
		for s, mass := range now {
			to, p := g.Row(s)
			for k, t := range to {
				next[t] += mass * p[k]
			}
		}
		moved, sum := 0.0, 0.0
		for s, v := range next {
			moved += math.Abs(v - now[s])
			sum += v
		}
		for s := range next {
			next[s] /= sum
		}
		now, next = next, now
		if moved > 3e-16 {
			still = 0
			continue
		}
		if still++; still == 3 {
			return now, nil
		}
	}
	return g.Stationary(ctx)
}
