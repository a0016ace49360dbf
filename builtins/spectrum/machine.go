package spectrum

import (
	"context"
	"fmt"
	"math"
	"slices"

	"linewright/builtins/internal/markov"
	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
)

// An edge is one step of a machine: with probability p from one state to the next, emitting the waveforms of word.
type edge struct {
	from, to int32
	p        float64
	word     []int32 // numbers of waveforms, in order of time
}

// A machine is a Markov chain whose edges emit waveforms, one a symbol.
type machine struct {
	states int
	start  []float64
	edges  []edge
}

// sort puts the edges in the order of the states that they leave.
func (m *machine) sort() {
	byState := func(a, b edge) int { return int(a.from - b.from) }
	if !slices.IsSortedFunc(m.edges, byState) {
		slices.SortStableFunc(m.edges, byState)
	}
}

// graph is the machine without its words, edges between the same states added up. The edges must be sorted.
func (m *machine) graph() *markov.Graph {
	type sum struct {
		from, to int32
		p        float64
	}
	var sums []sum
	at := make([]int32, m.states) // 1 + place in sums of the edge to a state
	first := int32(0)             // place of the first edge of the state at hand
	for i := range m.edges {
		e := &m.edges[i]
		if i > 0 && e.from != m.edges[i-1].from {
			first = int32(len(sums))
		}
		if k := at[e.to]; k > first {
			sums[k-1].p += e.p
			continue
		}
		sums = append(sums, sum{e.from, e.to, e.p})
		at[e.to] = int32(len(sums))
	}
	return markov.New(m.states, len(sums), func(i int) (from, to int, p float64) {
		return int(sums[i].from), int(sums[i].to), sums[i].p
	})
}

// A lexicon numbers the waveforms that symbols have: one a level, or one a pair of levels for a driver that looks at
// the level before.
type lexicon struct {
	drive  *pulse.Drive
	levels []float64
	many   map[float64]int32  // the numbers of all levels but the first few
	waves  map[[2]int32]int32 // by numbers of the levels before and now
	shapes []pulse.Shape
}

func newLexicon(d *pulse.Drive) *lexicon { return &lexicon{drive: d, waves: map[[2]int32]int32{}} }

// level numbers a level. Codes have few: a walk along them is faster than a hash, up to a point.
func (x *lexicon) level(a float64) int32 {
	const few = 16
	for i, b := range x.levels[:min(few, len(x.levels))] {
		if a == b {
			return int32(i)
		}
	}
	if len(x.levels) >= few {
		if n, ok := x.many[a]; ok {
			return n
		}
		if x.many == nil {
			x.many = map[float64]int32{}
		}
		x.many[a] = int32(len(x.levels))
	}
	x.levels = append(x.levels, a)
	return int32(len(x.levels) - 1)
}

// wave numbers the waveform of level next after level prev.
func (x *lexicon) wave(prev, next int32) (int32, error) {
	k := [2]int32{prev, next}
	if n, ok := x.waves[k]; ok {
		return n, nil
	}
	s, err := x.drive.Symbol(x.levels[prev], x.levels[next])
	if err != nil {
		return 0, fmt.Errorf("spectrum: %w", err)
	}
	n := int32(len(x.shapes))
	x.waves[k] = n
	x.shapes = append(x.shapes, s)
	return n, nil
}

// read translates a chain's levels to waveforms and sorts its edges by the state that they leave. It returns the lexicon
// beside the machine; unless the driver looks at the level before, waveforms have the numbers of their levels.
func read(ctx context.Context, ch *linecode.Chain, d *pulse.Drive) (*machine, *lexicon, error) {
	x := newLexicon(d)
	if d.Transitional() {
		m, err := x.remember(ctx, ch)
		return m, x, err
	}
	symbols := 0
	for i := range ch.Edges {
		symbols += len(ch.Edges[i].Levels)
	}
	m := &machine{states: ch.States, start: start(ch), edges: make([]edge, 0, len(ch.Edges))}
	words := make([]int32, 0, symbols)
	number := int32(0)
	for i := range ch.Edges {
		if i%4096 == 0 && ctx.Err() != nil {
			return nil, nil, context.Cause(ctx)
		}
		e := &ch.Edges[i]
		if e.P == 0 {
			continue
		}
		from := len(words)
		for k, a := range e.Levels {
			if k == 0 || a != e.Levels[k-1] {
				number = x.level(a)
			}
			words = append(words, number)
		}
		m.edges = append(m.edges, edge{int32(e.From), int32(e.To), e.P, words[from:len(words):len(words)]})
	}
	m.sort()
	return m, x, x.wavesOfLevels()
}

