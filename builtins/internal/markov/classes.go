package markov

// Components returns the strongly connected component of each state and the number of components. They are numbered
// against the direction of the edges: an edge never leads to a component of a higher number.
//
// R. Tarjan, "Depth-first search and linear graph algorithms", SIAM J. Comput. 1 (1972) 146-160; here with a stack of
// its own, because a chain of 100,000 states would nest as deep.
func (g *Graph) Components() (component []int, count int) {
	n := g.Len()
	component = make([]int, n)
	order := make([]int, n) // 1 + order of discovery; 0: not seen
	low := make([]int, n)   // smallest order reachable through the subtree and one more edge
	next := make([]int, n)  // the next edge to look at
	for s := range component {
		component[s] = -1
		next[s] = g.head[s]
	}
	var open, path []int // states without a component yet; the path of the search
	seen := 0
	for root := range n {
		if order[root] != 0 {
			continue
		}
		path = append(path, root)
		for len(path) > 0 {
			s := path[len(path)-1]
			if order[s] == 0 {
				seen++
				order[s], low[s] = seen, seen
				open = append(open, s)
			}
			if next[s] < g.head[s+1] {
				t := int(g.to[next[s]])
				next[s]++
				switch {
				case order[t] == 0:
					path = append(path, t)
				case component[t] < 0:
					low[s] = min(low[s], order[t])
				}
				continue
			}
			path = path[:len(path)-1]
			if len(path) > 0 {
				parent := path[len(path)-1]
				low[parent] = min(low[parent], low[s])
			}
			if low[s] == order[s] {
				for {
					t := open[len(open)-1]
					open = open[:len(open)-1]
					component[t] = count
					if t == s {
						break
					}
				}
				count++
			}
		}
	}
	return component, count
}

// Closed returns the closed classes: the sets of states that reach each other and nothing else. Each lists its states
// in rising order, and the classes come in the order of their first states.
func (g *Graph) Closed() [][]int {
	component, count := g.Components()
	leaves := make([]bool, count)
	for s := range g.Len() {
		to, _ := g.Row(s)
		for _, t := range to {
			if component[t] != component[s] {
				leaves[component[s]] = true
			}
		}
	}
	class := make([]int, count) // 1 + place in closed
	var closed [][]int
	for s, c := range component {
		if leaves[c] {
			continue
		}
		if class[c] == 0 {
			closed = append(closed, nil)
			class[c] = len(closed)
		}
		closed[class[c]-1] = append(closed[class[c]-1], s)
	}
	return closed
}

// Reach reports for each state whether it can be reached from a state of positive probability in start.
func (g *Graph) Reach(start []float64) []bool {
	reached := make([]bool, g.Len())
	var queue []int
	for s, p := range start {
		if p > 0 {
			reached[s] = true
			queue = append(queue, s)
		}
	}
	for len(queue) > 0 {
		s := queue[len(queue)-1]
		queue = queue[:len(queue)-1]
		to, _ := g.Row(s)
		for _, t := range to {
			if !reached[t] {
				reached[t] = true
				queue = append(queue, int(t))
			}
		}
	}
	return reached
}

// Period returns the period d of an irreducible chain, the greatest common divisor of the lengths of its cycles, and
// the cyclic class of each state: every edge leads from class c to class (c+1) mod d, and state 0 is in class 0.
//
// E. V. Denardo, "Periods of connected networks and powers of nonnegative matrices", Math. Oper. Res. 2 (1977) 20-24.
func (g *Graph) Period() (d int, class []int) {
	n := g.Len()
	class = make([]int, n)
	for s := range class {
		class[s] = -1
	}
	class[0] = 0
	for queue := []int{0}; len(queue) > 0; {
		s := queue[0]
		queue = queue[1:]
		to, _ := g.Row(s)
		for _, t := range to {
			if class[t] < 0 {
				class[t] = class[s] + 1
				queue = append(queue, int(t))
				continue
			}
			d = GCD(d, class[s]+1-class[t])
		}
	}
	if d > 0 {
		for s := range class {
			class[s] %= d
		}
	}
	return d, class
}

// GCD returns the greatest common divisor of a and b, which may have any sign; that of 0 and n is the magnitude of n.
func GCD(a, b int) int {
	for b != 0 {
		a, b = b, a%b
	}
	return max(a, -a)
}
