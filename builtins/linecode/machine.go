package linecode

import (
	"slices"
	"sync"
)

// A machine is an encoder as dense tables. State 0 is the start. It does not change once it is made, up to the verdict,
// which is found when first asked for.
type machine struct {
	bits   int       // source bits a word
	next   []int32   // state s and word w lead to state next[s<<bits|w] ...
	output []int32   // ... and emit outputs.at(output[s<<bits|w])
	states int       // reachable from the start
	levels []float64 // the alphabet, in rising order; symbols are indices into it

	delay   int
	flush   []int32 // per state, the output still owed when the data end; nil: none
	outputs outputs
	labels  func(s int) string // the state as its author wrote it, for errors
	parent  []int32            // per state, the step by which it was first reached: previous state<<bits | word

	mu      sync.Mutex
	verdict *Verdict // guarded by mu; nil until decided
}

// outputs holds the different symbol sequences that steps emit; 0 is the empty one.
type outputs struct {
	head    []int32   // sequence i is symbols[head[i]:head[i+1]]
	symbols []int32   // indices into the machine's levels
	values  []float64 // the same as levels
}

func (o *outputs) at(i int32) []int32         { return o.symbols[o.head[i]:o.head[i+1]] }
func (o *outputs) levelsOf(i int32) []float64 { return o.values[o.head[i]:o.head[i+1]:o.head[i+1]] }
func (o *outputs) length(i int32) int         { return int(o.head[i+1] - o.head[i]) }
func (m *machine) words() int                 { return 1 << m.bits }
func (m *machine) step(s, w int) (int, []int32) {
	i := s<<m.bits | w
	return int(m.next[i]), m.outputs.at(m.output[i])
}

// flushed returns the symbols owed in state s.
func (m *machine) flushed(s int) []int32 {
	if m.flush == nil {
		return nil
	}
	return m.outputs.at(m.flush[s])
}

// flushLengths returns the different numbers of symbols that states owe when the data end.
func (m *machine) flushLengths() []int {
	if m.flush == nil {
		return []int{0}
	}
	var lengths []int
	for _, i := range m.flush {
		lengths = append(lengths, m.outputs.length(i))
	}
	slices.Sort(lengths)
	return slices.Compact(lengths)
}

// symbol returns the index of a level in the alphabet, or -1.
func (m *machine) symbol(level float64) int {
	if i, ok := slices.BinarySearch(m.levels, level); ok {
		return i
	}
	return -1
}

// wordsTo returns words that lead from the start to state s, as few as possible.
func (m *machine) wordsTo(s int) []uint32 {
	var words []uint32
	for s != 0 {
		words = append(words, uint32(int(m.parent[s])&(m.words()-1)))
		s = int(m.parent[s]) >> m.bits
	}
	slices.Reverse(words)
	return words
}

// reversed returns the machine whose words hold the first bit in time in the least significant place.
func (m *machine) reversed() *machine {
	r := &machine{
		bits: m.bits, next: make([]int32, len(m.next)), output: make([]int32, len(m.output)), states: m.states,
		levels: m.levels, delay: m.delay, flush: m.flush, outputs: m.outputs, labels: m.labels, parent: make([]int32, len(m.parent)),
	}
	back := make([]int, m.words())
	for w := range back {
		for k := range m.bits {
			back[w] |= w >> k & 1 << (m.bits - 1 - k)
		}
	}
	for i := range m.next {
		j := i&^(m.words()-1) | back[i&(m.words()-1)]
		r.next[j], r.output[j] = m.next[i], m.output[i]
	}
	for s, p := range m.parent {
		r.parent[s] = p&^int32(m.words()-1) | int32(back[int(p)&(m.words()-1)])
	}
	return r
}
