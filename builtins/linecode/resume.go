package linecode

import "linewright/builtins/internal/markov"

// A resumption says at which places an encoder can be after a number of symbols from its start, when nothing is known of
// them. Decoding resumes there after a fault.
type resumption struct {
	t         *tries
	recurrent []bool          // state in a closed class
	startup   int             // symbols that can pass before the encoder is in a closed class for good; endless if it may never be
	period    int             // of the encoder in symbols: each place occurs at one phase of it
	phase     []int           // per state
	known     map[int][]place // by phase, once started up
}

const endless = int(^uint(0) >> 1)

func newResumption(t *tries) *resumption {
	m := t.m
	r := &resumption{t: t, known: make(map[int][]place), recurrent: make([]bool, m.states), phase: make([]int, m.states)}
	g := m.graph()
	for _, class := range g.Closed() {
		for _, s := range class {
			r.recurrent[s] = true
		}
	}
	// The period is the common divisor of all differences in symbols between two ways to the same state.
	for s := range r.phase {
		r.phase[s] = -1
	}
	r.phase[0] = 0
	for queue := []int{0}; len(queue) > 0; {
		s := queue[0]
		queue = queue[1:]
		for w := range m.words() {
			to, out := m.step(s, w)
			if r.phase[to] < 0 {
				r.phase[to] = r.phase[s] + len(out)
				queue = append(queue, to)
			}
			r.period = markov.GCD(r.period, r.phase[s]+len(out)-r.phase[to])
		}
	}
	for s := range r.phase {
		r.phase[s] %= r.period
	}
	r.startup = r.longestStartup(g)
	return r
}

// longestStartup returns the most symbols that pass before the encoder is in a closed class.
func (r *resumption) longestStartup(g *markov.Graph) int {
	m := r.t.m
	component, count := g.Components()
	longest := make([]int, m.states)
	byComponent := make([][]int, count)
	for s, c := range component {
		byComponent[c] = append(byComponent[c], s)
	}
	for _, states := range byComponent { // no edge leads to a component that comes later
		s := states[0]
		if r.recurrent[s] {
			continue
		}
		if len(states) > 1 {
			return endless
		}
		for w := range m.words() {
			to, out := m.step(s, w)
			if to == s {
				return endless
			}
			longest[s] = max(longest[s], longest[to]+len(out))
		}
	}
	return longest[0]
}

// places returns where the encoder can be after so many symbols: in recurrent states, and in the others while start-up
// can last. They are shared: read only.
func (r *resumption) places(symbols int) []place {
	started := symbols > r.startup
	phase := symbols % r.period
	if started && r.known[phase] != nil {
		return r.known[phase]
	}
	var places []place
	for s := range r.t.m.states {
		if started && !r.recurrent[s] {
			continue
		}
		for node := r.t.root(s); int(node) < len(r.t.nodes) && int(r.t.nodes[node].state) == s; node++ {
			n := &r.t.nodes[node]
			if (r.phase[s]+int(n.depth))%r.period == phase && (n.depth == 0 || n.kids < n.kidsTo) {
				places = append(places, place{node: node})
			}
		}
	}
	if started {
		r.known[phase] = places
	}
	return places
}
