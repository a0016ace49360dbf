package plotting

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"linewright/builtins/spectrum"
	"linewright/plotting/internal/canvas"
)

// flat is a density of 1 V²/Hz with the given lines.
func flat(name string, load float64, lines ...spectrum.Line) density {
	return fake{name, 1e6, load, func(float64) float64 { return 1e6 }, lines}
}

// TestSpectrumUnits: 1 V²/Hz is 0 dB re 1 V²/Hz; in 50 ohm it is 1/50 W/Hz, 10 log10(20) = 13.01 dBm/Hz. One spectrum
// without a load makes the unit V² for all.
func TestSpectrumUnits(t *testing.T) {
	tone := spectrum.Line{Freq: 0, Power: 100}
	for _, tt := range []struct {
		name        string
		of          []density
		linear      bool
		left, right string
		density     float64
		tone        float64
	}{
		{"dB", []density{flat("a", 0, tone)}, false, "density (dB re 1 V²/Hz)", "tones (dB re 1 V²)", 0, 20},
		{"dBm", []density{flat("a", 50, tone)}, false, "density (dBm/Hz)", "tones (dBm)", 10 * math.Log10(20), 20 + 10*math.Log10(20)},
		{"mixed", []density{flat("a", 0, tone), flat("b", 50)}, false, "density (dB re 1 V²/Hz)", "tones (dB re 1 V²)", 0, 20},
		{"V²", []density{flat("a", 0, tone)}, true, "density (V²/Hz)", "tones (V²)", 1, 100},
		{"watts", []density{flat("a", 50, tone)}, true, "density (mW/Hz)", "tones (W)", 1.0 / 50, 2},
		{"no tones", []density{flat("a", 50)}, true, "density (mW/Hz)", "", 1.0 / 50, 0},
	} {
		t.Run(tt.name, func(t *testing.T) {
			s := newSpectrum(tt.of, tt.linear, 3e6)
			curves, stems := s.curves, s.stems
			if got := s.Plot.Y.Label.Text; got != tt.left {
				t.Errorf("left axis %q, want %q", got, tt.left)
			}
			if stems.label != tt.right {
				t.Errorf("right axis %q, want %q", stems.label, tt.right)
			}
			for _, y := range curves[0].ys {
				if math.Abs(y-tt.density) > 1e-12 {
					t.Fatalf("density %g, want %g", y, tt.density)
				}
			}
			if tt.right != "" && math.Abs(stems.series[0].values[0]-tt.tone) > 1e-12 {
				t.Errorf("tone %g, want %g", stems.series[0].values[0], tt.tone)
			}
		})
	}
}

// TestSpectrumFloor: nulls do not drag the axis down, and a density that falls little does not leave it empty.
func TestSpectrumFloor(t *testing.T) {
	for name, d := range map[string]density{
		"null":  fakes(0)[2],
		"steep": fake{"steep", 1e6, 0, func(nu float64) float64 { return 1e-3 * math.Pow(10, -nu*100) }, nil},
		"flat":  flat("flat", 0),
		"zero":  fake{"zero", 1e6, 0, func(float64) float64 { return 0 }, nil},
	} {
		t.Run(name, func(t *testing.T) {
			s := newSpectrum([]density{d}, false, 3e6)
			p := s.Plot
			if span := p.Y.Max - p.Y.Min; span < 20 || span > depth+10 {
				t.Errorf("the axis spans %g dB, want 20 to %g", span, depth+10)
			}
			peak := math.Inf(-1)
			for _, y := range s.curves[0].ys {
				peak = max(peak, y)
			}
			if name != "zero" && (peak > p.Y.Max || peak < p.Y.Max-10) {
				t.Errorf("the peak %g lies badly in %g to %g", peak, p.Y.Min, p.Y.Max)
			}
			checkLayout(t, s.Figure)
		})
	}
}

