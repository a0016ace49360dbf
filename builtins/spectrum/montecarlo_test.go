package spectrum_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/dsp/fourier"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/source"
	"linewright/builtins/spectrum"
)

const (
	mcSymbols   = 64 // of a segment
	mcPerSymbol = 2  // samples
	mcSegments  = 1500
	mcPhases    = 240 // a segment begins this many symbols into the stream at most: a multiple of every block length below
	mcWarm      = 200 // symbols after the encoder's start that are left out
)

// Simulated waveforms against the exact spectrum. Segments of sampled waveform begin at random phases of the code's
// blocks (at fixed phases block codes show a bias), are windowed (Hann) and transformed; the mean of |X_k|^2 over the
// segments is held against what the exact density and tones give once they are convolved with the window.
func TestMonteCarlo(t *testing.T) {
	markov := source.Markov(0.2, 0.3)
	tests := []struct {
		code  *linecode.Code
		train pulse.Train
	}{
		{linecode.UnipolarNRZ(), pulse.Train{}},
		{linecode.PolarNRZ().Fed(source.Biased(0.7)), pulse.Train{Level: 2}},
		{linecode.NRZM().Fed(markov), pulse.Train{}},
		{linecode.AMI().Fed(source.Biased(0.3)), pulse.Train{}},
		{linecode.AMI(), pulse.Train{Shape: pulse.Rect(0.5)}},
		{linecode.BiphaseL().Fed(source.Biased(0.7)), pulse.Train{}},
		{linecode.BiphaseM(), pulse.Train{}},
		{linecode.DelayModulation(), pulse.Train{}},
		{linecode.CMI(), pulse.Train{}},
		{linecode.HDB3(), pulse.Train{}},
		{linecode.HDB3().Fed(source.Biased(0.2)), pulse.Train{}},
		{linecode.MLT3(), pulse.Train{}},
		{linecode.Code2B1Q().Fed(markov), pulse.Train{}},
		{linecode.Code4B5B(), pulse.Train{}},
		{linecode.Code8b10b().Fed(source.Biased(0.6)), pulse.Train{}},
		{linecode.HDLC().Fed(source.Biased(0.6)), pulse.Train{}},
		{linecode.NRZM(), pulse.Train{Transition: func(prev, next float64) pulse.Shape { // rises late by half a symbol
			if next > prev {
				return pulse.Points([]float64{0, 0.5, 0.5, 1}, []float64{prev, prev, next, next})
			}
			return pulse.Scaled(pulse.Rect(1), next)
		}}},
	}
	for seed, test := range tests {
		mean, deviation := simulate(t, test.code, test.train, uint64(seed+1))
		want := convolved(t, test.code, test.train)
		square, worst := 0.0, 0.0
		n := 0
		for k := range mean {
			if k > mcSymbols*mcPerSymbol/2-2 {
				break
			}
			z := (mean[k] - want[k]) / deviation[k]
			square += z * z
			worst = max(worst, math.Abs(z))
			n++
		}
		// About 62 bins, neighbours correlated by the window: chance alone passes these limits about once in 10,000.
		square /= float64(n)
		if square > 2.2 || worst > 5 {
			t.Errorf("%s: mean z^2 %.2f, largest |z| %.2f over %d bins", test.code.Chain().Name, square, worst, n)
		}
	}
}

func hann() []float64 {
	w := make([]float64, mcSymbols*mcPerSymbol)
	for i := range w {
		w[i] = 0.5 - 0.5*math.Cos(2*math.Pi*(float64(i)+0.5)/float64(len(w)))
	}
	return w
}

