package linecode

import (
	"context"
	"fmt"

	"linewright/builtins/internal/markov"
	"linewright/builtins/page"
)

// mostWords is how far data that repeat are followed until the encoder repeats with them: less than a second.
const mostWords = 1 << 26

// Cycle returns the symbols that come again and again of a code whose data repeat ([source.Repeating]), one period of
// them, as places in [Code.Levels]; nil for other data. Those that the encoder emits before it comes to them are left out.
//
// It is an error if the period has more than the given number of symbols, which is found before any are stored, if
// it does not show within 2^26 words, and if the running cell is interrupted.
func (c *Code) Cycle(most int) ([]int32, error) {
	if c == nil {
		return nil, errNil
	}
	if c.data.Pattern() == nil {
		return nil, nil
	}
	ctx := page.Context()
	state, laps, length, err := c.cycle(ctx)
	if err != nil {
		return nil, err
	}
	if length > most {
		return nil, fmt.Errorf("linecode: the symbols of %s repeat after %d only; the limit is %d; take a shorter pattern", c.Label(), length, most)
	}
	symbols := make([]int32, 0, length)
	for range laps {
		if state, err = c.lap(ctx, state, func(out []int32) { symbols = append(symbols, out...) }); err != nil {
			return nil, err
		}
	}
	return symbols, nil
}

// cycle finds the state in which the period begins, and the laps and symbols that it has. A period begins where the
// encoder begins a lap in a state in which it began one before.
func (c *Code) cycle(ctx context.Context) (state, laps, symbols int, err error) {
	var before []int                         // the symbols before each lap
	began := make([]int32, c.machine.states) // 1 + the lap that began in a state, 0 if none did
	for began[state] == 0 {
		if (len(before)+1)*c.lapWords() > mostWords {
			return 0, 0, 0, fmt.Errorf("linecode: the symbols of %s do not repeat within %d words; take a shorter pattern", c.Label(), mostWords)
		}
		before = append(before, symbols)
		began[state] = int32(len(before))
		if state, err = c.lap(ctx, state, func(out []int32) { symbols += len(out) }); err != nil {
			return 0, 0, 0, err
		}
	}
	first := int(began[state]) - 1
	return state, len(before) - first, symbols - before[first], nil
}

// lapWords is the number of words of a lap: the pattern, as often as it takes to end with a word.
func (c *Code) lapWords() int {
	n := len(c.data.Pattern())
	return n / markov.GCD(n, c.machine.bits)
}

// lap encodes one lap from a state and returns the state after it.
func (c *Code) lap(ctx context.Context, state int, emit func(out []int32)) (int, error) {
	m, pattern := c.machine, c.data.Pattern()
	at := 0
	for i := range c.lapWords() {
		if i&(1<<16-1) == 0 && ctx.Err() != nil {
			return 0, interrupted(ctx, "repeating the data of", c.name)
		}
		word := 0
		for range m.bits {
			word = word<<1 | int(pattern[at])
			if at++; at == len(pattern) {
				at = 0
			}
		}
		var out []int32
		state, out = m.step(state, word)
		emit(out)
	}
	return state, nil
}
