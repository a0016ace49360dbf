package plotting

import (
	"math"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// TestPrefix: the prefixes and their squares are those of the SI brochure (9th edition, section 3).
func TestPrefix(t *testing.T) {
	for _, tt := range []struct {
		v      float64
		power  int
		symbol string
		factor float64
	}{
		{6.144e6, 1, "M", 1e6}, {999.9e3, 1, "k", 1e3}, {1e6, 1, "M", 1e6}, {1, 1, "", 1}, {0.5, 1, "m", 1e-3}, {-2e-6, 1, "µ", 1e-6},
		{3e12, 1, "T", 1e12}, {3e18, 1, "T", 1e12}, {1e-30, 1, "a", 1e-18}, {0, 1, "", 1},
		{4, 2, "", 1}, {0.2, 2, "", 1}, {0.05, 2, "", 1}, {0.005, 2, "m", 1e-6}, {5.7e-7, 2, "m", 1e-6}, {5.7e-8, 2, "m", 1e-6}, {5.7e-9, 2, "µ", 1e-12}, {0, 2, "", 1},
	} {
		symbol, factor := prefix(tt.v, tt.power)
		if symbol != tt.symbol || factor != tt.factor {
			t.Errorf("prefix(%g, %d) = %q, %g; want %q, %g", tt.v, tt.power, symbol, factor, tt.symbol, tt.factor)
		}
	}
}

func TestQuantity(t *testing.T) {
	for v, want := range map[float64]string{2.048e6: "2.048 MHz", 10e6: "10 MHz", 0: "0 Hz", 1234.5678: "1.235 kHz", -3e-3: "−3 mHz"} {
		if got := quantity(v, "Hz"); got != want {
			t.Errorf("quantity(%g) = %q, want %q", v, got, want)
		}
	}
}

func TestTicks(t *testing.T) {
	for _, tt := range []struct {
		name   string
		ticks  ticks
		lo, hi float64
		labels []string
	}{
		{"MHz", ticks{unit: 1e6, about: 8}, 0, 6.144e6, []string{"0", "1", "2", "3", "4", "5", "6"}},
		{"decibels", ticks{unit: 1}, -115, -40, []string{"−100", "−80", "−60", "−40"}},
		{"fractions", ticks{unit: 1}, 0, 0.35, []string{"0.0", "0.1", "0.2", "0.3"}},
		{"zero is no −0", ticks{unit: 1}, -0.3, 0.3, []string{"−0.3", "−0.2", "−0.1", "0.0", "0.1", "0.2", "0.3"}},
		{"no drift", ticks{unit: 1e-6}, 0, 0.7e-6, []string{"0.0", "0.2", "0.4", "0.6"}},
	} {
		t.Run(tt.name, func(t *testing.T) {
			var labels []string
			for _, k := range tt.ticks.Ticks(tt.lo, tt.hi) {
				if k.Value < tt.lo-1e-9*(tt.hi-tt.lo) || k.Value > tt.hi+1e-9*(tt.hi-tt.lo) {
					t.Errorf("tick at %g, outside %g to %g", k.Value, tt.lo, tt.hi)
				}
				if !k.IsMinor() {
					labels = append(labels, k.Label)
				}
			}
			if diff := cmp.Diff(tt.labels, labels); diff != "" {
				t.Errorf("labels (-want +got):\n%s", diff)
			}
		})
	}
	for _, r := range [][2]float64{{1, 1}, {2, 1}, {math.NaN(), 1}, {math.Inf(-1), 1}} {
		if got := (ticks{unit: 1}).Ticks(r[0], r[1]); got != nil {
			t.Errorf("range %v has ticks %v", r, got)
		}
	}
}