// wavesOfLevels gives each level's waveform the number of the level, for drivers that do not look at the level before.
func (x *lexicon) wavesOfLevels() error {
	for i := range x.levels {
		if _, err := x.wave(int32(i), int32(i)); err != nil {
			return err
		}
	}
	return nil
}

// follow gives the waveforms of symbols, numbers of levels, that come again and again: the last is before the first.
func (x *lexicon) follow(ctx context.Context, symbols []int32) ([]int32, error) {
	if !x.drive.Transitional() {
		return symbols, x.wavesOfLevels()
	}
	waves := make([]int32, len(symbols))
	prev := symbols[len(symbols)-1]
	for n, next := range symbols {
		if n%(1<<16) == 0 && ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		w, err := x.wave(prev, next)
		if err != nil {
			return nil, err
		}
		waves[n], prev = w, next
	}
	return waves, nil
}

// remember is read for a driver that looks at the level before: the level joins the state. Before the first symbol it
// is 0.
func (x *lexicon) remember(ctx context.Context, ch *linecode.Chain) (*machine, error) {
	out := make([][]int32, ch.States) // edges by the state that they leave
	for i, e := range ch.Edges {
		if e.P > 0 {
			out[e.From] = append(out[e.From], int32(i))
		}
	}
	type pair struct{ state, level int32 }
	number := map[pair]int32{}
	var queue []pair
	visit := func(p pair) int32 {
		n, ok := number[p]
		if !ok {
			n = int32(len(queue))
			number[p] = n
			queue = append(queue, p)
		}
		return n
	}
	m := &machine{}
	rest := x.level(0)
	for s, p := range start(ch) {
		if p > 0 {
			visit(pair{int32(s), rest})
			m.start = append(m.start, p)
		}
	}
	for n := 0; n < len(queue); n++ {
		if n%1024 == 0 && ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		for _, i := range out[queue[n].state] {
			e := &ch.Edges[i]
			prev := queue[n].level
			word := make([]int32, len(e.Levels))
			for k, a := range e.Levels {
				next := x.level(a)
				w, err := x.wave(prev, next)
				if err != nil {
					return nil, err
				}
				word[k], prev = w, next
			}
			m.edges = append(m.edges, edge{int32(n), visit(pair{int32(e.To), prev}), e.P, word})
		}
	}
	m.states = len(queue)
	for len(m.start) < m.states {
		m.start = append(m.start, 0)
	}
	return m, nil
}

func start(ch *linecode.Chain) []float64 {
	if ch.Start != nil {
		return ch.Start
	}
	s := make([]float64, ch.States)
	s[0] = 1
	return s
}

// check says what is wrong with a chain.
func check(ch *linecode.Chain) error {
	const slack = 1e-9
	if ch.States < 1 {
		return fmt.Errorf("spectrum: chain %q has %d states; it needs at least 1", ch.Name, ch.States)
	}
	if ch.Start != nil {
		sum := 0.0
		for s, p := range ch.Start {
			if !(p >= 0 && p <= 1+slack) {
				return fmt.Errorf("spectrum: chain %q starts in state %d with probability %v; it must lie between 0 and 1", ch.Name, s, p)
			}
			sum += p
		}
		if len(ch.Start) != ch.States || math.Abs(sum-1) > slack {
			return fmt.Errorf("spectrum: chain %q has %d start probabilities with sum %v; it needs one for each of %d states, with sum 1", ch.Name, len(ch.Start), sum, ch.States)
		}
	}
	leaves := make([]float64, ch.States)
	for i := range ch.Edges {
		e := &ch.Edges[i]
		if e.From < 0 || e.From >= ch.States || e.To < 0 || e.To >= ch.States {
			return fmt.Errorf("spectrum: chain %q: edge %d goes from state %d to %d; states are 0 to %d", ch.Name, i, e.From, e.To, ch.States-1)
		}
		if !(e.P >= 0 && e.P <= 1+slack) {
			return fmt.Errorf("spectrum: chain %q: edge %d has probability %v; it must lie between 0 and 1", ch.Name, i, e.P)
		}
		leaves[e.From] += e.P
		for _, a := range e.Levels {
			if a-a != 0 { // NaN and infinities
				return fmt.Errorf("spectrum: chain %q: edge %d emits level %v; levels are finite numbers", ch.Name, i, a)
			}
		}
	}
	for s, sum := range leaves {
		if math.Abs(sum-1) > slack {
			return fmt.Errorf("spectrum: chain %q: the probabilities that leave state %d add up to %v; they must add up to 1", ch.Name, s, sum)
		}
	}
	return nil
}
