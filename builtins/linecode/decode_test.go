package linecode

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"strings"
	"testing"

	"linewright/builtins/source"

	"pgregory.net/rapid"
)

func TestDecodeExamples(t *testing.T) {
	for _, tt := range []struct {
		code    *Code
		symbols []float64
		bits    string
		faults  []int
		why     string
	}{
		{AMI(), []float64{1, 0, -1}, "101", []int{}, ""},
		{AMI(), []float64{1, 0, 1}, "101", []int{2}, "two marks of the same sign"},
		{AMI(), []float64{-1, 0, 1}, "101", []int{0}, "the first mark is +1"},
		{AMI(), []float64{1, 1, 1, 1}, "1111", []int{1, 2, 3}, "each mark violates the one before"},
		{AMI(), []float64{1, 0.5, -1}, "101", []int{1}, "no level of the code; the code goes on as it would have after the 0 that comes first"},
		{AMI(), []float64{1, math.Inf(1), 2, -1}, "1111", []int{1, 2}, "likewise, in the order of the symbols"},
		{AMI(), nil, "", []int{}, "nothing"},
		{HDB3(), nil, "", []int{}, "nothing, and its flush was left out with the delay"},
		{HDB3(), []float64{1}, "1", []int{}, "one symbol a bit"},
		{HDB3(), []float64{1, 0, 0, 1}, "0000", []int{}, "B00V"},
		{HDB3(), []float64{1, 0, 0, 0, 1}, "10000", []int{}, "000V"},
		{HDB3(), []float64{1, -1, 0, 0, 0, 0, 1}, "1100000", []int{5}, "no four zeros are sent; the last mark is taken for a violation"},
		{BiphaseL(), []float64{1, -1, 1, 1, 1, -1}, "101", []int{3}, "no change within a bit; the word's phase is kept"},
		{BiphaseL(), []float64{1, -1, -1}, "10", []int{}, "the second bit is known from its first half"},
		{UnipolarRZ(0.5), []float64{0, 0, 1}, "01", []int{}, "likewise"},
		{Code2B1Q(), []float64{3, -1}, "1001", []int{}, ""},
		{HDLC(), []float64{-1, -1, -1, -1, -1, 1, -1}, "111110", []int{}, "the 0 after five 1s is taken out"},
		{HDLC(), []float64{-1, -1, -1, -1, -1, -1, 1}, "111110", []int{5}, "six 1s"},
		{Code4B5B(), []float64{1, -1}, "", []int{}, "11 begins 0, E and F: no bit in common"},
		{Code4B5B(), []float64{-1, 1}, "0", []int{}, "01 begins 1, 4, 5, 6 and 7"},
	} {
		bits, faults, err := tt.code.Decode(tt.symbols)
		if !reflect.DeepEqual(bits, bitsOf(tt.bits)) || !reflect.DeepEqual(faults, tt.faults) || err != nil {
			t.Errorf("%s: %v gives %v, faults %v, %v, want %s, %v (%s)", tt.code, tt.symbols, bits, faults, err, tt.bits, tt.faults, tt.why)
		}
	}
}

func TestDecodeRefuses(t *testing.T) {
	_, _, err := AMI().Decode([]float64{1, math.NaN()})
	if want := "linecode: Decode got NaN at position 1; symbols are the levels of AMI, as Levels lists them"; err == nil || err.Error() != want {
		t.Errorf("got  %v\nwant %s", err, want)
	}
	lossy := must(t, Spec{Name: "lossy", Bits: 2, Step: func(_ any, w uint) (any, []float64) { return nil, []float64{float64(w & 2)} }})
	_, _, err = lossy.Decode([]float64{0})
	if want := "linecode: lossy cannot be decoded: the data 01 and 00 give the same symbols"; err == nil || err.Error() != want {
		t.Errorf("got  %v\nwant %s", err, want)
	}
}

