package linecode

// The encoders behind the catalogue's definitions, as Specs without a name.

// memoryless sends each word as its own symbols, whatever came before; words is in the order of their values.
func memoryless(bits int, words ...[]float64) Spec {
	return Spec{Bits: bits, Step: func(_ any, w uint) (any, []float64) { return nil, words[w] }}
}

// returnToZero sends k symbols of the level and then n-k of zero: +1 for a 1, zero for a 0.
func returnToZero(zero float64, k, n int) Spec {
	pulse := func(level float64) []float64 {
		symbols := make([]float64, n)
		for i := range k {
			symbols[i] = level
		}
		return symbols
	}
	return memoryless(1, pulse(zero), pulse(1))
}

// differential changes the level for the bit toggle. The state is the level.
func differential(toggle uint) Spec {
	return Spec{Bits: 1, Start: -1.0, Step: func(s any, bit uint) (any, []float64) {
		level := s.(float64)
		if bit == toggle {
			level = -level
		}
		return level, []float64{level}
	}}
}

// alternating sends the bit mark as +1 and -1 by turns. The state is the next mark's level.
func alternating(mark uint) Spec {
	return Spec{Bits: 1, Start: 1.0, Step: func(s any, bit uint) (any, []float64) {
		level := s.(float64)
		if bit != mark {
			return level, []float64{0}
		}
		return -level, []float64{level}
	}}
}

// biphaseMarked changes the level at the start of every bit, and in the middle of the bit toggle. The state is the
// level.
func biphaseMarked(toggle uint) Spec {
	return Spec{Bits: 1, Start: -1.0, Step: func(s any, bit uint) (any, []float64) {
		first := -s.(float64)
		second := first
		if bit == toggle {
			second = -first
		}
		return second, []float64{first, second}
	}}
}

func delayModulation() Spec {
	type state struct {
		level float64
		last  uint // bit
	}
	return Spec{Bits: 1, Start: state{-1, 1}, Step: func(s any, bit uint) (any, []float64) {
		first := s.(state).level
		if bit == 0 && s.(state).last == 0 {
			first = -first
		}
		second := first
		if bit == 1 {
			second = -first
		}
		return state{second, bit}, []float64{first, second}
	}}
}

// codedMarkInversion has the next 1's level as its state.
func codedMarkInversion() Spec {
	return Spec{Bits: 1, Start: -1.0, Step: func(s any, bit uint) (any, []float64) {
		level := s.(float64)
		if bit == 0 {
			return level, []float64{-1, 1}
		}
		return -level, []float64{level, level}
	}}
}

// hdb3 looks ahead through a line of three symbols, in which the zeros that a fourth would replace still wait.
func hdb3() Spec {
	type state struct {
		line  [3]float64 // the oldest, the next to leave, first
		zeros int        // of the data, at the end of the line
		mark  float64    // level of the newest mark; -1 before the first
		odd   bool       // an odd number of marks since the last violation
	}
	return Spec{
		Bits:  1,
		Start: state{mark: -1},
		Delay: 3,
		Step: func(v any, bit uint) (any, []float64) {
			s := v.(state)
			line := [4]float64{s.line[0], s.line[1], s.line[2], 0}
			switch {
			case bit == 1:
				s.mark = -s.mark
				s.odd = !s.odd
				s.zeros = 0
				line[3] = s.mark
			case s.zeros < 3:
				s.zeros++
			case s.odd: // 000V
				line[3] = s.mark
				s.zeros, s.odd = 0, false
			default: // B00V
				s.mark = -s.mark
				line[0], line[3] = s.mark, s.mark
				s.zeros, s.odd = 0, false
			}
			s.line = [3]float64(line[1:])
			return s, line[:1]
		},
		Flush: func(v any) []float64 {
			line := v.(state).line
			return line[:]
		},
	}
}

// multiLevelTransmit has the place in the cycle as its state.
func multiLevelTransmit() Spec {
	cycle := [4]float64{0, 1, 0, -1}
	return Spec{Bits: 1, Start: 0, Step: func(s any, bit uint) (any, []float64) {
		place := (s.(int) + int(bit)) % 4
		return place, []float64{cycle[place]}
	}}
}