// simulate returns the mean over the segments of |X_k|^2 and the standard deviation of that mean.
func simulate(t *testing.T, code *linecode.Code, train pulse.Train, seed uint64) (mean, deviation []float64) {
	t.Helper()
	drive, err := train.Drive(code)
	if err != nil {
		t.Fatal(err)
	}
	n := mcSymbols * mcPerSymbol
	fft := fourier.NewFFT(n)
	window := hann()
	random := rand.New(rand.NewPCG(seed, 0))
	mean, deviation = make([]float64, n/2+1), make([]float64, n/2+1)
	x, c := make([]float64, n), make([]complex128, n/2+1)
	for segment := range mcSegments {
		start := mcWarm + random.IntN(mcPhases)
		bits := int(float64(start+mcSymbols+50)*max(code.Rate(), 0.1)*1.3) + 20
		bits -= bits % code.Bits()
		levels, err := code.Encode(code.Source().Bits(bits, seed<<32|uint64(segment)))
		if err != nil {
			t.Fatal(err)
		}
		if len(levels) < start+mcSymbols {
			t.Fatalf("%s: %d symbols of %d bits, want %d", code.Name(), len(levels), bits, start+mcSymbols)
		}
		// One symbol more in front: it may reach into the segment.
		wave := drive.Wave(levels[start-1:start+mcSymbols], mcPerSymbol)[mcPerSymbol:]
		for i := range x {
			x[i] = wave[i] * window[i]
		}
		fft.Coefficients(c, x)
		for k, v := range c {
			p := real(v)*real(v) + imag(v)*imag(v)
			mean[k] += p / mcSegments
			deviation[k] += p * p / mcSegments
		}
	}
	for k := range mean {
		deviation[k] = math.Sqrt((deviation[k] - mean[k]*mean[k]) / mcSegments)
	}
	return mean, deviation
}

// convolved is the expectation of |X_k|^2. A sampled waveform has the spectrum of the train whose pulses are sums of
// unit impulses in the places of the samples. Impulses are no shape, but rectangles of one slot are: their transform
// differs by the slot's own, which is divided out.
func convolved(t *testing.T, code *linecode.Code, train pulse.Train) []float64 {
	t.Helper()
	drive, err := train.Drive(code)
	if err != nil {
		t.Fatal(err)
	}
	slots := pulse.Train{Level: drive.Volts, Transition: func(prev, next float64) pulse.Shape {
		s, err := drive.Symbol(prev, next)
		if err != nil {
			t.Fatal(err)
		}
		var parts []pulse.Shape
		for k := range mcPerSymbol {
			slot := pulse.Delayed(pulse.Rect(1./mcPerSymbol), float64(k)/mcPerSymbol)
			parts = append(parts, pulse.Scaled(slot, s.At((float64(k)+0.5)/mcPerSymbol)))
		}
		return pulse.Sum(parts...)
	}}
	p := must(spectrum.Exact(code, slots))
	// The density of the samples has the period mcPerSymbol symbol rates. On a grid so fine that its Fourier series is
	// no longer than the grid, sums over it are exact.
	const fine = 16
	n := mcSymbols * mcPerSymbol
	grid := n * fine
	slot := func(nu float64) float64 { return pulse.Rect(1. / mcPerSymbol).Energy(nu) }
	power := make([]float64, grid) // a grid point's power: per sample and cycle
	for i := range power {
		nu := float64(i) / float64(grid) * mcPerSymbol
		if nu > mcPerSymbol/2. {
			nu = mcPerSymbol - nu
		}
		power[i] = p.At(nu) / 2 / slot(nu) / mcPerSymbol / mcPerSymbol * mcPerSymbol / float64(grid)
	}
	window := hann()
	lags := fourier.NewCmplxFFT(grid)
	w := make([]complex128, grid)
	for i, v := range window {
		w[i] = complex(v, 0)
	}
	lags.Coefficients(w, w)
	leak := make([]float64, grid) // |W|^2 on the grid
	for i, v := range w {
		leak[i] = real(v)*real(v) + imag(v)*imag(v)
	}
	want := make([]float64, n/2+1)
	for k := range want {
		for i, v := range power {
			want[k] += v * leak[((k*fine-i)%grid+grid)%grid]
		}
		for _, l := range p.Lines(mcPerSymbol / 2.) {
			two := l.Power / slot(l.Freq) / mcPerSymbol / mcPerSymbol
			if l.Freq > 0 {
				two /= 2
			}
			tone := func(nu float64) {
				re, im := 0.0, 0.0
				for i, v := range window {
					sin, cos := math.Sincos(2 * math.Pi * (nu/mcPerSymbol - float64(k)/float64(n)) * float64(i))
					re += v * cos
					im += v * sin
				}
				want[k] += two * (re*re + im*im)
			}
			tone(l.Freq)
			if l.Freq > 0 && l.Freq < mcPerSymbol/2. { // the line at half the sampling rate is its own mirror
				tone(-l.Freq)
			}
		}
	}
	return want
}