// With every code of the catalogue, in both bit orders, what was encoded comes back whole and without faults.
func TestRoundTrip(t *testing.T) {
	for _, name := range Names() {
		for _, code := range []*Code{catalogued(name), catalogued(name).LSBFirst()} {
			t.Run(code.Name(), func(t *testing.T) {
				rapid.Check(t, func(t *rapid.T) {
					bits := rapid.SliceOfN(rapid.ByteRange(0, 1), 0, 200).Draw(t, "bits")
					bits = bits[:len(bits)/code.Bits()*code.Bits()]
					sym, err := code.Encode(bits)
					if err != nil {
						t.Fatal(err)
					}
					back, faults, err := code.Decode(sym)
					if err != nil || len(faults) > 0 || !slices.Equal(back, bits) {
						t.Fatalf("%v came back as %v, faults %v, %v", bits, back, faults, err)
					}
					for _, a := range sym {
						if code.machine.symbol(a) < 0 {
							t.Fatalf("level %v is not among %v", a, code.Levels())
						}
					}
				})
			})
		}
	}
}

// Symbols that end early give bits that what was sent begins with, short by no more than the stated delay, unless data
// that end there give the same symbols.
func TestEarlyEnd(t *testing.T) {
	for _, name := range Names() {
		code := catalogued(name)
		v := code.Decodable()
		bits := source.Random().Bits(40*code.Bits(), 7)
		sym, err := code.Encode(bits)
		if err != nil {
			t.Fatal(err)
		}
		for end := range sym {
			got, faults, err := code.Decode(sym[:end])
			if err != nil || len(faults) > 0 {
				t.Fatalf("%s: faults %v, %v", code, faults, err)
			}
			if whole := len(got) / code.Bits() * code.Bits(); whole == len(got) {
				if same, _ := code.Encode(got); slices.Equal(same, sym[:end]) {
					continue
				}
			}
			if !slices.Equal(got, bits[:len(got)]) {
				t.Fatalf("%s: %d symbols give %v of %v", code, end, got, bits)
			}
			// The words that began Delay symbols before the end of the encoder's symbols, or earlier, are known.
			known, _ := code.Encode(bits[:len(got)/code.Bits()*code.Bits()])
			if missing := end - len(known); missing > v.Delay {
				t.Errorf("%s: %d symbols give %d bits, whose words are %d symbols: more than %d are missing", code, end, len(got), len(known), v.Delay)
			}
		}
	}
}

// Whatever comes in, a code of fixed rate answers with as many bits as were sent; and wrong symbols, 100 apart, spoil
// no more than the bits around them.
func TestFaultsKeepBitsInPlace(t *testing.T) {
	for _, name := range Names() {
		code := catalogued(name)
		if _, _, fixed := code.FixedRate(); !fixed {
			continue
		}
		random := rand.New(rand.NewPCG(1, 2))
		bits := source.Random().Bits(500*code.Bits(), 3)
		sym, err := code.Encode(bits)
		if err != nil {
			t.Fatal(err)
		}
		levels := code.Levels()
		noise := slices.Clone(sym)
		for i := range noise {
			noise[i] = levels[random.IntN(len(levels))]
		}
		got, _, err := code.Decode(noise)
		if err != nil || len(got) != len(bits) {
			t.Errorf("%s: noise gives %d bits for %d, %v", code, len(got), len(bits), err)
		}
		for i := 50; i < len(sym); i += 100 {
			sym[i] = levels[(code.machine.symbol(sym[i])+1+random.IntN(len(levels)-1))%len(levels)]
		}
		got, faults, err := code.Decode(sym)
		if err != nil || len(got) != len(bits) {
			t.Errorf("%s: %d bits for %d, faults %v, %v", code, len(got), len(bits), faults, err)
			continue
		}
		perBit := len(sym) / len(bits)
		for i := range bits {
			if at := i * max(1, perBit); bits[i] != got[i] && len(sym)%len(bits) == 0 && (at%100 < 40 || at%100 > 70) {
				t.Errorf("%s: bit %d is wrong, faults %v", code, i, faults)
			}
		}
	}
}

// A hypothesis of the slow decoder: what an encoder has read, its state, and what it has yet to send.
type hypothesis struct {
	bits    string
	state   int
	pending []int32
	partial bool // pending is the rest of a word that has begun
}

// begins returns the hypotheses that start with the next word of h, over words without symbols too.
func (h hypothesis) begins(m *machine) []hypothesis {
	var all []hypothesis
	for w := range m.words() {
		to, out := m.step(h.state, w)
		next := hypothesis{h.bits + fmt.Sprintf("%0*b", m.bits, w), to, out, true}
		if len(out) == 0 {
			all = append(all, next.begins(m)...)
		} else {
			all = append(all, next)
		}
	}
	return all
}

