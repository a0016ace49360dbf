package plotting

import (
	"fmt"
	"image/color"
	"testing"

	"linewright/plotting/internal/canvas"
)

// TestSeriesDiffer: no two series of a figure look alike, and up to the number of colours both colour and dash differ.
func TestSeriesDiffer(t *testing.T) {
	pairs, colours, patterns := map[string]int{}, map[color.Color]int{}, map[string]int{}
	for i := range len(palette) * len(dashes) {
		s := seriesStyle(i)
		pattern := fmt.Sprint(s.Dashes)
		pair := fmt.Sprint(s.Color, pattern)
		if j, ok := pairs[pair]; ok {
			t.Errorf("series %d looks like series %d", i, j)
		}
		pairs[pair] = i
		if i < len(palette) {
			if j, ok := colours[s.Color]; ok {
				t.Errorf("series %d has the colour of series %d", i, j)
			}
			if j, ok := patterns[pattern]; ok {
				t.Errorf("series %d has the dashes of series %d", i, j)
			}
			colours[s.Color], patterns[pattern] = i, i
		}
	}
}

// TestContrast holds the colours to the Web Content Accessibility Guidelines 2.1: 4.5 for text (1.4.3). Lines reach
// 2: the palette's lighter colours fall short of the 3 that 1.4.11 asks of graphics, which is what the dashes and the
// names beside the curves are for.
func TestContrast(t *testing.T) {
	onWhite := func(c color.Color) float64 { return 1.05 / (canvas.Luminance(c) + 0.05) }
	// Black on white is 21 by the guidelines' definition, and grey #767676 is known as the lightest that has 4.5.
	if got := onWhite(color.Black); got != 21 {
		t.Errorf("black on white is %g, want 21", got)
	}
	if got := onWhite(color.Gray{0x76}); got < 4.5 || onWhite(color.Gray{0x77}) >= 4.5 {
		t.Errorf("#767676 on white is %g, want just over 4.5", got)
	}
	for i, c := range palette {
		if got := onWhite(c); got < 2 {
			t.Errorf("line %d: contrast %.2f", i, got)
		}
		if got := onWhite(legible(c)); got < 4.5 {
			t.Errorf("text %d: contrast %.2f", i, got)
		}
	}
	if labelSize < 9 || tickSize < 9 {
		t.Error("text below 9 points")
	}
}