// TestSpectrumTonesAlone: periodic data have tones and no density; the tones then have the left axis.
func TestSpectrumTonesAlone(t *testing.T) {
	var lines []spectrum.Line
	for k := range 127 {
		lines = append(lines, spectrum.Line{Freq: float64(k) * 1e6 / 127, Power: 1e-3 * sinc2(float64(k)/127)})
	}
	s := newSpectrum([]density{fake{"periodic", 1e6, 50, func(float64) float64 { return 0 }, lines}}, false, 2e6)
	if got := s.Plot.Y.Label.Text; got != "tones (dBm)" {
		t.Errorf("left axis %q, want tones (dBm)", got)
	}
	if s.stems.label != "" {
		t.Errorf("right axis %q, want none", s.stems.label)
	}
	checkLayout(t, s.Figure)
}

// TestTonesSideBySide: the stems of several spectra at one frequency are all to be seen, centred on it.
func TestTonesSideBySide(t *testing.T) {
	at := spectrum.Line{Freq: 1e6, Power: 1}
	s := newSpectrum([]density{flat("a", 0, at), flat("b", 0, at), flat("c", 0, at, spectrum.Line{Freq: 2e6, Power: 1})}, false, 3e6)
	if _, err := s.SVG(); err != nil { // decides where the names go, which moves the axes
		t.Fatal(err)
	}
	c := s.Plot.DataCanvas(canvasOf(canvas.NewSVG(DefaultWidth, DefaultHeight)))
	x, _ := s.Plot.Transforms(&c)
	got := s.stems.stems(c, s.Plot)
	if len(got) != 4 {
		t.Fatalf("%d stems, want 4", len(got))
	}
	for i, want := range []float64{float64(x(1e6) - apart), float64(x(1e6)), float64(x(1e6) + apart), float64(x(2e6))} {
		if math.Abs(float64(got[i].top.X)-want) > 1e-6 {
			t.Errorf("stem %d at %g, want %g", i, got[i].top.X, want)
		}
	}
}

// TestTonesDense: tens of thousands of tones are drawn as what can be seen of them.
func TestTonesDense(t *testing.T) {
	var lines []spectrum.Line
	for k := range 60_000 {
		lines = append(lines, spectrum.Line{Freq: float64(k) * 50, Power: 1e-3 * (1 + 0.5*math.Sin(float64(k)))})
	}
	s := newSpectrum([]density{fake{"long period", 1e6, 50, func(float64) float64 { return 0 }, lines}}, false, 3e6)
	svg, err := s.SVG()
	if err != nil {
		t.Fatal(err)
	}
	if len(svg) > 300_000 {
		t.Errorf("%d bytes", len(svg))
	}
	checkLayout(t, s.Figure)
}

// TestSpectrumRange: one to three symbol rates, as the doc comment has it.
func TestSpectrumRange(t *testing.T) {
	for _, tt := range []struct {
		within []float64 // Hz, at a symbol rate of 1 MHz
		want   float64
	}{{[]float64{10e6}, 3e6}, {[]float64{0.1e6}, 1e6}, {[]float64{1e6}, 1.5e6}, {[]float64{1e6, 0.1e6, 1.2e6}, 1.8e6}} {
		var of []density
		for _, w := range tt.within {
			of = append(of, narrowBand{flat("a", 0).(fake), w})
		}
		if got := spectrumRange(of); math.Abs(got-tt.want) > 1e-6 {
			t.Errorf("99 %% within %v Hz: range %g, want %g", tt.within, got, tt.want)
		}
	}
}

type narrowBand struct {
	fake
	within float64
}

func (d narrowBand) Within(float64) float64 { return d.within }

