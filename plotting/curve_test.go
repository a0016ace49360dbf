package plotting

import (
	"math"
	"testing"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// TestThin: a dense line keeps its ends and, in each pixel column, its extremes, in at most four points.
func TestThin(t *testing.T) {
	const n = 100_000
	line := make([]vg.Point, n)
	type extremes struct{ low, high vg.Length }
	columns := map[float64]extremes{}
	column := func(p vg.Point) float64 { return math.Floor(float64(p.X / pixel)) }
	add := func(m map[float64]extremes, p vg.Point) {
		e, ok := m[column(p)]
		if !ok {
			e = extremes{p.Y, p.Y}
		}
		m[column(p)] = extremes{min(e.low, p.Y), max(e.high, p.Y)}
	}
	for i := range line {
		x := float64(i) / n
		line[i] = vg.Point{X: 30 + 400*vg.Length(x), Y: vg.Length(100 + 90*math.Sin(9e4*x*x))}
		add(columns, line[i])
	}
	got := thin(line)
	if limit := 4 * 1069; len(got) > limit { // 400 points are 1067 pixels at 192 to the inch
		t.Errorf("%d points, want at most %d", len(got), limit)
	}
	if got[0] != line[0] || got[len(got)-1] != line[n-1] {
		t.Error("the ends moved")
	}
	thinned := map[float64]extremes{}
	for i, p := range got {
		add(thinned, p)
		if i > 0 && p.X < got[i-1].X {
			t.Fatalf("point %d goes back", i)
		}
	}
	for k, want := range columns {
		if thinned[k] != want {
			t.Errorf("column %g spans %v, want %v", k, thinned[k], want)
		}
	}
	if sparse := line[:50]; len(thin(sparse[:2])) != 2 {
		t.Error("a line of two points changed")
	}
	few := []vg.Point{{X: 0}, {X: 100, Y: 5}, {X: 200}}
	if len(thin(few)) != 3 {
		t.Error("a sparse line was thinned")
	}
}

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
	c := draw.NewCanvas(newSVG(100, 100), 100, 100)
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
