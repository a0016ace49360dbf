package spectrum_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/source"
	"linewright/builtins/spectrum"
)

// Lines, Power and Within mean the same frequency by a tone, at rates whose multiples round.
func TestFrequencyOfTones(t *testing.T) {
	rates := []float64{887133.6525867896, 1e6 / 3, 0.1}
	for random := rand.New(rand.NewPCG(1, 2)); len(rates) < 40; {
		rates = append(rates, math.Exp(30*random.Float64()))
	}
	// A pattern and a pulse without nulls at the quarters of the symbol rate.
	code := linecode.PolarNRZ().Fed(source.Repeating([]byte{1, 0, 1, 0, 0, 0, 0, 1, 1, 0, 0, 1}))
	for _, fs := range rates {
		p := must(spectrum.Exact(code, pulse.Train{SymbolRate: fs, Shape: pulse.Rect(0.7142)}))
		lines := p.Lines(3 * fs)
		at := map[float64]float64{}
		for _, l := range lines {
			at[l.Freq] = l.Power
			above := math.Nextafter(l.Freq, math.Inf(1))
			if got := p.Power(l.Freq, above); math.Abs(got-l.Power) > 1e-12*p.Total() {
				t.Errorf("%v Hz: Power from the tone at %v Hz is %v, Lines has %v", fs, l.Freq, got, l.Power)
			}
			if got := p.Power(math.Nextafter(l.Freq, 0), l.Freq); l.Freq > 0 && got > 1e-12*p.Total() {
				t.Errorf("%v Hz: Power below the tone at %v Hz is %v, want none", fs, l.Freq, got)
			}
			if upto := p.Lines(l.Freq); upto[len(upto)-1] != l {
				t.Errorf("%v Hz: Lines(%v) ends with %v, want the tone there", fs, l.Freq, upto[len(upto)-1])
			}
		}
		for _, nu := range []float64{0.25, 0.5, 0.75, 1, 1.25, 1.5, 1.75, 2, 2.25, 2.5, 2.75, 3} {
			if at[nu*fs] == 0 {
				t.Errorf("%v Hz: no tone at %v Hz, %v symbol rates", fs, nu*fs, nu)
			}
		}
		// Just enough for the tone at a quarter of the rate.
		within := (p.Power(math.Nextafter(0, 1), 0.25*fs) + 0.5*at[0.25*fs]) / (p.Total() - at[0])
		if got := p.Within(within); got != 0.25*fs {
			t.Errorf("%v Hz: Within(%v) is %v, want the tone at %v", fs, within, got, 0.25*fs)
		}
	}
}
