package markov

import (
	"context"
	"errors"
	"fmt"
)

// Absorption returns the probability of ending in each of the closed classes, as [Graph.Closed] gives them, from the
// distribution start. By elimination the probabilities are accurate relative to themselves; by iteration, where
// elimination would fill, to 1e-16. A chain that is too large for the first and lingers too long for the second is
// refused. An interrupt of ctx is returned as its cause.
func (g *Graph) Absorption(ctx context.Context, start []float64, closed [][]int) ([]float64, error) {
	if len(closed) == 1 {
		return []float64{1}, nil
	}
	n := g.Len()
	absorbing := make([]bool, n)
	for _, class := range closed {
		for _, s := range class {
			absorbing[s] = true
		}
	}
	reached := g.Reach(start)
	for s := range n {
		if !reached[s] {
			absorbing[s] = true // never entered; nothing to eliminate
		}
	}
	mass, err := g.absorbed(ctx, start, absorbing)
	if errors.Is(err, errFill) {
		mass, err = g.drained(ctx, start, absorbing)
	}
	if err != nil {
		return nil, err
	}
	h := make([]float64, len(closed))
	for c, class := range closed {
		for _, s := range class {
			h[c] += mass[s]
		}
	}
	return h, nil
}

// absorbed eliminates the states that do not absorb and hands the probability of being in each to its successors.
func (g *Graph) absorbed(ctx context.Context, start []float64, absorbing []bool) ([]float64, error) {
	mass := append([]float64(nil), start...)
	e, err := newElimination(ctx, g, absorbing)
	if err != nil {
		return nil, err
	}
	for e.left > 0 {
		s := e.next()
		if err := e.check(ctx, s); err != nil {
			return nil, err
		}
		row, sum, _ := e.take(s)
		for _, r := range row {
			mass[r.to] += mass[s] * (r.p / sum)
		}
		mass[s] = 0
	}
	return mass, nil
}

// drained lets the chain run until less than 1e-17 is left outside the absorbing states.
func (g *Graph) drained(ctx context.Context, start []float64, absorbing []bool) ([]float64, error) {
	n := g.Len()
	mass := make([]float64, n) // absorbed so far
	now, next := append([]float64(nil), start...), make([]float64, n)
	for range maxIterations {
		if ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		var left float64
		for s, p := range now {
			if absorbing[s] {
				mass[s] += p
				now[s] = 0
			} else {
				left += p
			}
		}
		if left < 1e-17 {
			return mass, nil
		}
		g.step(next, now)
		now, next = next, now
	}
	return nil, fmt.Errorf("markov: a chain of %d states and %d edges fills under elimination and is not absorbed within %d steps; reduce it first",
		n, len(g.to), maxIterations)
}
