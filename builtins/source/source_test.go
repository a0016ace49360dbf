package source

import (
	"bytes"
	"context"
	"errors"
	"math"
	"reflect"
	"strings"
	"testing"

	"linewright/builtins/page"
)

func TestModels(t *testing.T) {
	type row struct {
		initial, one float64
		next         [2]int
	}
	for _, tt := range []struct {
		m      Model
		name   string
		states []row
	}{
		{Model{}, "P(1) = 0.5", []row{{1, 0.5, [2]int{0, 0}}}},
		{Random(), "P(1) = 0.5", []row{{1, 0.5, [2]int{0, 0}}}},
		{Biased(0.7), "P(1) = 0.7", []row{{1, 0.7, [2]int{0, 0}}}},
		{Biased(0), "P(1) = 0", []row{{1, 0, [2]int{0, 0}}}},
		{Markov(0.25, 0.75), "P(1 after 0) = 0.25, P(0 after 1) = 0.75", []row{{0.75, 0.25, [2]int{0, 1}}, {0.25, 0.25, [2]int{0, 1}}}},
		{Markov(1, 1), "P(1 after 0) = 1, P(0 after 1) = 1", []row{{0.5, 1, [2]int{0, 1}}, {0.5, 0, [2]int{0, 1}}}},
		{Repeating([]byte{1, 0, 0}), "repeating 3 bits", []row{{1, 1, [2]int{1, 1}}, {0, 0, [2]int{2, 2}}, {0, 0, [2]int{0, 0}}}},
		{Repeating([]byte{1}), "all 1s", []row{{1, 1, [2]int{0, 0}}}},
	} {
		var got []row
		for s := range tt.m.States() {
			got = append(got, row{tt.m.Initial()[s], tt.m.One(s), [2]int{tt.m.Next(s, 0), tt.m.Next(s, 1)}})
		}
		if !reflect.DeepEqual(got, tt.states) || tt.m.String() != tt.name {
			t.Errorf("%v: %v, want %s: %v", tt.m, got, tt.name, tt.states)
		}
	}
}

// The Markov model starts as it goes on: its initial distribution is stationary.
func TestMarkovStartsStationary(t *testing.T) {
	m := Markov(0.1, 0.4)
	var after [2]float64
	for s, p := range m.Initial() {
		after[m.Next(s, 1)] += p * m.One(s)
		after[m.Next(s, 0)] += p * (1 - m.One(s))
	}
	for s, p := range m.Initial() {
		if math.Abs(after[s]-p) > 1e-15 {
			t.Errorf("state %d: %g, one step later %g", s, p, after[s])
		}
	}
}

// Draws follow the model. The bounds are five standard deviations of the count, from the binomial variance.
func TestBitsFollowTheModel(t *testing.T) {
	const n = 400000
	count := func(bits []byte, pattern ...byte) (found, of float64) {
		for i := range len(bits) - len(pattern) + 1 {
			if bytes.Equal(bits[i:i+len(pattern)-1], pattern[:len(pattern)-1]) {
				of++
				if bits[i+len(pattern)-1] == pattern[len(pattern)-1] {
					found++
				}
			}
		}
		return found, of
	}
	for _, tt := range []struct {
		m       Model
		pattern []byte
		p       float64 // of the last bit of the pattern after the others
	}{
		{Model{}, []byte{1}, 0.5},
		{Random(), []byte{1, 1}, 0.5},
		{Biased(0.7), []byte{1}, 0.7},
		{Biased(0.7), []byte{0, 1, 1}, 0.7},
		{Markov(0.1, 0.4), []byte{0, 1}, 0.1},
		{Markov(0.1, 0.4), []byte{1, 0}, 0.4},
		{Markov(0.1, 0.4), []byte{1}, 0.2},
	} {
		found, of := count(tt.m.Bits(n, 3), tt.pattern...)
		// The marginal of a Markov model has a larger variance than independent draws: by (1+r)/(1-r), r = 1-p01-p10.
		if bound := 5 * math.Sqrt(3*of*tt.p*(1-tt.p)); math.Abs(found-of*tt.p) > bound {
			t.Errorf("%v: %v in %g of %g, want P = %g", tt.m, tt.pattern, found, of, tt.p)
		}
	}
	if got := Repeating([]byte{1, 0, 0}).Bits(7, 9); !bytes.Equal(got, []byte{1, 0, 0, 1, 0, 0, 1}) {
		t.Errorf("repeating pattern gave %v", got)
	}
	if got := Biased(0).Bits(4, 1); !bytes.Equal(got, make([]byte, 4)) {
		t.Errorf("P(1) = 0 gave %v", got)
	}
	a, b := Random().Bits(200, 1), Random().Bits(200, 2)
	if bytes.Equal(a, b) || !bytes.Equal(a, Random().Bits(200, 1)) {
		t.Error("the seed, and nothing else, must decide the draw")
	}
	first := 0
	for seed := range uint64(400) {
		first += int(Markov(0.001, 0.001).Bits(1, seed)[0])
	}
	if first < 150 || first > 250 { // five standard deviations of 10
		t.Errorf("%d of 400 draws start with 1, want about half", first)
	}
}

