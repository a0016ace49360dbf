package plotting

import (
	"errors"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"linewright/builtins/pulse"
)

var pulseTrain = pulse.Train{BitRate: 1e6, Level: 3}

// TestWaveEdges: rectangles have upright edges at their exact times and nothing but their corners.
func TestWaveEdges(t *testing.T) {
	for _, duty := range []float64{1, 0.5, 0.25, 1.0 / 3, 0.7} {
		tr := pulseTrain
		tr.Shape = pulse.Rect(duty)
		d, err := tr.Drive(marks{})
		if err != nil {
			t.Fatal(err)
		}
		v := wave(d, []float64{1, 0, -1})
		var got [][2]float64
		for i := range v.xs {
			got = append(got, [2]float64{math.Round(v.xs[i]*1e6*1e9) / 1e9, v.ys[i]})
		}
		round := func(x float64) float64 { return math.Round(x*1e9) / 1e9 }
		want := [][2]float64{{0, 3}, {round(duty), 3}, {round(duty), 0}, {2, 0}, {2, -3}, {round(2 + duty), -3}, {round(2 + duty), 0}, {3, 0}}
		if duty == 1 {
			want = [][2]float64{{0, 3}, {1, 3}, {1, 0}, {2, 0}, {2, -3}, {3, -3}}
		}
		if diff := cmp.Diff(want, got); diff != "" {
			t.Errorf("duty %g (-want +got):\n%s", duty, diff)
		}
	}
}

// TestWaveSmooth: a smooth pulse is drawn through its values, without upright edges.
func TestWaveSmooth(t *testing.T) {
	tr := pulseTrain
	tr.Shape = pulse.HalfSine(1)
	d, err := tr.Drive(marks{})
	if err != nil {
		t.Fatal(err)
	}
	v := wave(d, []float64{1})
	for i, x := range v.xs {
		if want := 3 * math.Sin(math.Pi*x*1e6); math.Abs(v.ys[i]-want) > 3e-4 {
			t.Errorf("at %g µs %g V, want %g", x*1e6, v.ys[i], want)
		}
		if i > 0 && x <= v.xs[i-1] {
			t.Errorf("an upright edge at %g µs", x*1e6)
		}
	}
}

// stuffing puts a 0 after every two 1s.
type stuffing struct{ marks }

func (stuffing) Encode(bits []byte) (out []float64, err error) {
	ones := 0
	for _, b := range bits {
		out = append(out, float64(b))
		if ones++; b == 0 {
			ones = 0
		}
		if ones == 2 {
			out, ones = append(out, 0), 0
		}
	}
	return out, nil
}

// framed puts a mark before every word of two bits.
type framed struct{ marks }

// tailed owes two symbols at the end.
type tailed struct{ marks }

func (c tailed) Encode(bits []byte) ([]float64, error) {
	out, err := c.marks.Encode(bits)
	return append(out, 0, 0), err
}

func (framed) Bits() int { return 2 }
func (framed) Encode(bits []byte) (out []float64, err error) {
	if len(bits)%2 != 0 {
		return nil, errors.New("1 bit over")
	}
	for i := 0; i < len(bits); i += 2 {
		out = append(out, -1, float64(bits[i]), float64(bits[i+1]))
	}
	return out, nil
}
func (framed) FixedRate() (int, int, bool) { return 2, 3, true }

// TestWords: bits stand above the symbols by which they make the sequence grow.
func TestWords(t *testing.T) {
	for _, tt := range []struct {
		name string
		code coder
		bits []byte
		want []word
	}{
		{"one symbol a bit", marks{}, []byte{1, 0}, []word{{0, 1, "1"}, {1, 2, "0"}}},
		{"stuffed", stuffing{}, []byte{1, 1, 0, 1}, []word{{0, 1, "1"}, {1, 3, "1"}, {3, 4, "0"}, {4, 5, "1"}}},
		{"framed words", framed{}, []byte{1, 0, 0, 1}, []word{{0, 3, "10"}, {3, 6, "01"}}},
		{"with a tail", tailed{}, []byte{1, 0}, []word{{0, 1, "1"}, {1, 2, "0"}}},
		{"too many to write", marks{}, make([]byte, mostWords+1), nil},
	} {
		if diff := cmp.Diff(tt.want, words(tt.code, tt.bits, 1), cmp.AllowUnexported(word{})); diff != "" {
			t.Errorf("%s (-want +got):\n%s", tt.name, diff)
		}
	}
}

// TestWaveformBits: bits are written where all find room, and left out where they do not.
func TestWaveformBits(t *testing.T) {
	for _, tt := range []struct {
		n    int
		want bool
	}{{8, true}, {40, true}, {200, false}, {5000, false}} {
		f := newWaveform(marks{}, pulseTrain, make([]byte, tt.n))
		svg, err := f.SVG()
		if err != nil {
			t.Fatal(err)
		}
		if got := strings.Count(svg, ">0</text>") >= tt.n; got != tt.want {
			t.Errorf("%d bits: written %v, want %v", tt.n, got, tt.want)
		}
		if len(svg) > 200_000 {
			t.Errorf("%d bits: %d bytes", tt.n, len(svg))
		}
		checkLayout(t, f)
	}
}

func TestWaveformPanics(t *testing.T) {
	bad := pulseTrain
	bad.Level = math.NaN()
	for name, tt := range map[string]struct {
		call func()
		want string
	}{
		"no bits":   {func() { newWaveform(marks{}, pulseTrain, nil) }, "plotting: no waveform: 0 bits give no symbols"},
		"odd bits":  {func() { newWaveform(framed{}, pulseTrain, []byte{1}) }, "plotting: no waveform of 1 bits: 1 bit over"},
		"bad train": {func() { newWaveform(marks{}, bad, []byte{1}) }, "plotting: no waveform: pulse: "},
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

func TestLevelTicks(t *testing.T) {
	labels := func(levels []float64, volts, unit, span float64) (out []string) {
		for _, k := range levelTicks(levels, volts, unit, span) {
			out = append(out, k.Label)
		}
		return out
	}
	if diff := cmp.Diff([]string{"−2.37", "0", "2.37"}, labels([]float64{-1, 0, 1}, 2.37, 1, 4.74)); diff != "" {
		t.Errorf("three levels (-want +got):\n%s", diff)
	}
	if diff := cmp.Diff([]string{"−750", "750"}, labels([]float64{-1, 1}, 0.75, 1e-3, 1.5)); diff != "" {
		t.Errorf("in millivolts (-want +got):\n%s", diff)
	}
	if got := labels([]float64{0, 0.01, 1}, 1, 1, 1); got != nil {
		t.Errorf("close levels have ticks %v", got)
	}
	if got := labels(make([]float64, 10), 1, 1, 1); got != nil {
		t.Errorf("ten levels have ticks %v", got)
	}
}
