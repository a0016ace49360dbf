package linecode

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"

	"linewright/builtins/page"
)

// Decode returns the bits that symbols as [Code.Encode] gives them determine, one a byte, and the positions of the
// faults: the first symbol at which nothing that the code permits continues, and after resuming there the next, and so
// on. Symbols are levels exactly as [Code.Levels] has them: decide what was received before it is decoded. A value that
// is no level is a fault.
//
// The bits are all that were encoded if the symbols end where Encode ends them. Of every code, with a Flush or without,
// data that end exactly with the symbols count as complete, even if the symbols were cut there and other data that go on
// give them too. If none end there, the bits are those in which all data agree that give these symbols, which is short by
// no more than the delay of [Code.Decodable].
//
// At a fault the bits go on in place. Those that belong before it are of data that give the symbols before it, of the
// kind that most such data share; those after it are of data that give the symbols from it on, from any state that the
// code can be in after so many symbols, if possible the same. So a code of fixed rate answers with as many bits as were
// sent, whatever the faults, as long as no symbol is lost or gained.
//
// Decode refuses with an error a code that is not decodable, naming two data sequences with the same symbols, and
// symbols that are NaN.
func (c *Code) Decode(symbols []float64) (bits []byte, faults []int, err error) {
	if c == nil {
		return nil, nil, errNil
	}
	ctx := page.Context()
	for i, a := range symbols {
		if math.IsNaN(a) {
			return nil, nil, fmt.Errorf("linecode: Decode got NaN at position %d; symbols are the levels of %s, as Levels lists them", i, c.name)
		}
	}
	verdict, err := c.machine.decide(ctx, c.name)
	if err != nil {
		return nil, nil, err
	}
	if !verdict.Decodable && !verdict.Undecided {
		return nil, nil, fmt.Errorf("linecode: %s cannot be decoded: %s", c.name, verdict.witness())
	}
	d := newDecoding(ctx, c.machine, symbols)
	err = d.run()
	switch {
	case err == nil:
		return d.bits, d.faults, nil
	case ctx.Err() != nil:
		return nil, nil, interrupted(ctx, "decoding", c.name)
	}
	return nil, nil, fmt.Errorf("linecode: %s cannot be decoded: %w", c.name, err)
}

// A decoding is the work of one call of Decode. It counts symbols as the encoder emits them: the first delay of these
// were left out by Encode, and are matched by anything.
type decoding struct {
	ctx     context.Context
	m       *machine
	t       *tries
	a       *survivors
	symbols []float64
	resume  *resumption // nil before the first fault
	owed    []int       // the numbers of symbols that states may owe at the end

	bits   []byte // of earlier segments
	faults []int

	// The segment since the start or the last fault.
	begin   int     // encoder symbols before it
	first   []place // where the encoder can be at its begin, with the words that belong to each place
	set     int32   // where the encoder can be now
	history []int32 // the moves from there to here
	maxSize int     // places that the automaton may hold before it is made anew
}

// maxSurvivors bounds the memory of a decoding, to about 200 MB.
const maxSurvivors = 1 << 23

func newDecoding(ctx context.Context, m *machine, symbols []float64) *decoding {
	t := newTries(m)
	d := &decoding{ctx: ctx, m: m, t: t, a: newSurvivors(t), symbols: symbols, owed: m.flushLengths(), bits: []byte{}, faults: []int{}, maxSize: maxSurvivors}
	d.start(0, t.enter(nil, 0, nil))
	return d
}

// start begins a segment after so many encoder symbols.
func (d *decoding) start(begin int, first []place) {
	nodes := make([]int32, len(first))
	for i, p := range first {
		nodes[i] = p.node
	}
	d.begin, d.first, d.set, d.history = begin, first, d.a.set(nodes), d.history[:0]
}

// run decodes the symbols.
func (d *decoding) run() error {
	if err := d.skip(d.m.delay); err != nil {
		return err
	}
	for i, level := range d.symbols {
		if i&(1<<14-1) == 0 && d.ctx.Err() != nil {
			return d.ctx.Err()
		}
		symbol := int32(d.m.symbol(level))
		ok, err := d.read(symbol)
		if err != nil {
			return err
		}
		if ok {
			continue
		}
		if ended := d.flushed(); ended != nil { // these are the symbols owed at the end
			return d.end(ended)
		}
		if err := d.fault(i, symbol); err != nil {
			return err
		}
	}
	if ended := d.flushed(); ended != nil {
		return d.end(ended)
	}
	return d.end(d.unfinished())
}

