package linecode

import (
	"context"
	"fmt"
	"slices"
	"strings"

	"linewright/builtins/page"
)

// A Verdict says whether the data of a code can be told apart from its symbols.
type Verdict struct {
	// Decodable says that any two data sequences that differ give symbols that differ, at the latest Delay symbols on.
	Decodable bool

	// Undecided says that the search ended at its limit: it looked at 2,000,000 pairs of places at which two encoders
	// with the same symbols can be, or at 2^24 places, and found neither an answer nor an end.
	Undecided bool

	// Delay is the largest number of symbols in which two data sequences agree, counted from the start of the first
	// word in which they differ. It is 0 for codes whose words differ in their first symbols. Only where Decodable.
	Delay int

	// One is the first of two data sequences, One and Other, that give the same symbols, where the code is not decodable
	// and not undecided. If RepeatOne is 0, they lead to the same state and the same data may follow.
	One []byte

	// Other is the second of the two data sequences that give the same symbols.
	Other []byte

	// RepeatOne is the number of bits at the end of One that repeat for ever; 0 if none need to.
	RepeatOne int

	// RepeatOther is the number of bits at the end of Other that repeat for ever; 0 if none need to.
	RepeatOther int
}

// String says the verdict in a sentence.
func (v Verdict) String() string {
	switch {
	case v.Decodable:
		return fmt.Sprintf("decodable, words known at the latest %d symbols after their first", v.Delay)
	case v.Undecided:
		return fmt.Sprintf("undecided: more than %d pairs of places", maxPairs)
	}
	return "not decodable: " + v.witness()
}

// witness names the two data sequences.
func (v Verdict) witness() string {
	one, other := spellBits(v.One), spellBits(v.Other)
	if v.RepeatOne == 0 {
		return fmt.Sprintf("the data %s and %s give the same symbols", one, other)
	}
	return fmt.Sprintf("the data %s and %s, whose last %d and %d bits repeat for ever, give the same symbols", one, other, v.RepeatOne, v.RepeatOther)
}

func spellBits(bits []byte) string {
	const most = 80
	var b strings.Builder
	for i, bit := range bits {
		if len(bits) > most && i == most/2 {
			fmt.Fprintf(&b, "...(%d bits in all)...", len(bits))
		}
		if len(bits) <= most || i < most/2 || i >= len(bits)-most/2 {
			b.WriteByte('0' + bit)
		}
	}
	return b.String()
}

// Limits of the search, in pairs and in places.
const (
	maxPairs  = 2000000
	maxPlaces = 1 << 24
)

// Decodable decides whether the data can be told apart from the symbols, whatever the data, and how soon. It is decided
// when first asked for. It panics when the running cell is interrupted.
//
// The method follows all pairs of encoders that have read different data and given the same symbols (after A. Lempel and
// S. Even, who test finite-state machines for information losslessness so; S. Even, "On information lossless automata of
// finite order", IEEE Trans. Electron. Comput. EC-14 (1965) 561-569, from memory): data are lost if and only if two such
// encoders can come to the same state, or go on for ever.
func (c *Code) Decodable() Verdict {
	v, err := c.made().machine.decide(page.Context(), c.name)
	if err != nil {
		panic(err)
	}
	return *v
}

// decide returns the machine's verdict, deciding it if it has not been.
func (m *machine) decide(ctx context.Context, name string) (*Verdict, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if m.verdict != nil {
		return m.verdict, nil
	}
	p := &pairing{t: newTries(m), seen: make(map[pair]int32), maxPairs: maxPairs}
	v, err := p.decide(ctx)
	if err != nil {
		return nil, interrupted(ctx, "deciding whether data can be decoded from", name)
	}
	m.verdict = v
	return v, nil
}

// A pair is two places with the same symbols before them and different data, the smaller node first.
type pair struct{ a, b int32 }

func ordered(a, b int32) (p pair, swapped bool) {
	if a > b {
		return pair{b, a}, true
	}
	return pair{a, b}, false
}

// A pairing is a depth-first search through the pairs.
type pairing struct {
	t        *tries
	seen     map[pair]int32 // the longest way on, in symbols; open while that is being found
	maxPairs int
	path     []visit
}

const open = -1

