package spectrum_test

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"testing"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/source"
	"linewright/builtins/spectrum"
)

// A reference is one definition of testdata/reference.json, whose values an independent computation worked out by at
// least two routes. Densities there are two-sided and over A^2 T, lines are single two-sided lines in A^2, and nu counts
// symbol rates; reference_source names the published form that a value was also held against.
type reference struct {
	ID         string
	Definition struct {
		Type  string // "mealy" or "chain"
		M     int    // bits per word
		Init  int
		Next  [][]int
		Out   [][][]float64
		Edges [][]json.RawMessage // from, to, probability, levels, bits
	}
	Source struct {
		Type     string // "iid", "markov1", "periodic" or "embedded"
		P1       float64
		P01, P10 float64
		RawBits  []int `json:"bits"`
	}
	Pulse      struct{ Duty float64 }
	Nu, Psd    []float64
	Lines      [][2]float64
	Near       struct{ Nu, Psd []float64 } `json:"near_dc"`
	MeanSquare float64                     `json:"mean_square_symbol"`
	Reference  string                      `json:"reference_source"`
}

func references(t testing.TB) []reference {
	t.Helper()
	b, err := os.ReadFile("testdata/reference.json")
	if err != nil {
		t.Fatal(err)
	}
	var file struct{ Codes []reference }
	if err := json.Unmarshal(b, &file); err != nil {
		t.Fatal(err)
	}
	if len(file.Codes) != 42 {
		t.Fatalf("%d definitions, want 42", len(file.Codes))
	}
	return file.Codes
}

