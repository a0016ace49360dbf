package pulse

import (
	"context"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"linewright/builtins/page"
)

// A fake is a code for these tests.
type fake struct {
	levels        []float64
	bits, symbols int // both 0: data change the rate
}

func (f fake) Name() string                      { return "fake" }
func (f fake) Levels() []float64                 { return f.levels }
func (f fake) FixedRate() (b, s int, fixed bool) { return f.bits, f.symbols, f.symbols > 0 }

var (
	ternary  = fake{[]float64{-1, 0, 1}, 1, 1}
	quarter  = fake{[]float64{-3, -1, 1, 3}, 2, 1}
	fiveFour = fake{[]float64{-1, 1}, 4, 5}
	stuffing = fake{levels: []float64{-1, 1}}
	silent   = fake{[]float64{0}, 1, 1}
)

func TestDrive(t *testing.T) {
	tests := []struct {
		name       string
		train      Train
		code       fake
		rate, volt float64
	}{
		{"zero value", Train{}, ternary, 1, 1},
		{"bit rate", Train{BitRate: 100e6}, fiveFour, 125e6, 1},
		{"symbol rate", Train{SymbolRate: 80e3, Level: 2.5}, stuffing, 80e3, 2.5},
		{"peak", Train{Peak: 2.5}, quarter, 1, 2.5 / 3},
		{"two bits a symbol", Train{BitRate: 160e3}, quarter, 80e3, 1},
	}
	for _, test := range tests {
		d, err := test.train.Drive(test.code)
		if err != nil {
			t.Errorf("%s: %v", test.name, err)
			continue
		}
		if d.SymbolRate != test.rate || d.Volts != test.volt {
			t.Errorf("%s: %v symbols/s and %v V, want %v and %v", test.name, d.SymbolRate, d.Volts, test.rate, test.volt)
		}
	}
}

func TestDriveRefusals(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	square := func(_, next float64) Shape { return Scaled(Rect(1), next) }
	tests := []struct {
		train Train
		code  fake
		want  string
	}{
		{Train{BitRate: -1}, ternary, "BitRate is -1"},
		{Train{SymbolRate: nan}, ternary, "SymbolRate is NaN"},
		{Train{Level: -3}, ternary, "Level is -3"},
		{Train{Peak: inf}, ternary, "Peak is +Inf"},
		{Train{Load: -75}, ternary, "Load is -75"},
		{Train{BitRate: 1, SymbolRate: 2}, ternary, "both BitRate 1 Hz and SymbolRate 2 Hz"},
		{Train{Level: 1, Peak: 2}, ternary, "both Level 1 and Peak 2 volts"},
		{Train{BitRate: 64e3}, stuffing, "give SymbolRate"},
		{Train{Peak: 1}, silent, "all of whose levels are 0"},
		{Train{Transition: square, Shape: Rect(0.5)}, ternary, "Transition gives a symbol's whole waveform and excludes Shape and Shapes"},
		{Train{Transition: square, Shapes: map[float64]Shape{1: Rect(0.5)}}, ternary, "excludes Shape and Shapes"},
		{Train{Shapes: map[float64]Shape{1: Rect(0.5), 2: Rect(0.5)}}, ternary, "a pulse for level 2, which fake does not have"},
		{Train{Shapes: map[float64]Shape{nan: Rect(0.5)}}, ternary, "a pulse for level NaN"},
	}
	for _, test := range tests {
		_, err := test.train.Drive(test.code)
		if err == nil || !strings.HasPrefix(err.Error(), "pulse: ") || !strings.Contains(err.Error(), test.want) {
			t.Errorf("%v: error %v does not have %q", test.train, err, test.want)
		}
	}
}

func TestSymbolRefusals(t *testing.T) {
	tests := []struct {
		transition func(prev, next float64) Shape
		want       string
	}{
		{func(_, _ float64) Shape { return Delayed(Rect(1), 0.1) }, "pulse: Transition(-1, 1) gives a shape over 0.1 to 1.1; it must stay within its own symbol"},
		{func(_, _ float64) Shape { return Rect(2) }, "pulse: Transition(-1, 1) failed: pulse: Rect(2)"},
	}
	for _, test := range tests {
		d, err := Train{Transition: test.transition}.Drive(ternary)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := d.Symbol(-1, 1); err == nil || !strings.Contains(err.Error(), test.want) {
			t.Errorf("error %v does not have %q", err, test.want)
		}
		if got := failure(func() { d.Wave([]float64{-1, 1}, 4) }); !strings.HasPrefix(got, "pulse: Transition(0, -1)") {
			t.Errorf("Wave fails with %q, want the transition from rest", got)
		}
	}
}

