package spectrum_test

import (
	"math"
	"math/cmplx"
	"testing"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/source"
	"linewright/builtins/spectrum"
)

func must(p *spectrum.PSD, err error) *spectrum.PSD {
	if err != nil {
		panic(err)
	}
	return p
}

func sinc2(nu float64) float64 { return pulse.Rect(1).Energy(nu) }

func sin2(x float64) float64 { return math.Pow(math.Sin(x), 2) }

// frequencies in symbol rates: between the nulls, near them, near 0.
var frequencies = []float64{1e-6, 1e-4, 0.01, 0.1, 0.19, 0.25, 0.38, 0.5, 0.61, 0.75, 0.9, 0.999, 1.001, 1.3, 1.77, 2.5, 3.21}

// scripted makes a code whose states are whole numbers, from state 0.
func scripted(t *testing.T, bits int, step func(s int, word uint) (int, []float64)) *linecode.Code {
	t.Helper()
	c, err := linecode.New(linecode.Spec{
		Name: t.Name(), Bits: bits, Start: 0,
		Step: func(s any, word uint) (any, []float64) { return step(s.(int), word) },
	})
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func TestClosedForms(t *testing.T) {
	correlative := func(combine func(now, before1, before2 float64) float64) *linecode.Code { // on antipodal bits
		sign := func(b uint) float64 { return 2*float64(b) - 1 }
		return scripted(t, 1, func(s int, word uint) (int, []float64) {
			return s<<1&3 | int(word), []float64{combine(sign(word), sign(uint(s&1)), sign(uint(s>>1)))}
		})
	}
	tests := []struct {
		name   string
		code   *linecode.Code
		shape  pulse.Shape
		want   func(nu float64) float64 // two-sided, over A^2 T
		source string
	}{
		{"polar NRZ, p = 0.3", linecode.PolarNRZ().Fed(source.Biased(0.3)), pulse.Shape{},
			func(nu float64) float64 { return 4 * 0.3 * 0.7 * sinc2(nu) }, "Bennett 1958, from memory"},
		{"unipolar RZ, p = 0.7, duty 0.4", linecode.UnipolarNRZ().Fed(source.Biased(0.7)), pulse.Rect(0.4),
			func(nu float64) float64 { return 0.7 * 0.3 * 0.16 * sinc2(0.4*nu) }, "Bennett 1958, from memory"},
		{"NRZ-M, p = 0.2", linecode.NRZM().Fed(source.Biased(0.2)), pulse.Shape{}, // toggles on a 1
			func(nu float64) float64 {
				const l = 1 - 2*0.2
				return sinc2(nu) * (1 - l*l) / (1 - 2*l*math.Cos(2*math.Pi*nu) + l*l)
			}, "derived; cf. JPL DSN Progress Report 42-32 (1976), abstract seen"},
		{"NRZ-S, p = 0.2", linecode.NRZS().Fed(source.Biased(0.2)), pulse.Shape{}, // toggles on a 0
			func(nu float64) float64 {
				const l = 2*0.2 - 1
				return sinc2(nu) * (1 - l*l) / (1 - 2*l*math.Cos(2*math.Pi*nu) + l*l)
			}, "the same with p for 1-p"},
		{"AMI, p = 0.35", linecode.AMI().Fed(source.Biased(0.35)), pulse.Shape{},
			func(nu float64) float64 {
				const g = 2*0.35 - 1
				return sinc2(nu) * 4 * 0.35 * 0.65 * sin2(math.Pi*nu) / (1 + g*g + 2*g*math.Cos(2*math.Pi*nu))
			}, "Croisier 1970, from memory; rederived"},
		{"pseudoternary, p = 0.35", linecode.Pseudoternary().Fed(source.Biased(0.35)), pulse.Shape{},
			func(nu float64) float64 {
				const g = 1 - 2*0.35
				return sinc2(nu) * 4 * 0.35 * 0.65 * sin2(math.Pi*nu) / (1 + g*g + 2*g*math.Cos(2*math.Pi*nu))
			}, "AMI with its zeros alternating"},
		{"biphase-L, p = 0.7", linecode.BiphaseL().Fed(source.Biased(0.7)), pulse.Shape{},
			func(nu float64) float64 { return 8 * 0.7 * 0.3 * sinc2(nu) * sin2(math.Pi*nu) }, "Lindsey and Simon 1973, from memory"},
		{"Manchester, p = 0.7", linecode.Manchester8023().Fed(source.Biased(0.7)), pulse.Shape{},
			func(nu float64) float64 { return 8 * 0.7 * 0.3 * sinc2(nu) * sin2(math.Pi*nu) }, "biphase-L with both levels changed"},
		{"biphase-M", linecode.BiphaseM(), pulse.Shape{},
			func(nu float64) float64 { return 2 * sinc2(nu) * sin2(math.Pi*nu) }, "Lindsey and Simon 1973, from memory"},
		{"biphase-S", linecode.BiphaseS(), pulse.Shape{},
			func(nu float64) float64 { return 2 * sinc2(nu) * sin2(math.Pi*nu) }, "Lindsey and Simon 1973, from memory"},
		{"CMI", linecode.CMI(), pulse.Shape{},
			func(nu float64) float64 {
				return 2*sinc2(2*nu)*sin2(2*math.Pi*nu) + 0.5*sinc2(nu)*sin2(math.Pi*nu)
			}, "derived"},
		{"MLT-3", linecode.MLT3(), pulse.Shape{},
			func(nu float64) float64 {
				c := math.Cos(2 * math.Pi * nu)
				return sinc2(nu) * (1.5 - c) / (4 * (1.25 - 3*c + 2*c*c))
			}, "derived"},
		{"2B1Q", linecode.Code2B1Q(), pulse.Shape{},
			func(nu float64) float64 { return 5 * sinc2(nu) }, "elementary: mean square of the levels +-1 and +-3"},
		{"duobinary", correlative(func(a, b, _ float64) float64 { return a + b }), pulse.Shape{},
			func(nu float64) float64 { return 4 * math.Pow(math.Cos(math.Pi*nu), 2) * sinc2(nu) }, "Kabal and Pasupathy 1975, from memory"},
		{"dicode", correlative(func(a, b, _ float64) float64 { return a - b }), pulse.Shape{},
			func(nu float64) float64 { return 4 * sin2(math.Pi*nu) * sinc2(nu) }, "Kabal and Pasupathy 1975, from memory"},
		{"modified duobinary", correlative(func(a, _, c float64) float64 { return a - c }), pulse.Shape{},
			func(nu float64) float64 { return 4 * sin2(2*math.Pi*nu) * sinc2(nu) }, "Kabal and Pasupathy 1975, from memory"},
		{"null of order 2", correlative(func(a, b, c float64) float64 { return a - 2*b + c }), pulse.Shape{},
			func(nu float64) float64 { return 16 * sin2(math.Pi*nu) * sin2(math.Pi*nu) * sinc2(nu) }, "the difference of a dicode"},
		{"NRZ of slow data", linecode.PolarNRZ().Fed(source.Markov(1e-3, 1e-3)), pulse.Shape{},
			func(nu float64) float64 {
				const l = 1 - 2e-3
				return sinc2(nu) * (1 - l*l) / ((1-l)*(1-l) + 4*l*sin2(math.Pi*nu))
			}, "NRZ-M's form, arranged so that it keeps its digits"},
	}
	for _, test := range tests {
		p := must(spectrum.Exact(test.code, pulse.Train{Shape: test.shape}))
		peak := 0.0
		for nu := 0.0; nu < 2; nu += 1. / 64 {
			peak = max(peak, test.want(nu))
		}
		for _, nu := range frequencies {
			want := test.want(nu)
			// These forms keep their digits near nulls, and so must the result: the 1e-20 are for the nulls themselves.
			if got := p.At(nu) / 2; math.Abs(got-want) > 1e-9*want+1e-20*peak {
				t.Errorf("%s at %v: %v, want %v (%s)", test.name, nu, got, want, test.source)
			}
		}
	}
}

// Delay modulation (R. C. Hecht and A. Guida 1969, from memory) counts bit periods, two symbols each. The form cancels
// at small angles and is left alone there.
func TestDelayModulation(t *testing.T) {
	p := must(spectrum.Exact(linecode.DelayModulation(), pulse.Train{BitRate: 1}))
	for _, f := range []float64{0.2, 0.375, 0.7, 1.1, 1.6, 2.3} {
		c := func(k float64) float64 { return math.Cos(k * math.Pi * f) }
		th := math.Pi * f
		want := (23 - 2*c(1) - 22*c(2) - 12*c(3) + 5*c(4) + 12*c(5) + 2*c(6) - 8*c(7) + 2*c(8)) / (2 * th * th * (17 + 8*c(8)))
		if got := p.At(f) / 2; math.Abs(got-want) > 1e-12 {
			t.Errorf("at %v of the bit rate: %v, want %v", f, got, want)
		}
	}
}

// The tones of the closed forms' sources, one-sided.
func TestTones(t *testing.T) {
	tests := []struct {
		name  string
		code  *linecode.Code
		train pulse.Train
		want  []spectrum.Line // up to 3 symbol rates
	}{
		{"polar NRZ, p = 0.3", linecode.PolarNRZ().Fed(source.Biased(0.3)), pulse.Train{}, []spectrum.Line{{0, 0.16}}},
		{"unipolar RZ 50 %", linecode.UnipolarNRZ(), pulse.Train{Shape: pulse.Rect(0.5)}, // p^2 d^2 sinc^2(kd), twice above 0
			[]spectrum.Line{{0, 1. / 16}, {1, 2 / math.Pow(2*math.Pi, 2)}, {3, 2 / math.Pow(6*math.Pi, 2)}}},
		{"biphase-L, p = 0.7", linecode.BiphaseL().Fed(source.Biased(0.7)), pulse.Train{}, // (1-2p)^2 (2/(pi k))^2 at k/2, k odd
			[]spectrum.Line{{0.5, 2 * 0.16 * math.Pow(2/math.Pi, 2)}, {1.5, 2 * 0.16 * math.Pow(2/(3*math.Pi), 2)}, {2.5, 2 * 0.16 * math.Pow(2/(5*math.Pi), 2)}}},
		{"CMI", linecode.CMI(), pulse.Train{}, // 1/(pi k)^2 at k/2, k odd
			[]spectrum.Line{{0.5, 2 / math.Pow(math.Pi, 2)}, {1.5, 2 / math.Pow(3*math.Pi, 2)}, {2.5, 2 / math.Pow(5*math.Pi, 2)}}},
		{"AMI", linecode.AMI(), pulse.Train{Shape: pulse.Rect(0.3)}, nil},
		{"biphase-M", linecode.BiphaseM().Fed(source.Biased(0.9)), pulse.Train{}, nil},
		// Marks of both signs are equally frequent, but only the positive ones last: of +-1 with probability 1/4 each,
		// the mean waveform is a difference of two pulses, Rect(1) - Rect(1/2) over 4, repeated every symbol.
		{"AMI with unequal pulses", linecode.AMI(), pulse.Train{Shapes: map[float64]pulse.Shape{-1: pulse.Rect(0.5)}},
			[]spectrum.Line{{0, 1. / 64}, {1, 2 / math.Pow(4*math.Pi, 2)}, {3, 2 / math.Pow(12*math.Pi, 2)}}},
	}
	for _, test := range tests {
		lines := must(spectrum.Exact(test.code, test.train)).Lines(3)
		if len(lines) != len(test.want) {
			t.Errorf("%s: lines %v, want %v", test.name, lines, test.want)
			continue
		}
		for i, l := range lines {
			if w := test.want[i]; l.Freq != w.Freq || math.Abs(l.Power/w.Power-1) > 1e-12 {
				t.Errorf("%s: line %v, want %v", test.name, l, w)
			}
		}
	}
}

// Facts of the trade: common practice, without a source.
func TestCommonPractice(t *testing.T) {
	const a, rate = 2.5, 1e6
	train := pulse.Train{SymbolRate: rate, Level: a}
	unipolar := must(spectrum.Exact(linecode.UnipolarNRZ(), train))
	// R(0) = A^2/2 and R(k) = A^2/4: the mean square, and the mean squared that is left of it.
	if got := unipolar.Total(); math.Abs(got-a*a/2) > 1e-14 {
		t.Errorf("unipolar NRZ has a mean square of %v, want A^2/2 = %v", got, a*a/2)
	}
	// One tone, A^2/4 at 0: every other one falls on a null.
	if lines := unipolar.Lines(20 * rate); len(lines) != 1 || lines[0].Freq != 0 || math.Abs(lines[0].Power-a*a/4) > 1e-14 {
		t.Errorf("unipolar NRZ has tones %v, want one of A^2/4 = %v at 0", lines, a*a/4)
	}
	// Two-sided density A^2 T/4 sinc^2(f T), nulls at multiples of 1/T.
	for _, f := range []float64{0, 0.1e6, 0.5e6, 1.5e6} {
		if got, want := unipolar.At(f)/2, a*a/rate/4*sinc2(f/rate); math.Abs(got-want) > 1e-20 {
			t.Errorf("unipolar NRZ at %v Hz: %v two-sided, want %v", f, got, want)
		}
	}
	for k := 1.0; k < 5; k++ {
		if got := unipolar.At(k * rate); got != 0 {
			t.Errorf("unipolar NRZ at %v/T: %v, want a null", k, got)
		}
	}
	// 50 % RZ halves the pulse: the first null stands at 2/T, the density at 0 falls to a quarter.
	train.Shape = pulse.Rect(0.5)
	half := must(spectrum.Exact(linecode.UnipolarNRZ(), train))
	if got := half.At(2 * rate); got != 0 || half.At(rate) == 0 {
		t.Errorf("50 %% RZ: %v at 2/T, %v at 1/T, want the first null at 2/T", got, half.At(rate))
	}
	if got := half.At(0) / unipolar.At(0); math.Abs(got-0.25) > 1e-14 {
		t.Errorf("50 %% RZ at 0 Hz over NRZ: %v, want 1/4", got)
	}
	// The same pulse as a code of two symbols a bit.
	rz := must(spectrum.Exact(linecode.UnipolarRZ(0.5), pulse.Train{BitRate: rate, Level: a}))
	for _, f := range []float64{0, 0.3e6, 1e6, 1.7e6, 2.2e6} {
		if got, want := rz.At(f), half.At(f); math.Abs(got-want) > 1e-12*half.At(0) {
			t.Errorf("unipolar RZ as a code at %v Hz: %v, as a pulse %v", f, got, want)
		}
	}
	// Biphase with a 1 as high-low: of equiprobable data no power at 0, the main lobe below 2/Tb, peak near 0.74/Tb.
	biphase := must(spectrum.Exact(linecode.BiphaseL(), pulse.Train{BitRate: 1}))
	if biphase.At(0) != 0 || biphase.At(2) != 0 {
		t.Errorf("biphase-L at 0 and twice the bit rate: %v and %v, want nulls", biphase.At(0), biphase.At(2))
	}
	if sym, err := linecode.BiphaseL().Encode([]byte{1}); err != nil || sym[0] != 1 || sym[1] != -1 {
		t.Errorf("biphase-L sends a 1 as %v (error %v), want high-low", sym, err)
	}
	if f := peak(biphase, 0.5, 1); math.Abs(f-0.742) > 1e-3 {
		t.Errorf("biphase-L peaks at %v of the bit rate, want 0.742", f)
	}
}

// peak finds the maximum of a density between lo and hi by trisection.
func peak(p *spectrum.PSD, lo, hi float64) float64 {
	for hi-lo > 1e-9 {
		a, b := lo+(hi-lo)/3, hi-(hi-lo)/3
		if p.At(a) < p.At(b) {
			lo = a
		} else {
			hi = b
		}
	}
	return lo
}

// Maximum-entropy runs of 2 to 8 symbols, alternating in sign (A. Gallopoulos, C. Heegard and P. H. Siegel 1989, from
// memory): with lambda the growth rate 2^capacity and g the sum of lambda^-l exp(-j w l) over the runs.
func TestMaximumEntropyRuns(t *testing.T) {
	growth := 1.6
	for range 50 { // Newton on sum of growth^-l = 1
		f, d := -1.0, 0.0
		for l := 2.0; l <= 8; l++ {
			f += math.Pow(growth, -l)
			d -= l * math.Pow(growth, -l-1)
		}
		growth -= f / d
	}
	if math.Abs(growth-math.Exp2(0.6792862637472666)) > 1e-12 {
		t.Fatalf("growth %v is not 2 to the capacity 0.67928626", growth)
	}
	for _, r := range references(t) {
		if r.ID != "maxent_1_7" {
			continue
		}
		p := r.exact(t)
		for _, nu := range []float64{0.01, 0.1, 0.23, 0.37, 0.5, 0.8, 1.4} {
			var g complex128
			mean := 0.0
			for l := 2.0; l <= 8; l++ {
				w := math.Pow(growth, -l)
				g += complex(w, 0) * cmplx.Exp(complex(0, -2*math.Pi*nu*l))
				mean += l * w
			}
			want := sinc2(nu) * (1 - math.Pow(cmplx.Abs(g), 2)) / (math.Pow(cmplx.Abs(1+g), 2) * mean * sin2(math.Pi*nu))
			if got := p.At(nu) / 2; math.Abs(got/want-1) > 1e-9 {
				t.Errorf("at %v: %v, want %v", nu, got, want)
			}
		}
	}
}
