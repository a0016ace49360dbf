package linecode

import (
	"fmt"

	"linewright/builtins/page"
)

// Encode returns the symbols that carry the bits, one bit a byte, from the start of the code. Of a code with a delay
// line the first [Code.Delay] symbols are left out and those still owed at the end are appended, so that HDB3 answers
// one symbol a bit, in place. Bits that do not fill a word are an error that says how many are over.
func (c *Code) Encode(bits []byte) ([]float64, error) {
	if c == nil {
		return nil, errNil
	}
	m := c.machine
	ctx := page.Context()
	if over := len(bits) % m.bits; over != 0 {
		return nil, fmt.Errorf("linecode: %s takes %d bits a word, and %d of the %d bits are over; leave them out or fill the word with %d more",
			c.name, m.bits, over, len(bits), m.bits-over)
	}
	var levels []float64
	state, words := 0, 0
	for i := 0; i < len(bits); i += m.bits {
		if words&(1<<16-1) == 0 && ctx.Err() != nil {
			return nil, interrupted(ctx, "encoding", c.name)
		}
		words++
		word := 0
		for k, b := range bits[i : i+m.bits] {
			if b > 1 {
				return nil, fmt.Errorf("linecode: %s got %d at position %d; a bit is 0 or 1, one a byte", c.name, b, i+k)
			}
			word = word<<1 | int(b)
		}
		step := state<<m.bits | word
		levels = append(levels, m.outputs.levelsOf(m.output[step])...)
		state = int(m.next[step])
	}
	if m.flush != nil {
		levels = append(levels, m.outputs.levelsOf(m.flush[state])...)
	}
	return levels[min(m.delay, len(levels)):], nil
}
