package canvas

import (
	"math"
	"testing"

	"gonum.org/v1/plot/vg"
)

// TestThin: a dense line keeps its ends and, in each pixel column, its extremes, in at most four points.
func TestThin(t *testing.T) {
	const n = 100_000
	line := make([]vg.Point, n)
	type extremes struct{ low, high vg.Length }
	columns := map[float64]extremes{}
	column := func(p vg.Point) float64 { return math.Floor(float64(p.X / Pixel)) }
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
