package linecode

import (
	"slices"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// sent returns what the encoder sends for bits, its delay line left as it is, with the place at which each word starts.
func sent(m *machine, bits []byte) (symbols []int32, starts []int) {
	state := 0
	for i := 0; i+m.bits <= len(bits); i += m.bits {
		w := 0
		for _, b := range bits[i : i+m.bits] {
			w = w<<1 | int(b)
		}
		starts = append(starts, len(symbols))
		to, out := m.step(state, w)
		symbols = append(symbols, out...)
		state = to
	}
	return symbols, starts
}

// agreements compares all data of so many words two by two: for those that differ, over how many symbols they agree
// from the start of the word in which they differ. It returns the most, and whether two data that differ before their
// last word ever give symbols of which one begins the other, so that no end is in sight.
func agreements(m *machine, words int) (most int, endless bool) {
	n := words * m.bits
	type run struct {
		bits    []byte
		symbols []int32
		starts  []int
	}
	all := make([]run, 1<<n)
	for x := range all {
		bits := make([]byte, n)
		for k := range bits {
			bits[k] = byte(x >> (n - 1 - k) & 1)
		}
		symbols, starts := sent(m, bits)
		all[x] = run{bits, symbols, starts}
	}
	for i, a := range all {
		for _, b := range all[:i] {
			k := 0
			for a.bits[k] == b.bits[k] {
				k++
			}
			start := a.starts[k/m.bits]
			same := 0
			for start+same < min(len(a.symbols), len(b.symbols)) && a.symbols[start+same] == b.symbols[start+same] {
				same++
			}
			if start+same == min(len(a.symbols), len(b.symbols)) {
				endless = true // or not yet parted
				continue
			}
			most = max(most, same)
		}
	}
	return most, endless
}

// Delays by comparing all data of some length two by two, and by thought: two words that differ in their first symbol
// are told apart at once.
func TestDelays(t *testing.T) {
	for _, tt := range []struct {
		code  *Code
		words int
		want  int
	}{
		{PolarNRZ(), 6, 0}, {AMI(), 6, 0}, {BiphaseL(), 6, 0}, {UnipolarRZ(0.25), 6, 0}, {BiphaseM(), 6, 1}, {CMI(), 6, 1},
		{DelayModulation(), 6, 1}, {MLT3(), 6, 0}, {HDLC(), 9, 0}, {Code2B1Q(), 4, 0}, {Code4B5B(), 2, 4}, {HDB3(), 11, 6},
	} {
		most, _ := agreements(tt.code.machine, tt.words)
		if v := tt.code.Decodable(); !v.Decodable || v.Delay != tt.want || most != tt.want {
			t.Errorf("%s: %v; data compared two by two agree over up to %d symbols, want %d", tt.code, v, most, tt.want)
		}
	}
	if v := Code8b10b().Decodable(); !v.Decodable || v.Delay != 9 {
		t.Errorf("8b/10b: %v; its words differ in ten symbols", v)
	}
}

func TestVerdictOfAnyMachine(t *testing.T) {
	undecodable := 0
	rapid.Check(t, func(t *rapid.T) {
		c := anyMachine(t)
		m := c.machine
		v := c.Decodable()
		if v.Decodable {
			if most, _ := agreements(m, 8/m.bits/2); most > v.Delay {
				t.Fatalf("%v, but data agree over %d symbols", v, most)
			}
			return
		}
		undecodable++
		one, other := slices.Clone(v.One), slices.Clone(v.Other)
		if v.RepeatOne == 0 {
			a, _ := sent(m, one)
			b, _ := sent(m, other)
			if slices.Equal(one, other) || !slices.Equal(a, b) {
				t.Fatalf("%v: they give %v and %v", v, a, b)
			}
			return
		}
		const rounds = 6
		for range rounds {
			one = append(one, v.One[len(v.One)-v.RepeatOne:]...)
			other = append(other, v.Other[len(v.Other)-v.RepeatOther:]...)
		}
		a, _ := sent(m, one)
		b, _ := sent(m, other)
		n, bits := min(len(a), len(b)), min(len(one), len(other))
		if slices.Equal(one[:bits], other[:bits]) || n < rounds || !slices.Equal(a[:n], b[:n]) {
			t.Fatalf("%v: repeated, %v and %v give %v and %v", v, one, other, a, b)
		}
	})
	if undecodable == 0 {
		t.Error("all machines drawn were decodable")
	}
}

func TestVerdictsOfScriptedCodes(t *testing.T) {
	step := func(f func(s int, w uint) (int, []float64)) func(any, uint) (any, []float64) {
		return func(s any, w uint) (any, []float64) { return f(s.(int), w) }
	}
	for name, tt := range map[string]struct {
		spec Spec
		want string
	}{
		"a bit is lost": {Spec{Bits: 1, Start: 0, Step: step(func(int, uint) (int, []float64) { return 0, []float64{1} })},
			"not decodable: the data 1 and 0 give the same symbols"},
		"polarity is lost": {Spec{Bits: 1, Start: 0, Step: step(func(s int, w uint) (int, []float64) { // changes of a line whose sign its first bit sets
			switch {
			case s == 0:
				return 1 + int(w), []float64{0}
			case s == 1+int(w):
				return s, []float64{0}
			}
			return 1 + int(w), []float64{1}
		})}, "not decodable: the data 11 and 00, whose last 1 and 1 bits repeat for ever, give the same symbols"},
		"no suffix code": {Spec{Bits: 1, Start: 0, Step: step(func(s int, w uint) (int, []float64) { // 0 is 1, 1 is 1 0: parted at the next symbol
			if w == 0 {
				return 0, []float64{1}
			}
			return 0, []float64{1, 0}
		})}, "decodable, words known at the latest 1 symbols after their first"},
		"endless suspense": {Spec{Bits: 2, Start: 0, Step: step(func(_ int, w uint) (int, []float64) { // words 0, 01, 11, 1110
			return 0, [][]float64{{0}, {0, 1}, {1, 1}, {1, 1, 1, 0}}[w]
		})}, "not decodable: the data "},
		"words without symbols": {Spec{Bits: 1, Start: 0, Step: step(func(s int, w uint) (int, []float64) { // two bits make one symbol of four levels
			if s == 0 {
				return 1 + int(w), nil
			}
			return 0, []float64{float64(2*(s-1) + int(w))}
		})}, "decodable, words known at the latest 0 symbols after their first"},
	} {
		if got := must(t, tt.spec).Decodable().String(); !strings.HasPrefix(got, tt.want) {
			t.Errorf("%s: got %s, want %s", name, got, tt.want)
		}
	}
}

func TestUndecidedBeyondTheLimit(t *testing.T) {
	p := &pairing{t: newTries(HDB3().machine), seen: make(map[pair]int32), maxPairs: 5}
	v, err := p.decide(t.Context())
	if err != nil || !v.Undecided || v.Decodable || !strings.HasPrefix(v.String(), "undecided: ") {
		t.Errorf("%v, %v", v, err)
	}
}