// code makes a Mealy definition a scripted code.
func (r *reference) code(t testing.TB) *linecode.Code {
	t.Helper()
	d := r.Definition
	c, err := linecode.New(linecode.Spec{
		Name: r.ID, Bits: d.M, Start: d.Init,
		Step: func(s any, word uint) (any, []float64) { return d.Next[s.(int)][word], d.Out[s.(int)][word] },
	})
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// chain makes an embedded definition a chain.
func (r *reference) chain(t testing.TB) *linecode.Chain {
	t.Helper()
	ch := &linecode.Chain{Name: r.ID}
	for _, raw := range r.Definition.Edges {
		var e linecode.Edge
		for i, to := range []any{&e.From, &e.To, &e.P, &e.Levels, &e.Bits} {
			if err := json.Unmarshal(raw[i], to); err != nil {
				t.Fatal(err)
			}
		}
		ch.Edges = append(ch.Edges, e)
		ch.States = max(ch.States, e.From+1, e.To+1)
	}
	ch.Start = make([]float64, ch.States)
	ch.Start[r.Definition.Init] = 1
	return ch
}

// exact computes a definition's spectrum through the public contract: scripted codes fed by a source, the catalogue's
// HDLC for the two definitions with stuffing, and the chain itself for the two maximum-entropy chains, which no source
// bits drive.
func (r *reference) exact(t testing.TB) *spectrum.PSD {
	t.Helper()
	train := pulse.Train{Shape: pulse.Rect(r.Pulse.Duty)}
	var p *spectrum.PSD
	var err error
	switch {
	case r.ID == "maxent_rds5" || r.ID == "maxent_1_7":
		p, err = spectrum.OfChain(r.chain(t), train)
	case r.Source.Type == "embedded":
		p, err = spectrum.Exact(linecode.HDLC().Fed(source.Biased(r.Source.P1)), train)
	case r.Source.Type == "iid":
		p, err = spectrum.Exact(r.code(t).Fed(source.Biased(r.Source.P1)), train)
	case r.Source.Type == "markov1":
		p, err = spectrum.Exact(r.code(t).Fed(source.Markov(r.Source.P01, r.Source.P10)), train)
	case r.Source.Type == "periodic":
		bits := make([]byte, len(r.Source.RawBits))
		for i, b := range r.Source.RawBits {
			bits[i] = byte(b)
		}
		p, err = spectrum.Exact(r.code(t).Fed(source.Repeating(bits)), train)
	default:
		t.Fatalf("source %q", r.Source.Type)
	}
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func TestReference(t *testing.T) {
	for _, r := range references(t) {
		t.Run(r.ID, func(t *testing.T) {
			p := r.exact(t)
			peak := 0.0
			for _, v := range r.Psd {
				peak = max(peak, v)
			}
			periodic := r.Source.Type == "periodic"
			for i, nu := range r.Nu {
				if periodic {
					break // there nu and psd are those of the lines
				}
				if got := p.At(nu) / 2; math.Abs(got-r.Psd[i]) > 1e-9*r.Psd[i]+1e-11*peak {
					t.Errorf("density at %v: %v, want %v", nu, got, r.Psd[i])
				}
			}
			if periodic && p.At(0.3) != 0 {
				t.Errorf("density of periodic data at 0.3: %v, want 0", p.At(0.3))
			}
			for i, nu := range r.Near.Nu {
				if got := p.At(nu) / 2; math.Abs(got/r.Near.Psd[i]-1) > 1e-9 {
					t.Errorf("density at %v: %v, want %v to 1e-9 of itself", nu, got, r.Near.Psd[i])
				}
			}
			r.checkLines(t, p)
			if got, want := p.Total(), r.MeanSquare*r.Pulse.Duty; math.Abs(got/want-1) > 1e-12 {
				t.Errorf("mean square %v, want %v", got, want)
			}
		})
	}
}

func (r *reference) checkLines(t *testing.T, p *spectrum.PSD) {
	t.Helper()
	last := 2.0 // lines are listed up to nu = 2, those of periodic data as far as they go
	if r.Source.Type == "periodic" {
		last = r.Lines[len(r.Lines)-1][0] + 1e-9
	}
	var want [][2]float64
	for _, l := range r.Lines {
		if l[1] > 1e-14 {
			want = append(want, l)
		}
	}
	lines := p.Lines(last)
	if len(lines) != len(want) {
		t.Fatalf("%d lines %v, want %d: %v", len(lines), lines, len(want), want)
	}
	for i, l := range lines {
		power := want[i][1]
		if want[i][0] > 0 {
			power *= 2
		}
		if math.Abs(l.Freq-want[i][0]) > 1e-12 || math.Abs(l.Power-power) > 1e-9*power {
			t.Errorf("line %v, want %v of %v", l, want[i][0], power)
		}
	}
}

// The example of the reference's scalars: HDB3 in 50 % pulses of 2.37 V at 2.048 Mbaud into 75 ohm.
func TestPowerUnits(t *testing.T) {
	p, err := spectrum.Exact(linecode.HDB3(), pulse.Train{BitRate: 2.048e6, Peak: 2.37, Load: 75, Shape: pulse.Rect(0.5)})
	if err != nil {
		t.Fatal(err)
	}
	v := p.At(1.024e6)
	if want := 2 * 5.737005608877497e-07; math.Abs(v/want-1) > 1e-9 {
		t.Errorf("density %v V^2/Hz, want %v", v, want)
	}
	if dbm, err := p.DBm(v); err != nil || math.Abs(dbm - -48.153459932499565) > 1e-8 {
		t.Errorf("density %v dBm/Hz (error %v), want -48.15346", dbm, err)
	}
	if w, err := p.Watts(75); err != nil || w != 1 {
		t.Errorf("75 V^2 into 75 ohm: %v W (error %v), want 1", w, err)
	}
}

// Values at nu = 1/4 and 1/2 of the symbol spectrum, and the low-frequency slope S_rds(0), in exact fractions at p = 1/2.
// The columns for 1/2 and the slope are proved in exact arithmetic but for AMI, a closed form; the column for 1/4 was
// identified from doubles that agree to 4e-15.
func TestExactFractions(t *testing.T) {
	tests := []struct {
		code                 string
		quarter, half, slope float64 // slope NaN: the digital sum is not bounded
	}{
		{"rll17", 16789. / 16575, 41. / 225, math.NaN()},
		{"ami_p50", 1. / 2, 1, 1. / 4},
		{"hdb3_p50", 8976. / 16895, 32. / 31, 17960. / 2883},
		{"b3zs_p50", 128. / 225, 1376. / 875, 456. / 175},
		{"pst_p50", 7. / 8, 5. / 4, 13. / 16},
		{"cmi_p50", 5. / 4, 1. / 2, 17. / 8},
		{"mms43_p50", 45756. / 63557, 2695. / 3159, 15187. / 2132},
		{"5b6b", 68. / 57, 16. / 13, 389. / 39},
		{"8b10b_p50", 51999. / 42880, 25023. / 19520, 623899. / 78080},
		{"miller_p50", 1, 1. / 5, math.NaN()},
		{"4b5b_nrzi", 861. / 650, 46. / 45, math.NaN()},
	}
	byID := map[string]reference{}
	for _, r := range references(t) {
		byID[r.ID] = r
	}
	for _, test := range tests {
		r := byID[test.code]
		p := r.exact(t)
		symbol := func(nu float64) float64 { return p.At(nu) / (2 * pulse.Rect(1).Energy(nu)) }
		if got := symbol(0.25); math.Abs(got-test.quarter) > 1e-13 {
			t.Errorf("%s at 1/4: %v, want %v", test.code, got, test.quarter)
		}
		if got := symbol(0.5); math.Abs(got-test.half) > 1e-13 {
			t.Errorf("%s at 1/2: %v, want %v", test.code, got, test.half)
		}
		if !math.IsNaN(test.slope) {
			const nu = 1e-7
			if got := symbol(nu) / math.Pow(2*math.Sin(math.Pi*nu), 2); math.Abs(got/test.slope-1) > 1e-9 {
				t.Errorf("%s: slope %v, want %v", test.code, got, test.slope)
			}
		}
	}
}

// The symbol spectrum at 0 Hz of codes whose digital sum is not bounded, from the same table.
func TestExactFractionsAtZero(t *testing.T) {
	want := map[string]float64{"miller_p50": 1. / 5, "rll17": 47. / 75, "4b5b_nrzi": 1. / 5}
	for _, r := range references(t) {
		if w, ok := want[r.ID]; ok {
			if got := r.exact(t).At(0) / 2; math.Abs(got-w) > 1e-13 {
				t.Errorf("%s at 0: %v, want %v", r.ID, got, w)
			}
		}
	}
}

// Peaks with full-width pulses: place and two-sided density over A^2 T, from the same computation.
func TestPeaks(t *testing.T) {
	want := map[string]struct{ lo, hi, nu, peak float64 }{
		"hdb3_p50":   {0.3, 0.5, 0.385165, 0.6331052},
		"b3zs_p50":   {0.4, 0.5, 0.469914, 0.6748640},
		"mms43_p50":  {0.2, 0.3, 0.255410, 0.5836874},
		"8b10b_p50":  {0.2, 0.3, 0.242554, 0.9844106},
		"miller_p50": {0.15, 0.22, 0.187477, 4.9986971},
	}
	for _, r := range references(t) {
		w, ok := want[r.ID]
		if !ok {
			continue
		}
		p := r.exact(t)
		nu := peak(p, w.lo, w.hi)
		if got := p.At(nu) / 2; math.Abs(nu-w.nu) > 1e-5 || math.Abs(got-w.peak) > 1e-6 {
			t.Errorf("%s peaks at %v with %v, want %v with %v", r.ID, nu, got, w.nu, w.peak)
		}
	}
}

func ExampleExact() {
	ami := linecode.AMI()
	p, err := spectrum.Exact(ami, pulse.Train{BitRate: 2.048e6, Level: 3, Load: 120, Shape: pulse.Rect(0.5)})
	if err != nil {
		panic(err)
	}
	fmt.Printf("%.6g V^2/Hz at half the bit rate\n", p.At(1.024e6))
	fmt.Printf("%.6g V^2 in all, of which %.6g V^2 below 4 MHz\n", p.Total(), p.Power(0, 4e6))
	fmt.Println("tones:", p.Lines(10e6))
	// Output:
	// 1.78104e-06 V^2/Hz at half the bit rate
	// 2.25 V^2 in all, of which 2.02877 V^2 below 4 MHz
	// tones: []
}