// A visit is a pair on the path of the search with the pairs that can follow it.
type visit struct {
	pair    pair
	next    []pair
	longest int32
}

// decide returns an error only where it was interrupted.
func (p *pairing) decide(ctx context.Context) (*Verdict, error) {
	delay := int32(0)
	for s := range p.t.m.states {
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		p.t.root(s)
		if len(p.t.nodes) > maxPlaces {
			return &Verdict{Undecided: true}, nil
		}
	}
	// Data part within one state, between two words: at any place through which two words come.
	var places []place
	for node := int32(0); int(node) < len(p.t.nodes); node++ {
		n := p.t.nodes[node]
		if n.hi-n.lo < 2 {
			continue
		}
		delay = max(delay, n.depth)
		places = places[:0]
		if n.depth == 0 {
			places = p.t.enter(places, int(n.state), nil)
		} else {
			places = p.t.arrive(places, node)
		}
		for i, one := range places {
			for _, other := range places[:i] {
				v, longest, err := p.compare(ctx, int(n.state), one, other)
				if v != nil || err != nil {
					return v, err
				}
				delay = max(delay, n.depth+longest)
			}
		}
	}
	v, unseen, err := p.opening(ctx)
	if v != nil || err != nil {
		return v, err
	}
	delay = max(delay, unseen)
	return &Verdict{Decodable: true, Delay: int(delay)}, nil
}

// compare looks at two encoders that parted in a state. It returns the verdict if their data are lost or the limit is
// reached, and otherwise over how many symbols from here on they can agree.
func (p *pairing) compare(ctx context.Context, state int, one, other place) (v *Verdict, longest int32, err error) {
	if one.node == other.node {
		return p.witness(state, one, other, nil, -1), 0, nil
	}
	start, _ := ordered(one.node, other.node)
	last, cycle, err := p.search(ctx, start)
	switch {
	case err != nil:
		return nil, 0, err
	case last != nil:
		return p.witness(state, one, other, last, cycle), 0, nil
	case len(p.seen) > p.maxPairs:
		return &Verdict{Undecided: true}, 0, nil
	}
	return nil, p.seen[start], nil
}

// opening compares all data whose first symbols Encode leaves out, with the delay: nothing tells these apart but what
// follows. It returns as compare does, but over how many symbols in all data can agree.
func (p *pairing) opening(ctx context.Context) (v *Verdict, longest int32, err error) {
	m := p.t.m
	if m.delay == 0 {
		return nil, 0, nil
	}
	places := p.t.enter(nil, 0, nil)
	for range m.delay {
		var next []place
		taken := make(map[int32]place)
		for _, before := range places {
			for _, kid := range p.t.children(before.node) {
				for _, at := range p.t.arrive(nil, kid.node) {
					at.words = slices.Concat(before.words, at.words)
					if same, ok := taken[at.node]; ok {
						return p.witness(0, same, at, nil, -1), 0, nil
					}
					taken[at.node] = at
					next = append(next, at)
				}
			}
			if ctx.Err() != nil {
				return nil, 0, ctx.Err()
			}
			if len(next)*len(next)/2 > p.maxPairs {
				return &Verdict{Undecided: true}, 0, nil
			}
		}
		places = next
	}
	for i, one := range places {
		for _, other := range places[:i] {
			v, more, err := p.compare(ctx, 0, one, other)
			if v != nil || err != nil {
				return v, 0, err
			}
			longest = max(longest, int32(m.delay-p.parted(one.words, other.words))+more)
		}
	}
	return nil, longest, nil
}

// parted returns the number of symbols from the start before the word in which two data first differ.
func (p *pairing) parted(one, other []uint32) (symbols int) {
	s := 0
	for i := 0; i < min(len(one), len(other)) && one[i] == other[i]; i++ {
		to, out := p.t.m.step(s, int(one[i]))
		s, symbols = to, symbols+len(out)
	}
	return symbols
}

