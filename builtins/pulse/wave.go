package pulse

import (
	"context"
	"fmt"
	"math"

	"linewright/builtins/page"
)

// Wave returns the waveform of a sequence of symbol levels in volts: perSymbol samples a symbol, taken at the middles
// (k + 1/2)/perSymbol of equal slots, so that none falls on an edge of a slot. Before the first symbol and after the
// last there are no pulses, and what shapes reach beyond the sequence is cut off; the level before the first symbol is 0
// for a Transition. It panics if perSymbol is below 1, if a level is not finite, where [Drive.Symbol] fails, and when the
// running cell is interrupted.
func (d *Drive) Wave(levels []float64, perSymbol int) []float64 {
	if perSymbol < 1 {
		panic(fmt.Errorf("pulse: Wave with %d samples a symbol; give at least 1", perSymbol))
	}
	type key struct{ prev, next float64 }
	type samples struct {
		first int // sample of the symbol's start grid that v[0] stands at
		v     []float64
	}
	known := map[key]samples{}
	out := make([]float64, len(levels)*perSymbol)
	prev := 0.0
	ctx := page.Context()
	for n, a := range levels {
		if n%1024 == 0 && ctx.Err() != nil {
			panic(fmt.Errorf("pulse: Wave: interrupted: %w", context.Cause(ctx)))
		}
		if !finite(a) {
			panic(fmt.Errorf("pulse: Wave: level %v of symbol %d is not a finite number", a, n))
		}
		k := key{next: a}
		if d.transition != nil {
			k.prev = prev
		}
		s, ok := known[k]
		if !ok {
			shape, err := d.Symbol(k.prev, a)
			if err != nil {
				panic(err)
			}
			from, to := shape.Support()
			s.first = int(math.Floor(from)) * perSymbol
			s.v = make([]float64, int(math.Ceil(to))*perSymbol-s.first)
			for i := range s.v {
				s.v[i] = d.Volts * shape.At((float64(s.first+i)+0.5)/float64(perSymbol))
			}
			known[k] = s
		}
		start := n*perSymbol + s.first
		for i := max(0, -start); i < len(s.v) && start+i < len(out); i++ {
			out[start+i] += s.v[i]
		}
		prev = a
	}
	return out
}