func TestWave(t *testing.T) {
	long := Points([]float64{-0.5, 0, 1, 1.5}, []float64{1, 1, 1, 1}) // reaches half a symbol to both sides
	tests := []struct {
		name   string
		train  Train
		levels []float64
		per    int
		want   []float64
	}{
		{"full width", Train{Level: 3}, []float64{1, 0, -1}, 2, []float64{3, 3, 0, 0, -3, -3}},
		{"half width", Train{Shape: Rect(0.5)}, []float64{1, -1}, 4, []float64{1, 1, 0, 0, -1, -1, 0, 0}},
		{"neighbours add up, ends are cut", Train{Shape: long}, []float64{1, 0, 2}, 2, []float64{1, 1, 1, 2, 2, 2}},
		{"own shapes", Train{Shape: Rect(0.5), Shapes: map[float64]Shape{-1: Rect(1)}}, []float64{1, -1}, 2, []float64{1, 0, -1, -1}},
		{"transition", Train{Peak: 2, Transition: func(prev, next float64) Shape {
			return Points([]float64{0, 0.5, 0.5, 1}, []float64{prev, prev, next, next})
		}}, []float64{1, -1}, 2, []float64{0, 2, 2, -2}},
		{"nothing", Train{}, nil, 3, []float64{}},
	}
	for _, test := range tests {
		d, err := test.train.Drive(ternary)
		if err != nil {
			t.Fatal(err)
		}
		if diff := cmp.Diff(test.want, d.Wave(test.levels, test.per)); diff != "" {
			t.Errorf("%s (-want +got):\n%s", test.name, diff)
		}
	}
	d, _ := Train{}.Drive(ternary)
	if got := failure(func() { d.Wave([]float64{1}, 0) }); !strings.Contains(got, "0 samples a symbol") {
		t.Errorf("message %q", got)
	}
	if got := failure(func() { d.Wave([]float64{1, math.NaN()}, 1) }); !strings.Contains(got, "level NaN of symbol 1") {
		t.Errorf("message %q", got)
	}
}

// Scaled shapes of a train's own levels: the factor of the level is kept, and a Transition has none.
func TestSymbol(t *testing.T) {
	d, err := Train{Shapes: map[float64]Shape{-3: Rect(0.5)}}.Drive(quarter)
	if err != nil {
		t.Fatal(err)
	}
	s, err := d.Symbol(1, -3)
	if err != nil || s.At(0.25) != -3 || s.At(0.75) != 0 {
		t.Errorf("symbol of level -3 is %v and %v, error %v; want -3, 0", s.At(0.25), s.At(0.75), err)
	}
	if _, ok := d.Single(); ok {
		t.Error("a train with a shape of its own for one level says that it has a single pulse")
	}
	if single, err := (Train{Shape: Rect(0.5)}).Drive(quarter); err != nil {
		t.Error(err)
	} else if s, ok := single.Single(); !ok || s.At(0.75) != 0 {
		t.Error("a train with one pulse does not give it")
	}
	if d.Transitional() {
		t.Error("a train without Transition says that it looks at the level before")
	}
}

// canceled is a host whose cell was interrupted.
type canceled struct{ page.Host }

func (canceled) Context() context.Context {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	return ctx
}

func TestWaveInterrupted(t *testing.T) {
	page.Attach(canceled{})
	defer page.Attach(running{})
	d, err := Train{}.Drive(ternary)
	if err != nil {
		t.Fatal(err)
	}
	if got := failure(func() { d.Wave(make([]float64, 10), 1) }); !strings.Contains(got, "interrupted") {
		t.Errorf("message %q, want that it was interrupted", got)
	}
}

// running is a host whose cell was not.
type running struct{ page.Host }

func (running) Context() context.Context { return context.Background() }
