package markov

import (
	"context"
	"errors"
	"fmt"
	"math"
)

// Stationary returns the stationary distribution of an irreducible chain of any period. By elimination its entries are
// accurate relative to themselves; by iteration, where elimination would fill, the absolute errors of all entries
// together stay below 1e-12. A chain that is too large for the first and mixes too slowly for the second is refused.
// An interrupt of ctx is returned as its cause.
func (g *Graph) Stationary(ctx context.Context) ([]float64, error) {
	pi, err := g.eliminated(ctx)
	if errors.Is(err, errFill) {
		return g.iterated(ctx)
	}
	return pi, err
}

// eliminated is the method of Grassmann, Taksar and Heyman with sparse rows.
func (g *Graph) eliminated(ctx context.Context) ([]float64, error) {
	n := g.Len()
	e, err := newElimination(ctx, g, make([]bool, n))
	if err != nil {
		return nil, err
	}
	type step struct {
		state int
		from  []entry
	}
	var steps []step
	for e.left > 1 {
		s := e.next()
		if e.full(s) {
			break
		}
		if err := e.check(ctx, s); err != nil {
			return nil, err
		}
		_, _, from := e.take(s)
		steps = append(steps, step{s, from})
	}
	pi := make([]float64, n)
	if err := e.core(ctx, pi); err != nil {
		return nil, err
	}
	for i := len(steps) - 1; i >= 0; i-- {
		var sum float64
		for _, f := range steps[i].from {
			sum += pi[f.to] * f.p
		}
		pi[steps[i].state] = sum
		rescale(pi, sum)
	}
	normalise(pi)
	return pi, nil
}

// core sets pi of the states that are left, up to a common factor, by the same elimination on a dense matrix.
func (e *elimination) core(ctx context.Context, pi []float64) error {
	var states []int
	place := make(map[int32]int)
	for s, gone := range e.gone {
		if !gone {
			place[int32(s)] = len(states)
			states = append(states, s)
		}
	}
	k := len(states)
	a := make([]float64, k*k)
	for i, s := range states {
		for _, r := range e.rows[s] {
			a[i*k+place[r.to]] = r.p
		}
	}
	for m := k - 1; m > 0; m-- {
		if ctx.Err() != nil {
			return context.Cause(ctx)
		}
		row := a[m*k : m*k+m]
		var sum float64
		for _, p := range row {
			sum += p
		}
		for i := range m {
			f := a[i*k+m] / sum
			a[i*k+m] = f
			if f == 0 {
				continue
			}
			into := a[i*k : i*k+m]
			for j, p := range row {
				into[j] += f * p
			}
		}
	}
	pi[states[0]] = 1
	for m := 1; m < k; m++ {
		var sum float64
		for i := range m {
			sum += pi[states[i]] * a[i*k+m]
		}
		pi[states[m]] = sum
		rescale(pi, sum)
	}
	return nil
}

// rescale keeps the unnormalised entries from overflowing: a chain that drifts has entries that differ by more powers
// of ten than a float64 can hold, and the small ones may then vanish.
func rescale(pi []float64, last float64) {
	if last > 1e200 {
		for s := range pi {
			pi[s] *= 1e-200
		}
	}
}

func normalise(pi []float64) {
	var sum float64
	for _, p := range pi {
		sum += p
	}
	for s := range pi {
		pi[s] /= sum
	}
}

// Iteration stops at a stated error, or gives up.
const (
	iterationError = 1e-12
	maxIterations  = 20000
	window         = 16 // iterations over which the contraction is measured
)

// iterated takes powers of a lazy chain (which stays in place with probability 1/4, so that no period keeps it from
// settling) until the distance still to go, judged by the contraction over the last iterations, is below
// iterationError.
func (g *Graph) iterated(ctx context.Context) ([]float64, error) {
	n := g.Len()
	now, next := make([]float64, n), make([]float64, n)
	for s := range now {
		now[s] = 1 / float64(n)
	}
	before := math.Inf(1)
	for k := range maxIterations {
		if ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		g.step(next, now)
		var moved float64
		for s := range next {
			next[s] = 0.25*now[s] + 0.75*next[s]
			moved += math.Abs(next[s] - now[s])
		}
		now, next = next, now
		if moved == 0 {
			normalise(now)
			return now, nil
		}
		if k%window == 0 {
			rate := math.Pow(moved/before, 1.0/window)
			if k > 0 && rate < 1 && moved*rate/(1-rate) < iterationError {
				normalise(now)
				return now, nil
			}
			if k > 0 && rate >= 1 && moved < iterationError {
				break // only rounding moves it now, and it mixes too slowly for that to be the answer
			}
			before = moved
		}
	}
	return nil, fmt.Errorf("markov: a chain of %d states and %d edges fills under elimination and mixes too slowly for iteration; reduce it first",
		n, len(g.to))
}

// step sets next to the distribution one step after now.
func (g *Graph) step(next, now []float64) {
	clear(next)
	for s, mass := range now {
		if mass == 0 {
			continue
		}
		to, p := g.Row(s)
		for k, t := range to {
			next[t] += mass * p[k]
		}
	}
}