func TestPRBS7(t *testing.T) {
	// From a reference computation by another program: x^7 + x^6 + 1 from a register of all ones.
	const want = "1111111000000100000110000101000111100100010110011101010011111010000111000100100110110101101111011000110100101110111001100101010"
	var got strings.Builder
	for _, b := range PRBS(7).Bits(127) {
		got.WriteByte('0' + b)
	}
	if got.String() != want {
		t.Errorf("got  %s\nwant %s", got.String(), want)
	}
}

// A sequence of greatest period holds every window of order bits once, except the one of zeros (of ones where the
// sequence is inverted): S. W. Golomb, "Shift Register Sequences" (1967), randomness postulates (from memory).
func TestShortPRBSHoldEveryWindowOnce(t *testing.T) {
	for _, order := range []int{7, 9, 11, 15, 20} {
		s := PRBS(order)
		bits := s.Bits(s.Period() + order - 1)
		seen := make([]bool, 1<<order)
		window := 0
		for i, b := range bits {
			window = (window<<1 | int(b)) & (1<<order - 1)
			if i < order-1 {
				continue
			}
			if seen[window] {
				t.Fatalf("order %d: window %b twice", order, window)
			}
			seen[window] = true
		}
		missing := 0
		if order == 15 {
			missing = 1<<15 - 1
		}
		if seen[missing] {
			t.Errorf("order %d holds the window %b", order, missing)
		}
	}
}

// The longer ones are checked through their polynomials: x has the multiplicative order 2^n - 1 modulo x^n + x^tap + 1
// if x^(2^n-1) = 1 and x^((2^n-1)/q) is not 1 for any prime q that divides 2^n - 1.
func TestLongPRBSHaveTheGreatestPeriod(t *testing.T) {
	for _, tt := range []struct {
		order  int
		primes []uint64 // of 2^order - 1
	}{
		{23, []uint64{47, 178481}},
		{29, []uint64{233, 1103, 2089}},
		{31, []uint64{2147483647}},
	} {
		s := PRBS(tt.order)
		modulus := uint64(1)<<s.order | uint64(1)<<s.tap | 1
		times := func(a, b uint64) (p uint64) {
			for ; b > 0; b >>= 1 {
				if b&1 == 1 {
					p ^= a
				}
				a <<= 1
				if a>>s.order&1 == 1 {
					a ^= modulus
				}
			}
			return p
		}
		power := func(e uint64) uint64 {
			p, x := uint64(1), uint64(2)
			for ; e > 0; e >>= 1 {
				if e&1 == 1 {
					p = times(p, x)
				}
				x = times(x, x)
			}
			return p
		}
		period := uint64(s.Period())
		if power(period) != 1 {
			t.Errorf("order %d does not repeat after %d bits", tt.order, period)
		}
		for _, q := range tt.primes {
			if power(period/q) == 1 {
				t.Errorf("order %d repeats after %d bits", tt.order, period/q)
			}
		}
		bits := s.Bits(4 * tt.order)
		for i := tt.order; i < len(bits); i++ {
			// Each inverted bit is 1 + bit, so a sum of two of them has no inversion, and the sum must be inverted once.
			if bits[i] != bits[i-tt.order]^bits[i-s.tap]^1 {
				t.Fatalf("order %d: bit %d does not follow from the feedback", tt.order, i)
			}
		}
		if bytes.IndexByte(bits, 1) != tt.order {
			t.Errorf("order %d does not start with %d zeros", tt.order, tt.order)
		}
	}
}

