package markov

import "fmt"

// A Graph is a directed graph on states 0 .. Len()-1 whose edges carry probabilities above zero, stored row by row.
// Several edges may join the same two states; their probabilities add up.
type Graph struct {
	head []int // the edges that leave state s are head[s] .. head[s+1]-1
	to   []int32
	p    []float64
}

// New makes a graph of n states from the edges that edge gives for 0 <= i < m. Edges of probability 0 are left out, the
// others keep their order within a state. It panics on a state outside 0 .. n-1, which is an error of the program.
func New(n, m int, edge func(i int) (from, to int, p float64)) *Graph {
	g := &Graph{head: make([]int, n+1)}
	for i := range m {
		from, to, p := edge(i)
		if from < 0 || from >= n || to < 0 || to >= n {
			panic(fmt.Errorf("markov: edge %d goes from %d to %d, outside the states 0 to %d", i, from, to, n-1))
		}
		if p > 0 {
			g.head[from+1]++
		}
	}
	for s := range n {
		g.head[s+1] += g.head[s]
	}
	g.to = make([]int32, g.head[n])
	g.p = make([]float64, g.head[n])
	fill := make([]int, n)
	for i := range m {
		from, to, p := edge(i)
		if p > 0 {
			k := g.head[from] + fill[from]
			g.to[k], g.p[k] = int32(to), p
			fill[from]++
		}
	}
	return g
}

// Len returns the number of states.
func (g *Graph) Len() int { return len(g.head) - 1 }

// Row returns the targets and probabilities of the edges that leave state s. They are the graph's own: read only.
func (g *Graph) Row(s int) (to []int32, p []float64) {
	lo, hi := g.head[s], g.head[s+1]
	return g.to[lo:hi], g.p[lo:hi]
}

// Sub returns the graph among the given states, numbered by their place in the list; edges that leave the list are
// left out.
func (g *Graph) Sub(states []int) *Graph {
	place := make([]int32, g.Len())
	for i := range place {
		place[i] = -1
	}
	for i, s := range states {
		place[s] = int32(i)
	}
	sub := &Graph{head: make([]int, 1, len(states)+1)}
	for _, s := range states {
		to, p := g.Row(s)
		for k, t := range to {
			if place[t] >= 0 {
				sub.to = append(sub.to, place[t])
				sub.p = append(sub.p, p[k])
			}
		}
		sub.head = append(sub.head, len(sub.to))
	}
	return sub
}
