package plotting

import (
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// A curve is one series: a named line through points of rising x. It sets no axis range, and what leaves the axes is
// cut off at their edge.
type curve struct {
	name   string
	xs, ys []float64 // y may be -Inf, a line that falls out of the figure, or NaN, a gap
	style  draw.LineStyle
}

// Plot draws the curve.
func (v *curve) Plot(c draw.Canvas, p *plot.Plot) {
	c.StrokeLines(v.style, c.ClipLinesXY(v.lines(c, p)...)...)
}

// lines returns the curve on the canvas, parted at its gaps.
func (v *curve) lines(c draw.Canvas, p *plot.Plot) [][]vg.Point {
	x, y := p.Transforms(&c)
	below, above := y(p.Y.Min)-c.Size().Y, y(p.Y.Max)+c.Size().Y
	var lines [][]vg.Point
	var line []vg.Point
	for i := range v.xs {
		if math.IsNaN(v.ys[i]) {
			lines, line = append(lines, line), nil
			continue
		}
		// Far outside, the height does not matter, and infinite coordinates cannot be cut.
		at := vg.Point{X: x(v.xs[i]), Y: below}
		if !math.IsInf(v.ys[i], -1) {
			at.Y = min(max(y(v.ys[i]), below), above)
		}
		line = append(line, at)
	}
	return append(lines, line)
}

// An envelope holds the lowest and highest place of a curve over each point of the canvas's width.
type envelope struct {
	left      vg.Length
	low, high []vg.Length // low > high: no curve there
}

func newEnvelope(c draw.Canvas, lines [][]vg.Point) envelope {
	n := int(math.Ceil(c.Size().X.Points())) + 1
	e := envelope{left: c.Min.X, low: make([]vg.Length, n), high: make([]vg.Length, n)}
	for i := range n {
		e.low[i], e.high[i] = vg.Length(math.Inf(1)), vg.Length(math.Inf(-1))
	}
	touch := func(i int, y vg.Length) {
		if i >= 0 && i < n {
			e.low[i], e.high[i] = min(e.low[i], y), max(e.high[i], y)
		}
	}
	for _, l := range lines {
		for k := range max(0, len(l)-1) {
			a, b := l[k], l[k+1]
			from, to := int(math.Floor((a.X - c.Min.X).Points())), int(math.Floor((b.X - c.Min.X).Points()))
			touch(from, a.Y)
			touch(to, b.Y)
			for i := from + 1; i <= to; i++ { // where the line crosses from one step to the next
				s := (c.Min.X + vg.Length(i) - a.X) / (b.X - a.X)
				touch(i-1, a.Y+s*(b.Y-a.Y))
				touch(i, a.Y+s*(b.Y-a.Y))
			}
		}
	}
	return e
}

// over returns the lowest and highest place between two abscissas; ok is false where there is no curve.
func (e envelope) over(from, to vg.Length) (low, high vg.Length, ok bool) {
	low, high = vg.Length(math.Inf(1)), vg.Length(math.Inf(-1))
	for i := max(0, int((from - e.left).Points())); i <= int((to-e.left).Points()) && i < len(e.low); i++ {
		low, high = min(low, e.low[i]), max(high, e.high[i])
	}
	return low, high, low <= high
}
