package plotting

import (
	"math"
	"strconv"
	"strings"

	"gonum.org/v1/plot"
)

// ticks is a plot.Ticker of round values, 1, 2 or 5 times a power of ten apart, labelled in multiples of unit. The
// unit's prefix stands in the axis label, so that the numbers stay short.
type ticks struct {
	unit  float64 // value of one unit of the labels, such as 1e6 on an axis in MHz
	about int     // labelled ticks to aim at; 0 means 6
}

// Ticks returns labelled ticks and, between them, unlabelled ones.
func (t ticks) Ticks(lo, hi float64) []plot.Tick {
	about := t.about
	if about == 0 {
		about = 6
	}
	lo, hi = lo/t.unit, hi/t.unit
	if !(hi > lo) || math.IsInf(hi-lo, 0) {
		return nil
	}
	step, parts := roundStep((hi - lo) / float64(about))
	decimals := max(0, -int(math.Floor(math.Log10(step)+1e-9)))
	minor := step / float64(parts)
	var out []plot.Tick
	// Whole multiples of the small step: added up, steps would drift and zero would be 1e-17.
	slack := 1e-9 * (hi - lo)
	for k := math.Ceil((lo - slack) / minor); k*minor <= hi+slack; k++ {
		v := k * minor
		tick := plot.Tick{Value: v * t.unit}
		if math.Mod(k, float64(parts)) == 0 {
			tick.Label = minus(strconv.FormatFloat(v, 'f', decimals, 64))
		}
		out = append(out, tick)
	}
	return out
}

// roundStep returns the smallest of 1, 2 and 5 times a power of ten that is no less than least, and into how many
// round parts it divides.
func roundStep(least float64) (step float64, parts int) {
	ten := math.Pow(10, math.Floor(math.Log10(least)))
	switch r := least / ten; {
	case r <= 1+1e-9:
		return ten, 5
	case r <= 2+1e-9:
		return 2 * ten, 4
	case r <= 5+1e-9:
		return 5 * ten, 5
	}
	return 10 * ten, 5
}

// minus writes a number's sign as a minus sign, which is as wide as a digit, and drops that of zero.
func minus(s string) string {
	if cut, ok := strings.CutPrefix(s, "-"); ok {
		if strings.Trim(cut, "0.") == "" {
			return cut
		}
		return "−" + cut
	}
	return s
}

// prefixes are the SI prefixes from 1e-18 in steps of 1000.
var prefixes = [...]string{"a", "f", "p", "n", "µ", "m", "", "k", "M", "G", "T"}

// prefix returns the SI prefix with which a value up to largest reads best, and its factor. For a squared unit
// (power 2) the prefix counts squared, as the SI has it: 1 mV² is (1 mV)², 1e-6 V².
func prefix(largest float64, power int) (symbol string, factor float64) {
	least := 1.0 // so that values lie in [1, 1000)
	if power == 2 {
		least = 0.01 // and squared ones in [0.01, 10000)
	}
	i := len(prefixes) - 1
	for i > 0 && !(math.Abs(largest) >= least*thousands(i, power)*(1-1e-9)) {
		i--
	}
	if largest == 0 {
		i = 6
	}
	return prefixes[i], thousands(i, power)
}

// thousands returns the factor of prefixes[i].
func thousands(i, power int) float64 {
	v, _ := strconv.ParseFloat("1e"+strconv.Itoa(3*power*(i-6)), 64) // the nearest double; a product of tens is not
	return v
}

// quantity writes a value with its unit, to four digits: 2.048 MHz.
func quantity(v float64, unit string) string {
	symbol, factor := prefix(v, 1)
	return minus(strconv.FormatFloat(v/factor, 'g', 4, 64)) + " " + symbol + unit
}