// search follows a pair to all that can come of it. Where data are lost it returns the places after the last pair of
// the path: those of a merger, with cycle -1, or those that come back to the pair at place cycle of the path.
func (p *pairing) search(ctx context.Context, start pair) (last *[2]place, cycle int, err error) {
	if _, ok := p.seen[start]; ok {
		return nil, 0, nil
	}
	if last := p.enter(start); last != nil {
		return last, -1, nil
	}
	for len(p.path) > 0 {
		at := &p.path[len(p.path)-1]
		if len(at.next) == 0 {
			p.seen[at.pair] = at.longest
			longest := at.longest
			if p.path = p.path[:len(p.path)-1]; len(p.path) > 0 {
				before := &p.path[len(p.path)-1]
				before.longest = max(before.longest, longest+1)
			}
			continue
		}
		next := at.next[0]
		at.next = at.next[1:]
		longest, ok := p.seen[next]
		switch {
		case !ok:
			if ctx.Err() != nil {
				return nil, 0, ctx.Err()
			}
			if len(p.seen) > p.maxPairs {
				return nil, 0, nil
			}
			if last := p.enter(next); last != nil {
				return last, -1, nil
			}
		case longest == open:
			var back [2]place
			p.follow(at.pair, func(one, other place) bool {
				back = [2]place{one, other}
				to, _ := ordered(one.node, other.node)
				return to != next
			})
			return &back, slices.IndexFunc(p.path, func(v visit) bool { return v.pair == next }), nil
		default:
			at.longest = max(at.longest, longest+1)
		}
	}
	return nil, 0, nil
}

// enter puts a pair on the path with all that can follow it. If that is a merger, it returns the places.
func (p *pairing) enter(at pair) (merger *[2]place) {
	v := visit{pair: at}
	p.follow(at, func(one, other place) bool {
		v.longest = 1
		if one.node == other.node {
			merger = &[2]place{one, other}
			return false
		}
		to, _ := ordered(one.node, other.node)
		v.next = append(v.next, to)
		return true
	})
	p.seen[at] = open
	p.path = append(p.path, v)
	return merger
}

// follow calls visit with the places to which one more equal symbol can lead a pair, as long as it returns true.
func (p *pairing) follow(at pair, visit func(one, other place) bool) {
	for _, kid := range p.t.children(at.a) {
		match := p.t.child(at.b, kid.symbol)
		if match < 0 {
			continue
		}
		ones := p.t.arrive(nil, kid.node)
		others := p.t.arrive(nil, match)
		for _, one := range ones {
			for _, other := range others {
				if !visit(one, other) {
					return
				}
			}
		}
	}
}

// witness spells the data of two encoders that part in a state to come to the places one and other, then follow the
// path of the search, and from its end come to last: together in one place, or back to the pair at place cycle.
func (p *pairing) witness(state int, one, other place, last *[2]place, cycle int) *Verdict {
	data := [2][]uint32{p.t.m.wordsTo(state), p.t.m.wordsTo(state)}
	var from [2]int // words before the cycle
	// Pairs hide which encoder is which: side[0] is that of the pair's first.
	side := [2]int{0, 1}
	move := func(one, other place) {
		data[side[0]] = append(data[side[0]], one.words...)
		data[side[1]] = append(data[side[1]], other.words...)
		if _, swapped := ordered(one.node, other.node); swapped {
			side[0], side[1] = side[1], side[0]
		}
	}
	move(one, other)
	walk := func(i int) {
		to := p.path[i+1].pair
		p.follow(p.path[i].pair, func(one, other place) bool {
			if reached, _ := ordered(one.node, other.node); reached != to {
				return true
			}
			move(one, other)
			return false
		})
	}
	sideBefore := side
	for i := range p.path {
		if i == cycle {
			from, sideBefore = [2]int{len(data[0]), len(data[1])}, side
		}
		if i+1 < len(p.path) {
			walk(i)
		}
	}
	if last != nil {
		move(last[0], last[1])
	}
	if cycle >= 0 && side != sideBefore {
		// The two have changed places; a second round brings each back to its own.
		for i := cycle; i+1 < len(p.path); i++ {
			walk(i)
		}
		move(last[0], last[1])
	}
	bits := p.t.m.bits
	v := &Verdict{One: appendBits(nil, data[0], bits), Other: appendBits(nil, data[1], bits)}
	if cycle >= 0 {
		v.RepeatOne, v.RepeatOther = (len(data[0])-from[0])*bits, (len(data[1])-from[1])*bits
	}
	return v
}