func TestSpectrumPanics(t *testing.T) {
	s := newSpectrum(fakes(0), false, 6e6)
	for name, tt := range map[string]struct {
		call func()
		want string
	}{
		"none":     {func() { Spectrum() }, "plotting: Spectrum() has no spectrum"},
		"nil":      {func() { Spectrum(nil) }, "plotting: spectrum 1 of 1 is nil"},
		"zero":     {func() { s.Upto(0) }, "plotting: a figure cannot go up to 0 Hz"},
		"negative": {func() { s.Upto(-1) }, "plotting: a figure cannot go up to -1 Hz"},
		"infinite": {func() { s.Upto(math.Inf(1)) }, "plotting: a figure cannot go up to +Inf Hz"},
		"NaN":      {func() { s.Upto(math.NaN()) }, "plotting: a figure cannot go up to NaN Hz"},
		"no plot":  {func() { Of(nil) }, "plotting: Of(nil) has no plot"},
		"no code":  {func() { Waveform(nil, pulseTrain, []byte{1}) }, "plotting: Waveform of a nil code"},
	} {
		t.Run(name, func(t *testing.T) {
			defer func() {
				if err, ok := recover().(error); !ok || !strings.HasPrefix(err.Error(), tt.want) {
					t.Errorf("panicked with %v, want an error that begins %q", err, tt.want)
				}
			}()
			tt.call()
		})
	}
}

// TestSpectrumVariants: Linear and Upto leave the figure as it was, and each keeps what the other set.
func TestSpectrumVariants(t *testing.T) {
	s := newSpectrum(fakes(120), false, 6e6)
	v := s.Linear().Upto(1e6)
	if v.Plot.X.Max != 1e6 || !strings.HasSuffix(v.Plot.Y.Label.Text, "W/Hz)") {
		t.Errorf("Linear().Upto(1e6) goes to %g Hz in %q", v.Plot.X.Max, v.Plot.Y.Label.Text)
	}
	if w := s.Upto(1e6).Linear(); w.Plot.X.Max != 1e6 || w.Plot.Y.Label.Text != v.Plot.Y.Label.Text {
		t.Errorf("Upto(1e6).Linear() goes to %g Hz in %q", w.Plot.X.Max, w.Plot.Y.Label.Text)
	}
	if s.Plot.X.Max != 6e6 || !strings.Contains(s.Plot.Y.Label.Text, "dBm") {
		t.Error("the first figure changed")
	}
}

// TestSpectrumNames: where every name finds room beside its curve, none stands in a strip; equal names are numbered;
// a long one is cut.
func TestSpectrumNames(t *testing.T) {
	apart := []density{
		fake{"low", 1e6, 0, func(float64) float64 { return 1 }, nil},
		fake{"high", 1e6, 0, func(float64) float64 { return 1e4 }, nil},
	}
	s := newSpectrum(apart, false, 3e6)
	checkLayout(t, s.Figure)
	if s.legend.rows != nil || len(s.legend.beside) != 2 {
		t.Error("two curves 40 dB apart have no room for their names")
	}
	s = newSpectrum([]density{apart[0], apart[0]}, false, 3e6)
	checkLayout(t, s.Figure)
	if s.legend.rows == nil {
		t.Error("two curves in one place have their names beside them")
	}
	if a, b := s.legend.label(0), s.legend.label(1); a != "low (1)" || b != "low (2)" {
		t.Errorf("equal names are %q and %q, want low (1) and low (2)", a, b)
	}
	var many []density
	for i := range 12 {
		many = append(many, flat(fmt.Sprintf("candidate %d, %s", i, strings.Repeat("long ", 20)), 0))
	}
	checkLayout(t, newSpectrum(many, false, 3e6).Figure)
}

// Of very many tones the highest in each place on the axis are kept, and only those.
func TestProminent(t *testing.T) {
	lines := make([]spectrum.Line, 10*tonePlaces)
	for i := range lines {
		lines[i] = spectrum.Line{Freq: float64(i) / float64(len(lines)), Power: float64(i % 7)}
	}
	kept := prominent(lines, 1)
	if len(kept) != tonePlaces {
		t.Fatalf("%d of %d lines kept, want %d", len(kept), len(lines), tonePlaces)
	}
	for i, l := range kept {
		if place := math.Floor(l.Freq * tonePlaces); place != float64(i) {
			t.Fatalf("line %d stands in place %v", i, place)
		}
		if l.Power != 6 { // ten neighbours hold every remainder of 7
			t.Fatalf("line %d has power %v, not that of the highest", i, l.Power)
		}
	}
	few := lines[:100]
	if got := prominent(few, 1); len(got) != len(few) {
		t.Errorf("%d of %d lines kept", len(got), len(few))
	}
}
