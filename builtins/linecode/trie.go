package linecode

import (
	"cmp"
	"slices"
)

// tries hold, for each state of a machine, the tree of the symbols that its words emit: a node stands for all words
// whose symbols begin with those on the way to it. A root and the inner nodes are the places at which an encoder can be
// after a whole number of symbols. Trees are made when first asked for.
type tries struct {
	m     *machine
	roots []int32 // per state; -1: not made yet
	nodes []trieNode
	kids  []trieKid
	words []uint32 // of each state that has a tree, in the order of their symbols
}

type trieNode struct {
	state        int32
	depth        int32 // symbols since the state
	lo, ends, hi int32 // words[lo:ends] end here, words[lo:hi] come through here
	kids, kidsTo int32 // kids[kids:kidsTo], in rising order of the symbol
}

type trieKid struct{ symbol, node int32 }

func newTries(m *machine) *tries {
	t := &tries{m: m, roots: make([]int32, m.states)}
	for s := range t.roots {
		t.roots[s] = -1
	}
	return t
}

// root returns the root of the tree of state s.
func (t *tries) root(s int) int32 {
	if t.roots[s] < 0 {
		lo := len(t.words)
		for w := range t.m.words() {
			t.words = append(t.words, uint32(w))
		}
		words := t.words[lo:]
		slices.SortFunc(words, func(a, b uint32) int {
			return cmp.Or(slices.Compare(t.symbols(s, a), t.symbols(s, b)), cmp.Compare(a, b))
		})
		t.roots[s] = t.grow(s, lo, len(t.words), 0)
	}
	return t.roots[s]
}

// symbols returns what state s emits for word w.
func (t *tries) symbols(s int, w uint32) []int32 {
	return t.m.outputs.at(t.m.output[s<<t.m.bits|int(w)])
}

// next returns the state after word w in state s.
func (t *tries) next(s int32, w uint32) int { return int(t.m.next[int(s)<<t.m.bits|int(w)]) }

// grow makes the node of words[lo:hi] of state s, which agree in their first depth symbols, and all below it.
func (t *tries) grow(s, lo, hi, depth int) int32 {
	id := int32(len(t.nodes))
	ends := lo
	for ends < hi && len(t.symbols(s, t.words[ends])) == depth {
		ends++
	}
	t.nodes = append(t.nodes, trieNode{state: int32(s), depth: int32(depth), lo: int32(lo), ends: int32(ends), hi: int32(hi)})
	var kids []trieKid
	for i := ends; i < hi; {
		symbol := t.symbols(s, t.words[i])[depth]
		j := i + 1
		for j < hi && t.symbols(s, t.words[j])[depth] == symbol {
			j++
		}
		kids = append(kids, trieKid{symbol, t.grow(s, i, j, depth+1)})
		i = j
	}
	t.nodes[id].kids = int32(len(t.kids))
	t.kids = append(t.kids, kids...)
	t.nodes[id].kidsTo = int32(len(t.kids))
	return id
}

// children returns the kids of a node.
func (t *tries) children(node int32) []trieKid {
	n := &t.nodes[node]
	return t.kids[n.kids:n.kidsTo]
}

// child returns the node that a symbol leads to, or -1.
func (t *tries) child(node, symbol int32) int32 {
	kids := t.children(node)
	i, ok := slices.BinarySearchFunc(kids, symbol, func(k trieKid, symbol int32) int { return cmp.Compare(k.symbol, symbol) })
	if !ok {
		return -1
	}
	return kids[i].node
}

// A place is a node at which an encoder can be, and the words that it has read since some earlier moment.
type place struct {
	node  int32
	words []uint32
}

// arrive appends the places at which an encoder can be once its last symbol has led to an inner node: there, in the
// middle of a word, or at the root of the state that a word leads to, also over further words without symbols.
func (t *tries) arrive(places []place, node int32) []place {
	n := t.nodes[node]
	if n.kids < n.kidsTo {
		places = append(places, place{node, nil})
	}
	for _, w := range t.words[n.lo:n.ends] {
		places = t.enter(places, t.next(n.state, w), []uint32{w})
	}
	return places
}

// enter appends the places at which an encoder can be that has come to state s by reading words.
func (t *tries) enter(places []place, s int, words []uint32) []place {
	root := t.root(s)
	places = append(places, place{root, words})
	n := t.nodes[root]
	for _, w := range t.words[n.lo:n.ends] {
		places = t.enter(places, t.next(n.state, w), append(slices.Clone(words), w))
	}
	return places
}

// commonBits returns the bits in which all words that come through a node begin.
func (t *tries) commonBits(node int32) []byte {
	n := t.nodes[node]
	first := t.words[n.lo]
	var differ uint32
	for _, w := range t.words[n.lo:n.hi] {
		differ |= w ^ first
	}
	var bits []byte
	for k := t.m.bits - 1; k >= 0 && differ>>k == 0; k-- {
		bits = append(bits, byte(first>>k&1))
	}
	return bits
}

// appendBits appends the bits of words in the order of time.
func appendBits(bits []byte, words []uint32, perWord int) []byte {
	for _, w := range words {
		for k := perWord - 1; k >= 0; k-- {
			bits = append(bits, byte(w>>k&1))
		}
	}
	return bits
}
