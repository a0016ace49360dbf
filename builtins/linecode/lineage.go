package linecode

import "slices"

// A survivor is one of the places at which the encoder can be after k symbols of the decoding's segment: the at-th of
// its set. It stands for the data that lead there.
type survivor struct {
	k    int
	at   int32
	rest []byte // further bits that are known, of a word whose symbols have not all come
}

// back returns where a survivor was one symbol earlier, and what refers to the words read since.
func (d *decoding) back(s survivor) (survivor, int32) {
	m := &d.a.moves[d.history[s.k-1]]
	return survivor{k: s.k - 1, at: m.from[s.at]}, m.words[s.at]
}

// nodesAt returns the nodes at which the encoder can be after k symbols of the segment.
func (d *decoding) nodesAt(k int) []int32 {
	if k == len(d.history) {
		return d.a.sets[d.set]
	}
	if k == 0 {
		nodes := make([]int32, len(d.first))
		for i, p := range d.first {
			nodes[i] = p.node
		}
		return nodes
	}
	return d.a.sets[d.a.moves[d.history[k-1]].to]
}

// nodeOf returns the node at which a survivor is.
func (d *decoding) nodeOf(s survivor) int32 { return d.nodesAt(s.k)[s.at] }

// data returns the bits of the segment that lead to a survivor.
func (d *decoding) data(s survivor) []byte {
	rest := s.rest
	var words []uint32 // the last first
	for s.k > 0 {
		var reference int32
		s, reference = d.back(s)
		words = d.a.appendReversed(words, reference)
	}
	slices.Reverse(words)
	bits := appendBits(nil, d.first[s.at].words, d.m.bits)
	return append(appendBits(bits, words, d.m.bits), rest...)
}

// flushed returns the survivors that end where the received symbols end, once their state has sent what it owes: nil if
// there are none.
func (d *decoding) flushed() []survivor {
	var ended []survivor
	total := len(d.symbols) + d.m.delay // of the encoder, if the data end here
	for _, owed := range d.owed {
		k := total - owed - d.begin
		if k < 0 || k > len(d.history) {
			continue
		}
		for at, node := range d.nodesAt(k) {
			n := &d.t.nodes[node]
			if n.depth == 0 && d.owes(int(n.state), owed) {
				ended = append(ended, survivor{k: k, at: int32(at)})
			}
		}
	}
	return ended
}

// owes reports whether state s owes exactly the last symbols received, as many as given.
func (d *decoding) owes(s, symbols int) bool {
	flush := d.m.flushed(s)
	if len(flush) != symbols {
		return false
	}
	for j, symbol := range flush {
		i := len(d.symbols) - symbols + j
		if i >= 0 && d.symbols[i] != d.m.levels[symbol] { // those before the first were left out with the delay
			return false
		}
	}
	return true
}

// unfinished returns the survivors after all symbols, with what is known of the words they are in.
func (d *decoding) unfinished() []survivor {
	all := make([]survivor, len(d.a.sets[d.set]))
	for at, node := range d.a.sets[d.set] {
		all[at] = survivor{k: len(d.history), at: int32(at)}
		if d.t.nodes[node].depth > 0 {
			all[at].rest = d.t.commonBits(node)
		}
	}
	return all
}

// agreed returns the bits of the segment in which survivors agree. After a fault the state in which the segment began is
// unknown; then the first survivor's is taken, and those that began in another have no say.
func (d *decoding) agreed(survivors []survivor) ([]byte, error) {
	bits := d.data(survivors[0])
	common := len(bits)
	for _, other := range survivors[1:] {
		if d.ctx.Err() != nil {
			return nil, d.ctx.Err()
		}
		common = min(common, d.agreement(survivors[0], bits, other))
	}
	return bits[:common], nil
}

// agreement returns the number of bits in which the data of a survivor, given, and those of another agree. Both go back
// together until they meet.
func (d *decoding) agreement(one survivor, bits []byte, other survivor) int {
	same := len(bits) - len(one.rest) // bits before one
	rest := other.rest
	var words []uint32 // since other, the last first
	for one.k != other.k || one.at != other.at {
		switch {
		case one.k > 0 && one.k >= other.k:
			var reference int32
			one, reference = d.back(one)
			same -= d.m.bits * len(d.a.appendReversed(nil, reference))
		case other.k > 0:
			var reference int32
			other, reference = d.back(other)
			words = d.a.appendReversed(words, reference)
		case d.resume != nil:
			return len(bits)
		default:
			same -= d.m.bits * len(d.first[one.at].words)
			for _, w := range slices.Backward(d.first[other.at].words) {
				words = append(words, w)
			}
			one.at = other.at
		}
	}
	slices.Reverse(words)
	tail := append(appendBits(nil, words, d.m.bits), rest...)
	for _, b := range tail {
		if same == len(bits) || bits[same] != b {
			break
		}
		same++
	}
	return same
}