// slowly decodes symbols up to the first fault, by following every data sequence on its own. It returns the fault, or
// the bits in which the data agree that end with the symbols, or failing those all that give them.
func slowly(m *machine, symbols []int32) (bits string, fault int) {
	now := []hypothesis{{}}
	for i, symbol := range symbols {
		var next []hypothesis
		for _, h := range now {
			from := []hypothesis{h}
			if len(h.pending) == 0 {
				from = h.begins(m)
			}
			for _, h := range from {
				if h.pending[0] == symbol {
					h.pending = h.pending[1:]
					next = append(next, h)
				}
			}
		}
		if len(next) == 0 {
			return "", i
		}
		now = next
	}
	// At the end a hypothesis may also have read words without symbols.
	var ended, all []string
	var silent func(h hypothesis)
	silent = func(h hypothesis) {
		ended = append(ended, h.bits)
		for w := range m.words() {
			if to, out := m.step(h.state, w); len(out) == 0 {
				silent(hypothesis{bits: h.bits + fmt.Sprintf("%0*b", m.bits, w), state: to})
			}
		}
	}
	for _, h := range now {
		all = append(all, h.bits)
		if len(h.pending) == 0 {
			silent(h)
		}
	}
	if ended != nil {
		all = ended
	}
	common := all[0]
	for _, s := range all {
		for !strings.HasPrefix(s, common) {
			common = common[:len(common)-1]
		}
	}
	return common, -1
}

// anyMachine draws a small encoder of any kind: several words and states, and from none to three symbols a step.
func anyMachine(t *rapid.T) *Code {
	bits := rapid.IntRange(1, 2).Draw(t, "bits")
	states := rapid.IntRange(1, 4).Draw(t, "states")
	next := rapid.SliceOfN(rapid.IntRange(0, states-1), states<<bits, states<<bits).Draw(t, "next")
	out := rapid.SliceOfN(rapid.SliceOfN(rapid.SampledFrom([]float64{-1, 0, 1}), 0, 3), states<<bits, states<<bits).Draw(t, "out")
	c, err := New(Spec{Bits: bits, Start: 0, Step: func(s any, w uint) (any, []float64) {
		i := s.(int)<<bits | int(w)
		return next[i], out[i]
	}})
	if err != nil {
		t.Skip(err) // no symbols for ever
	}
	return c
}

func TestDecodeAgainstFollowingEveryData(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := anyMachine(t)
		if !c.Decodable().Decodable || len(c.Levels()) == 0 {
			t.Skip("not decodable")
		}
		symbols := rapid.SliceOfN(rapid.SampledFrom(c.Levels()), 0, 9).Draw(t, "symbols")
		numbers := make([]int32, len(symbols))
		for i, a := range symbols {
			numbers[i] = int32(c.machine.symbol(a))
		}
		bits, faults, err := c.Decode(symbols)
		if err != nil {
			t.Fatal(err)
		}
		want, fault := slowly(c.machine, numbers)
		if fault >= 0 {
			if len(faults) == 0 || faults[0] != fault {
				t.Fatalf("faults %v, the first should be %d", faults, fault)
			}
			return
		}
		if len(faults) > 0 || !slices.Equal(bits, bitsOf(want)) {
			t.Fatalf("bits %v, want %s, faults %v", bits, want, faults)
		}
	})
}

// reachable returns the nodes at which an encoder can be after so many symbols, by following all of them.
func reachable(t *tries, symbols int) []int32 {
	a := newSurvivors(t)
	var nodes []int32
	for _, p := range t.enter(nil, 0, nil) {
		nodes = append(nodes, p.node)
	}
	set := a.set(nodes)
	for range symbols {
		number, err := a.move(context.Background(), set, wildcard)
		if err != nil {
			panic(err)
		}
		set = a.moves[number].to
	}
	nodes = slices.Clone(a.sets[set])
	slices.Sort(nodes)
	return slices.Compact(nodes)
}

