package linecode

import (
	"cmp"
	"encoding/binary"
	"slices"

	"linewright/builtins/page"
)

// Minimal returns the number of states that the code needs once it has started up: its recurrent states, those of equal
// behaviour counted once. Two states are of equal behaviour if every data sequence gives the same symbols, word by word,
// from both. Cards compare codes by it. It panics when the running cell is interrupted.
//
// J. E. Hopcroft, "An n log n algorithm for minimizing states in a finite automaton", in Theory of Machines and
// Computations (1971) 189-196.
func (c *Code) Minimal() int {
	ctx := page.Context()
	m := c.made().machine
	var states []int32
	for _, class := range m.graph().Closed() {
		for _, s := range class {
			states = append(states, int32(s))
		}
	}
	p := newPartition(m, states)
	for len(p.splitters) > 0 {
		if ctx.Err() != nil {
			panic(interrupted(ctx, "counting the states of", c.name))
		}
		last := len(p.splitters) - 1
		b := p.splitters[last]
		p.splitters = p.splitters[:last]
		p.split(p.before(b))
	}
	return len(p.lo)
}

// A partition of states into blocks of which all members are, as far as is known, of equal behaviour.
type partition struct {
	m      *machine
	states []int32 // block b is states[lo[b]:hi[b]]
	lo, hi []int
	place  []int // per state of the machine, in states
	block  []int // likewise, its block
	marked []int // per block, how many of its states were moved to its front

	preds     [][]arrival // per state, the recurrent states and words that lead to it
	splitters []int       // blocks whose predecessors are still to be told apart
}

// An arrival is a word and the state in which it leads to the one at hand.
type arrival struct{ word, from int32 }

// newPartition puts states with the same outputs for all words into the same block.
func newPartition(m *machine, states []int32) *partition {
	p := &partition{m: m, states: states, place: make([]int, m.states), block: make([]int, m.states), preds: make([][]arrival, m.states)}
	blocks := make(map[string]int)
	var key []byte
	for _, s := range states {
		key = key[:0]
		for w := range m.words() {
			i := int(s)<<m.bits | w
			key = binary.LittleEndian.AppendUint32(key, uint32(m.output[i]))
			p.preds[m.next[i]] = append(p.preds[m.next[i]], arrival{int32(w), s})
		}
		b, ok := blocks[string(key)]
		if !ok {
			b = len(blocks)
			blocks[string(key)] = b
		}
		p.block[s] = b
	}
	slices.SortStableFunc(p.states, func(a, b int32) int { return cmp.Compare(p.block[a], p.block[b]) })
	for i, s := range p.states {
		p.place[s] = i
		if b := p.block[s]; b == len(p.lo) {
			p.lo, p.hi, p.marked = append(p.lo, i), append(p.hi, i), append(p.marked, 0)
			p.splitters = append(p.splitters, b)
		}
		p.hi[p.block[s]] = i + 1
	}
	return p
}

// before returns the arrivals at the states of a block, word by word.
func (p *partition) before(b int) []arrival {
	var all []arrival
	for _, s := range p.states[p.lo[b]:p.hi[b]] {
		all = append(all, p.preds[s]...)
	}
	slices.SortFunc(all, func(a, b arrival) int { return cmp.Or(cmp.Compare(a.word, b.word), cmp.Compare(a.from, b.from)) })
	return all
}

// split parts, for each word, the states from which it arrives from those of their block from which it does not.
func (p *partition) split(arrivals []arrival) {
	for len(arrivals) > 0 {
		var touched []int
		word := arrivals[0].word
		for len(arrivals) > 0 && arrivals[0].word == word {
			s := arrivals[0].from
			arrivals = arrivals[1:]
			b := p.block[s]
			if p.marked[b] == 0 {
				touched = append(touched, b)
			}
			p.swap(p.place[s], p.lo[b]+p.marked[b])
			p.marked[b]++
		}
		for _, b := range touched {
			p.part(b, p.marked[b])
			p.marked[b] = 0
		}
	}
}

// part makes the first n states of a block, or the others, whichever are fewer, a block of their own.
func (p *partition) part(b, n int) {
	lo, hi := p.lo[b], p.hi[b]
	if n == hi-lo {
		return
	}
	fresh := len(p.lo)
	if n <= hi-lo-n {
		p.lo[b] += n
		p.lo, p.hi = append(p.lo, lo), append(p.hi, lo+n)
	} else {
		p.hi[b] = lo + n
		p.lo, p.hi = append(p.lo, lo+n), append(p.hi, hi)
	}
	p.marked = append(p.marked, 0)
	p.splitters = append(p.splitters, fresh)
	for _, s := range p.states[p.lo[fresh]:p.hi[fresh]] {
		p.block[s] = fresh
	}
}

func (p *partition) swap(i, j int) {
	a, b := p.states[i], p.states[j]
	p.states[i], p.states[j] = b, a
	p.place[a], p.place[b] = j, i
}
