package spectrum

import (
	"slices"

	"linewright/builtins/internal/markov"
	"linewright/builtins/linecode"
)

// A coder is a chain as a pulse.Train sees it.
type coder struct{ *linecode.Chain }

func (c coder) Name() string { return c.Chain.Name }

func (c coder) Levels() []float64 {
	var x lexicon
	for i := range c.Edges {
		for k, a := range c.Edges[i].Levels {
			if k == 0 || a != c.Edges[i].Levels[k-1] {
				x.level(a)
			}
		}
	}
	slices.Sort(x.levels)
	return x.levels
}

// FixedRate compares the cycles of the chain. Counted along a tree of paths, bits and symbols give each state a place;
// an edge that misses its target's place by (bits, symbols) closes a cycle, and every cycle is a sum of these. Where no
// data can change the rate, all of them have one ratio.
func (c coder) FixedRate() (bits, symbols int, fixed bool) {
	m := &machine{states: c.States}
	for i := range c.Edges {
		if e := &c.Edges[i]; e.P > 0 {
			m.edges = append(m.edges, edge{from: int32(e.From), to: int32(e.To), p: e.P, word: []int32{int32(e.Bits), int32(len(e.Levels))}})
		}
	}
	m.sort()
	head := make([]int, m.states+1)
	for _, e := range m.edges {
		head[e.from+1]++
	}
	for s := range m.states {
		head[s+1] += head[s]
	}
	component, _ := m.graph().Components()
	type place struct{ bits, symbols int }
	at := make([]place, m.states)
	known := make([]bool, m.states)
	for root := range m.states {
		if known[root] {
			continue
		}
		known[root] = true
		for queue := []int32{int32(root)}; len(queue) > 0; queue = queue[1:] {
			s := queue[0]
			for _, e := range m.edges[head[s]:head[s+1]] {
				if component[e.to] != component[s] {
					continue
				}
				next := place{at[s].bits + int(e.word[0]), at[s].symbols + int(e.word[1])}
				if !known[e.to] {
					known[e.to] = true
					at[e.to] = next
					queue = append(queue, e.to)
					continue
				}
				b, n := next.bits-at[e.to].bits, next.symbols-at[e.to].symbols
				if b*symbols != n*bits {
					return 0, 0, false
				}
				if bits == 0 && symbols == 0 {
					bits, symbols = b, n
				}
			}
		}
	}
	if symbols < 0 {
		bits, symbols = -bits, -symbols
	}
	if symbols == 0 || bits < 0 {
		return 0, 0, false
	}
	g := markov.GCD(bits, symbols)
	return bits / g, symbols / g, true
}
