package markov

import (
	"container/heap"
	"context"
	"errors"
	"slices"
)

// errFill says that elimination would cost more than its limits.
var errFill = errors.New("elimination fills")

// Limits of the elimination: the products that it may form (about two seconds of one core), and the largest core
// that is finished as a dense matrix.
const (
	maxProducts = 400e6
	maxDense    = 1200
)

// An elimination takes states out of a chain one after another. What remains is the chain watched only while it is in
// the remaining states, so the rows stay probabilities (up to the loops, which never matter and are not kept).
type elimination struct {
	rows     [][]entry // per state, in rising order of the target
	preds    [][]int32 // per state, the states whose rows hold it, and eliminated ones, which are skipped
	live     []int     // per state, how many of its preds are not eliminated
	gone     []bool    // eliminated
	absorbed []bool    // never to be eliminated
	left     int       // states neither eliminated nor absorbing
	spent    int       // products so far
	scratch  []entry
	queue    costs
	stamp    []int // of each state's newest place in the queue
}

type entry struct {
	to int32
	p  float64
}

// newElimination prepares to eliminate the states of g for which absorbing is false.
func newElimination(ctx context.Context, g *Graph, absorbing []bool) (*elimination, error) {
	n := g.Len()
	e := &elimination{
		rows: make([][]entry, n), preds: make([][]int32, n), live: make([]int, n), gone: make([]bool, n), absorbed: absorbing, stamp: make([]int, n),
	}
	at := make([]float64, n)
	for s := range n {
		if s%1024 == 0 && ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		if absorbing[s] {
			continue
		}
		e.left++
		to, p := g.Row(s)
		for k, t := range to {
			at[t] += p[k]
		}
		row := make([]entry, 0, len(to))
		for _, t := range to {
			if at[t] > 0 && int(t) != s {
				row = append(row, entry{t, at[t]})
			}
			at[t] = 0
		}
		slices.SortFunc(row, func(a, b entry) int { return int(a.to - b.to) })
		e.rows[s] = row
		for _, r := range row {
			e.precede(r.to, s)
		}
	}
	for s := range n {
		if !absorbing[s] {
			e.enqueue(s)
		}
	}
	return e, nil
}

// precede notes that the row of state u holds t. Absorbing states are never eliminated and need no such list.
func (e *elimination) precede(t int32, u int) {
	if !e.absorbed[t] {
		e.preds[t] = append(e.preds[t], int32(u))
		e.live[t]++
	}
}

// products returns the products that eliminating state s would take.
func (e *elimination) products(s int) int { return len(e.rows[s]) * e.live[s] }

// enqueue puts state s into the queue with the products that eliminating it would take.
func (e *elimination) enqueue(s int) {
	e.stamp[s]++
	heap.Push(&e.queue, cost{e.products(s), s, e.stamp[s]})
}

// next returns the state that is cheapest to eliminate (H. M. Markowitz, "The elimination form of the inverse and its
// application to linear programming", Management Science 3 (1957) 255-269).
func (e *elimination) next() int {
	for {
		c := heap.Pop(&e.queue).(cost)
		if !e.gone[c.state] && c.stamp == e.stamp[c.state] {
			return c.state
		}
	}
}

// take eliminates state s. It returns the row of s with its sum, and the states that led to s, each with the
// probability of going to s over that of leaving s.
func (e *elimination) take(s int) (row []entry, sum float64, from []entry) {
	row = e.rows[s]
	for _, r := range row {
		sum += r.p
	}
	for _, u := range e.preds[s] {
		if e.gone[u] {
			continue
		}
		p := remove(&e.rows[u], int32(s))
		from = append(from, entry{u, p / sum})
		e.merge(int(u), row, p/sum)
		e.spent += len(row) + len(e.rows[u])
	}
	e.gone[s] = true
	e.rows[s], e.preds[s] = nil, nil
	e.left--
	for _, r := range row {
		if t := int(r.to); !e.absorbed[t] {
			e.live[t]--
			e.enqueue(t)
		}
	}
	for _, f := range from {
		e.enqueue(int(f.to))
	}
	return row, sum, from
}

// full reports whether state s, the cheapest, is joined to so many of the others that the rest is better finished as
// a dense matrix.
func (e *elimination) full(s int) bool {
	return e.left <= maxDense && 4*e.products(s) >= e.left*e.left
}

// merge adds f times row to the row of state u, loops left out.
func (e *elimination) merge(u int, row []entry, f float64) {
	old := e.rows[u]
	out := e.scratch[:0]
	i := 0
	for _, r := range row {
		for i < len(old) && old[i].to < r.to {
			out = append(out, old[i])
			i++
		}
		switch {
		case int(r.to) == u:
		case i < len(old) && old[i].to == r.to:
			out = append(out, entry{r.to, old[i].p + f*r.p})
			i++
		default:
			out = append(out, entry{r.to, f * r.p})
			e.precede(r.to, u)
		}
	}
	out = append(out, old[i:]...)
	e.rows[u] = append(old[:0], out...)
	e.scratch = out
}

// check returns an error where the work was interrupted or would outgrow its limits by eliminating s, the cheapest.
func (e *elimination) check(ctx context.Context, s int) error {
	if ctx.Err() != nil {
		return context.Cause(ctx)
	}
	if n := e.products(s); n > maxDense*maxDense || e.spent+n > maxProducts {
		return errFill
	}
	return nil
}

// remove takes the entry of state s out of a row and returns its probability.
func remove(row *[]entry, s int32) float64 {
	r := *row
	lo, hi := 0, len(r)
	for lo < hi {
		if mid := (lo + hi) / 2; r[mid].to < s {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	p := r[lo].p
	*row = append(r[:lo], r[lo+1:]...)
	return p
}

// A cost is a place in the queue of the states to eliminate, cheapest first and then by number.
type cost struct{ products, state, stamp int }

type costs []cost

func (c costs) Len() int { return len(c) }
func (c costs) Less(i, j int) bool {
	if c[i].products != c[j].products {
		return c[i].products < c[j].products
	}
	return c[i].state < c[j].state
}
func (c costs) Swap(i, j int) { c[i], c[j] = c[j], c[i] }
func (c *costs) Push(x any)   { *c = append(*c, x.(cost)) }
func (c *costs) Pop() any {
	old := *c
	last := old[len(old)-1]
	*c = old[:len(old)-1]
	return last
}
