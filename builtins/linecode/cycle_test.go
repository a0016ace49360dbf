package linecode

import (
	"slices"
	"strings"
	"testing"

	"linewright/builtins/source"
)

// The period is what Encode comes to: from some symbol on, the symbols are the period again and again, and no shorter
// laps of the pattern repeat with the encoder.
func TestCycle(t *testing.T) {
	prbs := source.PRBS(7).Bits(127)
	// Starts with a preamble of three steps that no data bring back.
	preamble := must(t, Spec{Name: "preamble", Bits: 2, Start: 0, Step: func(s any, w uint) (any, []float64) {
		if n := s.(int); n < 3 {
			return n + 1, []float64{5, 5}
		}
		return 3, []float64{float64(w)}
	}})
	for _, tt := range []struct {
		code   *Code
		bits   []byte
		length int
	}{
		{HDB3(), prbs, 127},
		{Code8b10b(), prbs, 1270},
		{Code8b10b().LSBFirst(), prbs, 1270},
		{NRZM(), []byte{1, 0, 0, 0, 0, 0, 0}, 14}, // one change a pattern: twice the pattern
		{HDLC(), []byte{1, 1, 1, 1, 1, 1, 0}, 8},  // one 0 stuffed; two changes bring the level back
		{BitStuffing(5), []byte{1, 1, 1}, 18},     // 15 ones and three stuffed zeros: five patterns
		{preamble, []byte{1, 0, 0}, 3},            // three bits against words of two: six bits
	} {
		symbols, err := tt.code.Fed(source.Repeating(tt.bits)).Cycle(tt.length)
		if err != nil || len(symbols) != tt.length {
			t.Errorf("%s: a period of %d symbols, error %v, want %d", tt.code, len(symbols), err, tt.length)
			continue
		}
		levels, err := tt.code.Encode(slices.Repeat(tt.bits, 8*tt.code.Bits()*(1+1000/len(tt.bits))))
		if err != nil {
			t.Fatal(err)
		}
		period := make([]float64, len(symbols))
		for i, k := range symbols {
			period[i] = tt.code.Levels()[k]
		}
		// Within the first 600 symbols the transient has passed and the period has begun.
		again := slices.Repeat(period, 3)
		found := false
		for at := 0; at < 600+tt.length && !found; at++ {
			found = slices.Equal(levels[at:at+len(again)], again)
		}
		if !found {
			t.Errorf("%s: Encode never comes to the period", tt.code)
		}
	}
	if symbols, err := HDB3().Cycle(1); symbols != nil || err != nil {
		t.Errorf("of random data: %v, %v, want nothing", symbols, err)
	}
}

func TestCycleRefusals(t *testing.T) {
	long := source.Repeating(source.PRBS(20).Bits(1<<20 - 1))
	counter := must(t, Spec{Name: "counter", Bits: 1, Start: 0, Step: func(s any, _ uint) (any, []float64) {
		return (s.(int) + 1) % 1024, []float64{0}
	}})
	for want, code := range map[string]*Code{
		"linecode: the symbols of 8b/10b, repeating 1048575 bits repeat after 10485750 only; the limit is 100; take a shorter pattern": Code8b10b().Fed(long),
		"linecode: the symbols of counter, repeating 1048575 bits do not repeat within 67108864 words; take a shorter pattern":         counter.Fed(long),
	} {
		if _, err := code.Cycle(100); err == nil || err.Error() != want {
			t.Errorf("got  %v\nwant %s", err, want)
		}
	}
	code := HDB3().Fed(long)
	interruptible(t)()
	if _, err := code.Cycle(1 << 20); err == nil || !strings.HasSuffix(err.Error(), errStop.Error()) {
		t.Errorf("interrupted: %v", err)
	}
}

// A rate that data change, under a pattern: 7 bits take 8 symbols with the one stuffed.
func TestRateOfRepeatingData(t *testing.T) {
	near(t, "rate", HDLC().Fed(source.Repeating([]byte{1, 1, 1, 1, 1, 1, 0})).Rate(), 7./8, 1e-15)
}
