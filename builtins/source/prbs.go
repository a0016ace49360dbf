package source

import (
	"context"
	"fmt"
	"slices"
	"strconv"
	"strings"

	"linewright/builtins/page"
)

// A Sequence is a pseudo-random binary sequence of greatest period, from a shift register with linear feedback.
type Sequence struct {
	order    int
	tap      int
	inverted bool
}

// The sequences that [PRBS] knows: bit n is the sum modulo 2 of bits n-tap and n-order, that is, the polynomial
// x^order + x^tap + 1. Orders 9 to 31 with their inversions are those of ITU-T O.150 (05/96), clause 5 (from memory;
// the feedback of order 23 as quoted in IEEE 802.3ae correspondence was seen). Order 7 is common practice.
var sequences = []Sequence{
	{7, 6, false}, {9, 5, false}, {11, 9, false}, {15, 14, true}, {20, 3, false}, {23, 18, true}, {29, 27, true}, {31, 28, true},
}

// PRBS returns the test sequence of period 2^order - 1: orders 9, 11, 15, 20, 23, 29 and 31 of ITU-T O.150, and order 7
// (x^7 + x^6 + 1) of common practice. As the recommendation says, orders 15, 23, 29 and 31 are inverted: their longest
// run is one of zeros. It panics on any other order.
func PRBS(order int) *Sequence {
	i := slices.IndexFunc(sequences, func(s Sequence) bool { return s.order == order })
	if i < 0 {
		var known []string
		for _, s := range sequences {
			known = append(known, strconv.Itoa(s.order))
		}
		panic(fmt.Errorf("source: PRBS(%d) is not known; the orders are %s", order, strings.Join(known, ", ")))
	}
	s := sequences[i]
	return &s
}

// Period returns the number of bits after which the sequence repeats, 2^order - 1.
func (s *Sequence) Period() int { return 1<<s.order - 1 }

// Bits returns the first n bits of the sequence, one a byte, from a register of all ones. It panics if n is below 0,
// and when the running cell is interrupted.
func (s *Sequence) Bits(n int) []byte {
	mustBeCount("PRBS", n)
	ctx := page.Context()
	register := uint32(1<<s.order - 1) // the oldest bit, the next to leave, in the most significant place
	bits := make([]byte, n)
	for i := range bits {
		if i%blockOfBits == 0 && ctx.Err() != nil {
			panic(fmt.Errorf("source: interrupted after %d of %d bits: %w", i, n, context.Cause(ctx)))
		}
		out := register >> (s.order - 1) & 1
		// The bit that follows the register's newest: of the bits order and tap places before it.
		feedback := out ^ register>>(s.tap-1)&1
		register = register<<1 | feedback
		bits[i] = byte(out)
		if s.inverted {
			bits[i] ^= 1
		}
	}
	return bits
}

// String returns a label such as "PRBS of order 7".
func (s *Sequence) String() string { return fmt.Sprintf("PRBS of order %d", s.order) }
