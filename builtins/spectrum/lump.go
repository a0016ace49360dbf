package spectrum

import (
	"context"
	"math"
	"slices"
)

const (
	lumpFrom = 64  // states below which solving is cheaper than reducing
	lumpWork = 4e7 // edges looked at before reducing is given up
)

// lump merges the states of an irreducible machine whose futures are alike: for every word the same probabilities of
// going to the same merged states. It is Moore's refinement with probabilities in place of moves; what it leaves is the
// smallest machine with the same law (J. G. Kemeny and J. L. Snell, Finite Markov Chains, 1960, chapter 6).
// Probabilities are compared to 2^-44.
func (m *machine) lump(ctx context.Context) (*machine, error) {
	if m.states < lumpFrom {
		return m, nil
	}
	m.sort()
	number := map[string]uint64{}
	words := make([]uint64, len(m.edges))
	for i, e := range m.edges {
		w := spell(e.word)
		n, ok := number[w]
		if !ok {
			n = uint64(len(number))
			number[w] = n
		}
		words[i] = n << 32
	}
	type move struct {
		key uint64 // word and class
		p   float64
	}
	type mark struct{ own, a, b uint64 }
	class, count := make([]uint64, m.states), 1
	next := make([]uint64, m.states)
	var moves []move
	for work := 0; work < lumpWork; work += len(m.edges) {
		seen := make(map[mark]uint64, count)
		for lo := 0; lo < len(m.edges); {
			if lo%1024 == 0 && ctx.Err() != nil {
				return nil, context.Cause(ctx)
			}
			s := m.edges[lo].from
			moves = moves[:0]
			for ; lo < len(m.edges) && m.edges[lo].from == s; lo++ {
				moves = append(moves, move{words[lo] | class[m.edges[lo].to], m.edges[lo].p})
			}
			slices.SortFunc(moves, func(a, b move) int {
				switch {
				case a.key != b.key:
					return int(min(max(int64(a.key)-int64(b.key), -1), 1))
				case a.p < b.p:
					return -1
				case a.p > b.p:
					return 1
				}
				return 0
			})
			k := mark{own: class[s]}
			for i := 0; i < len(moves); {
				key, p := moves[i].key, 0.0
				for ; i < len(moves) && moves[i].key == key; i++ {
					p += moves[i].p
				}
				q := uint64(math.Round(p * (1 << 44)))
				k.a = mix(k.a^key) + q
				k.b = mix(k.b+key*0x9e3779b97f4a7c15) ^ mix(q+1)
			}
			n, ok := seen[k]
			if !ok {
				n = uint64(len(seen))
				seen[k] = n
			}
			next[s] = n
		}
		class, next = next, class
		if len(seen) == count {
			return m.merge(class, count), nil
		}
		count = len(seen)
	}
	return m, nil // correct as it stands, only larger
}

// mix is the finisher of splitmix64 (Steele, Lea and Flood 2014).
func mix(x uint64) uint64 {
	x = (x ^ x>>30) * 0xbf58476d1ce4e5b9
	x = (x ^ x>>27) * 0x94d049bb133111eb
	return x ^ x>>31
}

// merge keeps the edges of one state of each class.
func (m *machine) merge(class []uint64, count int) *machine {
	if count == m.states {
		return m
	}
	first := make([]int32, count)
	for s := len(class) - 1; s >= 0; s-- {
		first[class[s]] = int32(s)
	}
	out := &machine{states: count}
	for _, e := range m.edges {
		if c := class[e.from]; first[c] == e.from {
			e.from, e.to = int32(c), int32(class[e.to])
			out.edges = append(out.edges, e)
		}
	}
	return out
}
