package linecode

import (
	"context"
	"encoding/binary"
)

// A survivors automaton follows the places at which an encoder can be, given its symbols so far. Its states are the sets
// of such places; a move leads from one set to the next and remembers, for each place in the new set, the place in the
// old one that it comes from and the words that were read on the way. Sets and moves are made when first needed, so that
// a long stream costs one look-up a symbol.
type survivors struct {
	t       *tries
	sets    [][]int32 // nodes, those that win where two ways lead to one place first
	numbers map[string]int32
	moves   []move
	known   map[turn]int32 // the move, or none
	chains  [][]uint32     // words read together, referred to by moves
	size    int            // places in all moves
}

type turn struct{ set, symbol int32 }

// A move is the passage from one set to another.
type move struct {
	to     int32
	from   []int32 // per place of the new set, its place in the old one
	words  []int32 // likewise the words read: noWord, a word, or chained(i) for chains[i]
	merged bool    // two ways led to one place
}

const (
	none     = -1 // no move: nothing that the code permits continues
	wildcard = -1 // the symbol of a move that any symbol makes
	noWord   = -1
)

// chained is how a move refers to chains[i].
func chained(i int) int32 { return int32(-2 - i) }

func newSurvivors(t *tries) *survivors {
	return &survivors{t: t, numbers: make(map[string]int32), known: make(map[turn]int32)}
}

// set returns the number of a set of nodes.
func (a *survivors) set(nodes []int32) int32 {
	key := make([]byte, 0, 4*len(nodes))
	for _, n := range nodes {
		key = binary.LittleEndian.AppendUint32(key, uint32(n))
	}
	number, ok := a.numbers[string(key)]
	if !ok {
		number = int32(len(a.sets))
		a.numbers[string(key)] = number
		a.sets = append(a.sets, nodes)
	}
	return number
}

// move returns the number of the move that a symbol makes from a set, or none. It returns an error only where it was
// interrupted.
func (a *survivors) move(ctx context.Context, set, symbol int32) (int32, error) {
	if number, ok := a.known[turn{set, symbol}]; ok {
		return number, nil
	}
	var m move
	var nodes []int32
	taken := make(map[int32]bool)
	var places []place
	for i, node := range a.sets[set] {
		if i&(1<<10-1) == 0 && ctx.Err() != nil {
			return none, ctx.Err()
		}
		places = places[:0]
		for _, kid := range a.t.children(node) {
			if symbol == wildcard || kid.symbol == symbol {
				places = a.t.arrive(places, kid.node)
			}
		}
		for _, p := range places {
			if taken[p.node] {
				m.merged = true
				continue
			}
			taken[p.node] = true
			nodes = append(nodes, p.node)
			m.from = append(m.from, int32(i))
			m.words = append(m.words, a.refer(p.words))
		}
	}
	number := int32(none)
	if len(nodes) > 0 {
		m.to = a.set(nodes)
		number = int32(len(a.moves))
		a.moves = append(a.moves, m)
		a.size += len(nodes)
	}
	a.known[turn{set, symbol}] = number
	return number, nil
}

// refer returns how a move refers to words.
func (a *survivors) refer(words []uint32) int32 {
	switch len(words) {
	case 0:
		return noWord
	case 1:
		return int32(words[0])
	}
	a.chains = append(a.chains, words)
	return chained(len(a.chains) - 1)
}

// appendReversed appends the words that a move refers to, the last first.
func (a *survivors) appendReversed(words []uint32, reference int32) []uint32 {
	switch {
	case reference == noWord:
		return words
	case reference >= 0:
		return append(words, uint32(reference))
	}
	chain := a.chains[-2-reference]
	for i := len(chain) - 1; i >= 0; i-- {
		words = append(words, chain[i])
	}
	return words
}
