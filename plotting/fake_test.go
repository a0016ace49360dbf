package plotting

import (
	"math"

	"linewright/builtins/spectrum"
)

// fake is a density of a closed form, so that figures can be tried on what real codes rarely have all at once.
type fake struct {
	name  string
	rate  float64 // symbols a second
	load  float64 // ohms
	shape func(nu float64) float64
	lines []spectrum.Line
}

func (d fake) Name() string        { return d.name }
func (d fake) SymbolRate() float64 { return d.rate }
func (d fake) Load() float64       { return d.load }
func (d fake) Density(dst, f []float64) []float64 {
	for _, x := range f {
		dst = append(dst, d.shape(x/d.rate)/d.rate)
	}
	return dst
}
func (d fake) Lines(fmax float64) []spectrum.Line {
	var out []spectrum.Line
	for _, l := range d.lines {
		if l.Freq <= fmax {
			out = append(out, l)
		}
	}
	return out
}
func (d fake) Classes() []spectrum.Class         { return nil }
func (d fake) Within(float64) float64            { return 10 * d.rate }
func (d fake) Watts(v2 float64) (float64, error) { return v2 / d.load, nil }
func (d fake) DBm(v2 float64) (float64, error)   { return 10 * math.Log10(v2/d.load/1e-3), nil }

func sinc2(x float64) float64 {
	if x == 0 {
		return 1
	}
	s := math.Sin(math.Pi*x) / (math.Pi * x)
	return s * s
}

// fakes returns a polar NRZ, a unipolar RZ with tones, an AMI and a biphase density, each of 3 V.
func fakes(load float64) []density {
	const rate, v = 2.048e6, 9.0
	var tones []spectrum.Line
	tones = append(tones, spectrum.Line{Freq: 0, Power: v / 16})
	for k := 1.0; k < 20; k += 2 {
		tones = append(tones, spectrum.Line{Freq: k * rate, Power: 2 * v / 16 * sinc2(k/2)})
	}
	return []density{
		fake{"polar NRZ", rate, load, func(nu float64) float64 { return 2 * v * sinc2(nu) }, nil},
		fake{"unipolar RZ, 50 %", rate, load, func(nu float64) float64 { return 2 * v / 16 * sinc2(nu/2) }, tones},
		fake{"AMI", rate, load, func(nu float64) float64 { return v / 2 * sinc2(nu/2) * math.Pow(math.Sin(math.Pi*nu), 2) }, nil},
		fake{"biphase-L (1 = high-low)", 2 * rate, load, func(nu float64) float64 { return 4 * v * sinc2(nu) * math.Pow(math.Sin(math.Pi*nu), 2) }, nil},
	}
}

// marks is an encoder that alternates its marks, one symbol a bit.
type marks struct{}

func (marks) Name() string                { return "alternate marks" }
func (marks) Levels() []float64           { return []float64{-1, 0, 1} }
func (marks) FixedRate() (int, int, bool) { return 1, 1, true }
func (marks) Bits() int                   { return 1 }
func (marks) Encode(bits []byte) (out []float64, err error) {
	v := 1.0
	for _, b := range bits {
		out = append(out, v*float64(b))
		if b == 1 {
			v = -v
		}
	}
	return out, nil
}