// stuffing inserts a 0 after every run of ones 1s, into polar NRZ, or into NRZ-S, which changes the level for a 0.
func stuffing(ones int, nrzs bool) Spec {
	type state struct {
		run   int // of 1s so far
		level float64
	}
	start := state{0, 1}
	if nrzs {
		start.level = -1
	}
	return Spec{Bits: 1, Start: start, Step: func(v any, bit uint) (any, []float64) {
		s := v.(state)
		send := func(bit uint) float64 {
			if !nrzs {
				return 2*float64(bit) - 1
			}
			if bit == 0 {
				s.level = -s.level
			}
			return s.level
		}
		symbols := []float64{send(bit)}
		s.run++
		if bit == 0 {
			s.run = 0
		}
		if s.run == ones {
			symbols = append(symbols, send(0))
			s.run = 0
		}
		return s, symbols
	}}
}

// table4B5B has the code groups of the data symbols 0 to F, the first bit in time most significant.
var table4B5B = [16]uint{
	0b11110, 0b01001, 0b10100, 0b10101, 0b01010, 0b01011, 0b01110, 0b01111,
	0b10010, 0b10011, 0b10110, 0b10111, 0b11010, 0b11011, 0b11100, 0b11101,
}

// code4B5B sends the code groups as NRZ-M. The state is the level.
func code4B5B() Spec {
	return Spec{Bits: 4, Start: -1.0, Step: func(s any, word uint) (any, []float64) {
		level := s.(float64)
		symbols := make([]float64, 5)
		for i := range symbols {
			if table4B5B[word]>>(4-i)&1 == 1 {
				level = -level
			}
			symbols[i] = level
		}
		return level, symbols
	}}
}

// table5b6b has the sub-blocks abcdei of D0 to D31 at negative running disparity, a most significant.
var table5b6b = [32]uint{
	0b100111, 0b011101, 0b101101, 0b110001, 0b110101, 0b101001, 0b011001, 0b111000,
	0b111001, 0b100101, 0b010101, 0b110100, 0b001101, 0b101100, 0b011100, 0b010111,
	0b011011, 0b100011, 0b010011, 0b110010, 0b001011, 0b101010, 0b011010, 0b111010,
	0b110011, 0b100110, 0b010110, 0b110110, 0b001110, 0b101110, 0b011110, 0b101011,
}

// table3b4b has the sub-blocks fghj of .0 to .7 at negative running disparity, f most significant. The last is the
// primary form; the alternate one, 0111, avoids runs of five across the sub-blocks.
var table3b4b = [8]uint{0b1011, 0b1001, 0b0101, 0b1100, 0b1101, 0b1010, 0b0110, 0b1110}

// code8b10b has the running disparity as its state, -1 or +1.
func code8b10b() Spec {
	return Spec{Bits: 8, Start: -1, Step: func(s any, octet uint) (any, []float64) {
		disparity := s.(int)
		x, y := octet&31, octet>>5
		six := table5b6b[x]
		six, disparity = balance(six, 6, disparity, x == 7)
		four := table3b4b[y]
		// The alternate .7 stands where the primary one would make a run of five: after e and i alike, of D17, D18 and D20
		// at negative and of D11, D13 and D14 at positive disparity.
		if y == 7 && (disparity < 0 && (x == 17 || x == 18 || x == 20) || disparity > 0 && (x == 11 || x == 13 || x == 14)) {
			four = 0b0111
		}
		four, disparity = balance(four, 4, disparity, y == 3)
		symbols := make([]float64, 0, 10)
		for i := 5; i >= 0; i-- {
			symbols = append(symbols, 2*float64(six>>i&1)-1)
		}
		for i := 3; i >= 0; i-- {
			symbols = append(symbols, 2*float64(four>>i&1)-1)
		}
		return disparity, symbols
	}}
}

// balance returns a sub-block for the running disparity, and the disparity after it. A sub-block with more 1s than 0s
// turns over, and so do the two balanced ones that alternate: D7 and .3.
func balance(block uint, n, disparity int, alternate bool) (uint, int) {
	ones := 0
	for i := range n {
		ones += int(block >> i & 1)
	}
	if 2*ones == n && !alternate {
		return block, disparity
	}
	after := disparity
	if 2*ones != n {
		after = -disparity
	}
	if disparity > 0 {
		block ^= 1<<n - 1
	}
	return block, after
}
