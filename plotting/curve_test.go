package plotting

import (
	"math"
	"testing"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"linewright/plotting/internal/canvas"
)

// TestDenseGonumPlot: gonum's raster canvas takes half a minute for an oscillating line of 4,000 points, and its SVG
// canvas a megabyte for this one.
func TestDenseGonumPlot(t *testing.T) {
	points := make(plotter.XYs, 50_000)
	for i := range points {
		points[i] = plotter.XY{X: float64(i), Y: math.Sin(float64(i) * 2)}
	}
	line, err := plotter.NewLine(points)
	if err != nil {
		t.Fatal(err)
	}
	p := plot.New()
	p.Add(line)
	b, err := Render(p)
	if err != nil {
		t.Fatal(err)
	}
	if n := len(b.Data[mimeSVG].(string)); n > 100_000 {
		t.Errorf("%d bytes of SVG", n)
	}
}

func TestEnvelope(t *testing.T) {
	c := draw.NewCanvas(canvas.NewSVG(100, 100), 100, 100)
	e := newEnvelope(c, [][]vg.Point{{{X: 10, Y: 0}, {X: 30, Y: 20}}, {{X: 60, Y: 50}, {X: 60, Y: 80}}})
	for _, tt := range []struct {
		from, to, low, high vg.Length
		ok                  bool
	}{
		{15, 19, 5, 10, true}, {10, 30, 0, 20, true}, {40, 50, 0, 0, false}, {59, 61, 50, 80, true}, {0, 9, 0, 0, false},
	} {
		low, high, ok := e.over(tt.from, tt.to)
		if ok != tt.ok || ok && (math.Abs(float64(low-tt.low)) > 1e-9 || math.Abs(float64(high-tt.high)) > 1e-9) {
			t.Errorf("over(%g, %g) = %g, %g, %v; want %g, %g, %v", tt.from, tt.to, low, high, ok, tt.low, tt.high, tt.ok)
		}
	}
}