// end takes the bits in which the survivors agree as the last.
func (d *decoding) end(survivors []survivor) error {
	bits, err := d.agreed(survivors)
	d.bits = append(d.bits, bits...)
	return err
}

// skip reads n symbols that may be anything.
func (d *decoding) skip(n int) error {
	for range n {
		if _, err := d.step(wildcard); err != nil {
			return err
		}
	}
	return nil
}

// read reads a symbol and reports whether anything continues with it. A symbol below zero is no level.
func (d *decoding) read(symbol int32) (bool, error) {
	if symbol < 0 {
		return false, nil
	}
	return d.step(symbol)
}

// errMerged is found where decodability was left undecided.
var errMerged = errors.New("two data sequences give the symbols so far and lead to the same state")

func (d *decoding) step(symbol int32) (bool, error) {
	number, err := d.a.move(d.ctx, d.set, symbol)
	if err != nil || number == none {
		return false, err
	}
	if d.resume == nil && d.a.moves[number].merged {
		return false, errMerged
	}
	d.history = append(d.history, number)
	d.set = d.a.moves[number].to
	if d.a.size > d.maxSize {
		return true, d.renew()
	}
	return true, nil
}

// fault notes that symbol i, whose place in the alphabet is given, continues nothing, and resumes there: bits go on in
// place from the encoder's symbol i on, and the delay line is unknown again.
func (d *decoding) fault(i int, symbol int32) error {
	d.faults = append(d.faults, i)
	now := d.likeliest(i - d.begin)
	d.bits = append(d.bits, d.data(now)...)
	if d.resume == nil {
		d.resume = newResumption(d.t)
	}
	d.start(i, ahead(d.resume.places(i), d.nodeOf(now)))
	if err := d.skip(d.m.delay); err != nil {
		return err
	}
	ok, err := d.read(symbol)
	if err != nil || ok {
		return err
	}
	return d.skip(1) // no state continues with it: take it as unread
}

// likeliest returns the place after k symbols of the segment through which most survivors have come, the first of several.
func (d *decoding) likeliest(k int) survivor {
	votes := make(map[int32]int)
	best := survivor{k: k, at: -1}
	for at := range d.a.sets[d.set] {
		s := survivor{k: len(d.history), at: int32(at)}
		for s.k > k {
			s, _ = d.back(s)
		}
		votes[s.at]++
		if best.at < 0 || votes[s.at] > votes[best.at] || votes[s.at] == votes[best.at] && s.at < best.at {
			best = s
		}
	}
	return best
}

// ahead returns the places with the one at a node, if it is among them, before the others.
func ahead(places []place, node int32) []place {
	i := slices.IndexFunc(places, func(p place) bool { return p.node == node })
	if i <= 0 {
		return places
	}
	moved := append([]place{places[i]}, places[:i]...)
	return append(moved, places[i+1:]...)
}

// renew makes the automaton anew when it has become too large, from the last place that all survivors have come
// through, if that is far enough from the segment's begin to be clear of symbols that were taken as unread.
func (d *decoding) renew() error {
	size := len(d.history)
	ways := make([]survivor, len(d.a.sets[d.set]))
	for i := range ways {
		ways[i] = survivor{k: size, at: int32(i)}
	}
	for len(ways) > 1 || ways[0].k > size-d.m.delay {
		if ways[0].k <= d.m.delay+1 {
			d.maxSize *= 2
			return nil
		}
		for i := range ways {
			ways[i], _ = d.back(ways[i])
		}
		slices.SortFunc(ways, func(a, b survivor) int { return int(a.at - b.at) })
		ways = slices.CompactFunc(ways, func(a, b survivor) bool { return a.at == b.at })
	}
	common := ways[0]
	d.bits = append(d.bits, d.data(common)...)
	node := d.nodeOf(common)
	end := d.begin + size
	d.a = newSurvivors(d.t)
	d.start(d.begin+common.k, []place{{node: node}})
	for n := d.begin; n < end; n++ {
		symbol := int32(wildcard)
		if n >= d.m.delay {
			symbol = int32(d.m.symbol(d.symbols[n-d.m.delay]))
		}
		number, err := d.a.move(d.ctx, d.set, symbol)
		if err != nil {
			return err
		}
		d.history = append(d.history, number)
		d.set = d.a.moves[number].to
	}
	return nil
}