// Decoding resumes wherever an encoder can be: never in fewer places, and in no others once a code has started up.
func TestPlacesToResume(t *testing.T) {
	places := func(r *resumption, symbols int) []int32 {
		var nodes []int32
		for _, p := range r.places(symbols) {
			nodes = append(nodes, p.node)
		}
		slices.Sort(nodes)
		return nodes
	}
	rapid.Check(t, func(t *rapid.T) {
		r := newResumption(newTries(anyMachine(t).machine))
		symbols := rapid.IntRange(0, 12).Draw(t, "symbols")
		found := places(r, symbols)
		for _, node := range reachable(r.t, symbols) {
			if _, ok := slices.BinarySearch(found, node); !ok {
				t.Fatalf("after %d symbols the encoder can be at node %d, not among %v", symbols, node, found)
			}
		}
	})
	for _, name := range Names() {
		r := newResumption(newTries(catalogued(name).machine))
		for symbols := 40; symbols < 60; symbols++ {
			wantEqual(t, fmt.Sprintf("%s after %d symbols", name, symbols), places(r, symbols), reachable(r.t, symbols))
		}
	}
}

// Every fault is the first symbol at which nothing continues from anywhere that the encoder could be at the fault
// before; a symbol that continues from nowhere is taken as unread.
func TestFaultsOfNoise(t *testing.T) {
	for _, name := range Names() {
		code := catalogued(name)
		random := rand.New(rand.NewPCG(3, 4))
		sym, err := code.Encode(source.Random().Bits(50*code.Bits(), 3))
		if err != nil {
			t.Fatal(err)
		}
		alphabet := append(code.Levels(), 0.25)
		for i := 45; i < len(sym); i++ {
			sym[i] = alphabet[random.IntN(len(alphabet))]
		}
		sym = sym[:min(len(sym), 200)]
		_, faults, err := code.Decode(sym)
		if err != nil {
			t.Fatal(err)
		}
		trees := newTries(code.machine)
		var want []int
		step := func(now []int32, level float64, any bool) (next []int32) {
			for _, node := range now {
				for _, kid := range trees.children(node) {
					if any || code.machine.levels[kid.symbol] == level {
						for _, p := range trees.arrive(nil, kid.node) {
							next = append(next, p.node)
						}
					}
				}
			}
			slices.Sort(next)
			return slices.Compact(next)
		}
		now := reachable(trees, code.Delay())
		for i, level := range sym {
			next := step(now, level, false)
			if next == nil {
				want = append(want, i)
				now = reachable(trees, i)
				for range code.Delay() {
					now = step(now, 0, true)
				}
				if next = step(now, level, false); next == nil {
					next = step(now, 0, true)
				}
			}
			now = next
		}
		// The last symbols of noise may happen to be what a state owes at the end; HDB3 then has no fault there.
		if !slices.Equal(faults, want[:min(len(want), len(faults))]) || len(want)-len(faults) > code.Delay() {
			t.Errorf("%s: faults %v, want %v", code, faults, want)
		}
	}
}

// However often the automaton is made anew, the answer is the same.
func TestRenewalChangesNothing(t *testing.T) {
	for _, name := range []string{"HDB3", "8b/10b", "HDLC", "delay modulation"} {
		code := catalogued(name)
		sym, err := code.Encode(source.Random().Bits(400*code.Bits(), 5))
		if err != nil {
			t.Fatal(err)
		}
		for i := 70; i < len(sym); i += 97 {
			sym[i] = code.Levels()[0]
		}
		want, faults, err := code.Decode(sym)
		if err != nil {
			t.Fatal(err)
		}
		d := newDecoding(t.Context(), code.machine, sym)
		d.maxSize = 4
		first := d.a
		if err := d.run(); err != nil {
			t.Fatal(err)
		}
		if d.a == first {
			t.Errorf("%s: the automaton was never made anew", name)
		}
		if !slices.Equal(d.bits, want) || !slices.Equal(d.faults, faults) {
			t.Errorf("%s: %d bits and faults %v, want %d and %v", name, len(d.bits), d.faults, len(want), faults)
		}
	}
}