func TestOctets(t *testing.T) {
	for _, tt := range []struct {
		order BitOrder
		want  []byte
	}{
		{LSBFirst, []byte{0, 1, 0, 1, 0, 0, 1, 0, 1, 1, 1, 1, 0, 0, 0, 0}},
		{MSBFirst, []byte{0, 1, 0, 0, 1, 0, 1, 0, 0, 0, 0, 0, 1, 1, 1, 1}},
	} {
		if got := Octets([]byte{0x4A, 0x0F}, tt.order); !bytes.Equal(got, tt.want) {
			t.Errorf("order %d: %v, want %v", tt.order, got, tt.want)
		}
	}
}

func TestBadInputSaysWhatWouldBeRight(t *testing.T) {
	for want, f := range map[string]func(){
		"source: Biased got p = 1.2; a probability is from 0 to 1":                                              func() { Biased(1.2) },
		"source: Biased got p = NaN; a probability is from 0 to 1":                                              func() { Biased(math.NaN()) },
		"source: Markov got p10 = -0.1; a probability is from 0 to 1":                                           func() { Markov(0.1, -0.1) },
		"source: Markov(0, 0) never leaves its first bit":                                                       func() { Markov(0, 0) },
		"source: Repeating got no bits; give at least one":                                                      func() { Repeating(nil) },
		"source: Repeating got 2 at position 1; a bit is 0 or 1, one a byte":                                    func() { Repeating([]byte{1, 2}) },
		"source: PRBS(8) is not known; the orders are 7, 9, 11, 15, 20, 23, 29, 31":                             func() { PRBS(8) },
		"source: Bits of -1 bits; ask for 0 to 2147483647":                                                      func() { Random().Bits(-1, 1) },
		"source: PRBS of -5 bits; ask for 0 to 2147483647":                                                      func() { PRBS(7).Bits(-5) },
		"source: Octets got bit order 0; say source.LSBFirst or source.MSBFirst, as the line's standard has it": func() { Octets([]byte{1}, 0) },
	} {
		if got := panicOf(t, f).Error(); !strings.HasPrefix(got, want) {
			t.Errorf("got  %s\nwant %s", got, want)
		}
	}
}

func panicOf(t *testing.T, f func()) (err error) {
	t.Helper()
	defer func() {
		var ok bool
		if err, ok = recover().(error); !ok {
			t.Fatal("no panic with an error")
		}
	}()
	f()
	return nil
}

// interrupted is the host of a cell that was interrupted.
type interrupted struct {
	page.Host
	ctx context.Context
}

func (h interrupted) Context() context.Context { return h.ctx }

func TestInterrupt(t *testing.T) {
	stop := errors.New("stop")
	ctx, cancel := context.WithCancelCause(context.Background())
	cancel(stop)
	page.Attach(interrupted{ctx: ctx})
	t.Cleanup(func() { page.Attach(interrupted{ctx: context.Background()}) })
	for _, f := range []func(){func() { Random().Bits(10, 1) }, func() { PRBS(31).Bits(10) }} {
		if err := panicOf(t, f); !errors.Is(err, stop) {
			t.Errorf("got %v", err)
		}
	}
}