// Where decodability was left undecided, Decode does not guess: it decodes what it can, and refuses where data merge.
func TestDecodeOfTheUndecided(t *testing.T) {
	code := HDB3()
	code.machine.verdict = &Verdict{Undecided: true}
	bits := source.Random().Bits(100, 1)
	sym, _ := code.Encode(bits)
	got, _, err := code.Decode(sym)
	if !slices.Equal(got, bits) || err != nil {
		t.Errorf("%v, %v", got, err)
	}
	lossy := must(t, Spec{Name: "lossy", Bits: 2, Step: func(_ any, w uint) (any, []float64) { return nil, []float64{float64(w & 2)} }})
	lossy.machine.verdict = &Verdict{Undecided: true}
	_, _, err = lossy.Decode([]float64{0, 2})
	if want := "linecode: lossy cannot be decoded: two data sequences give the symbols so far and lead to the same state"; err == nil || err.Error() != want {
		t.Errorf("got  %v\nwant %s", err, want)
	}
}

func TestInterrupts(t *testing.T) {
	interrupt := interruptible(t)
	code, lossy := HDB3(), AMI()
	sym, _ := code.Encode(source.Random().Bits(1000, 1))
	code.Decodable()
	interrupt()
	_, err := code.Encode([]byte{1})
	_, _, err2 := code.Decode(sym)
	_, _, err3 := lossy.Decode(sym)
	for what, err := range map[string]error{
		"linecode: interrupted while encoding HDB3: stop":                                 err,
		"linecode: interrupted while decoding HDB3: stop":                                 err2,
		"linecode: interrupted while deciding whether data can be decoded from AMI: stop": err3,
		"linecode: interrupted while joining the data to HDB3: stop":                      panicOf(t, func() { code.Chain() }),
		"linecode: interrupted while counting the states of HDB3: stop":                   panicOf(t, func() { code.Minimal() }),
	} {
		if !errors.Is(err, errStop) || err.Error() != what {
			t.Errorf("got  %v\nwant %s", err, what)
		}
	}
}

func BenchmarkDecode(b *testing.B) {
	for _, name := range []string{"HDB3", "8b/10b"} {
		code := catalogued(name)
		sym, err := code.Encode(source.Random().Bits(1000000, 1))
		if err != nil {
			b.Fatal(err)
		}
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				if _, _, err := code.Decode(sym); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(len(sym)), "ns/symbol")
		})
	}
}

// Decode takes what Encode gives, also from encoders with a delay line of any kind: the bits are those in which all
// data agree that Encode makes these symbols of.
func TestDecodeIsTheInverseOfEncode(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		states := rapid.IntRange(1, 3).Draw(t, "states")
		next := rapid.SliceOfN(rapid.IntRange(0, states-1), 2*states, 2*states).Draw(t, "next")
		levels := rapid.SampledFrom([]float64{-1, 0, 1})
		out := rapid.SliceOfN(rapid.SliceOfN(levels, 1, 2), 2*states, 2*states).Draw(t, "out")
		owed := rapid.SliceOfN(rapid.SliceOfN(levels, 0, 3), states, states).Draw(t, "owed")
		c, err := New(Spec{
			Bits: 1, Start: 0, Delay: rapid.IntRange(0, 3).Draw(t, "delay"),
			Step: func(s any, w uint) (any, []float64) {
				i := 2*s.(int) + int(w)
				return next[i], out[i]
			},
			Flush: func(s any) []float64 { return owed[s.(int)] },
		})
		if err != nil {
			t.Fatal(err)
		}
		if !c.Decodable().Decodable {
			t.Skip("not decodable")
		}
		sym, err := c.Encode(rapid.SliceOfN(rapid.ByteRange(0, 1), 0, 5).Draw(t, "bits"))
		if err != nil || len(sym) == 0 {
			t.Skip("nothing was sent")
		}
		var want []byte
		for n := 0; n <= len(sym)+c.Delay(); n++ {
			for x := range 1 << n {
				data := make([]byte, n)
				for k := range data {
					data[k] = byte(x >> k & 1)
				}
				if same, _ := c.Encode(data); !slices.Equal(same, sym) {
					continue
				}
				if want == nil {
					want = data
				}
				for k := range want {
					if k == len(data) || want[k] != data[k] {
						want = want[:k]
						break
					}
				}
			}
		}
		bits, faults, err := c.Decode(sym)
		if err != nil || len(faults) > 0 || !slices.Equal(bits, want) {
			t.Fatalf("%v gives %v, want %v, faults %v, %v", sym, bits, want, faults, err)
		}
	})
}
