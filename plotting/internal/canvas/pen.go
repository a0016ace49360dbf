package canvas

import (
	"image/color"
	"math"
	"slices"

	"gonum.org/v1/plot/vg"
)

// A pen is the state that a canvas draws with. It has the methods of vg.Canvas that set it.
type pen struct {
	m      affine
	width  vg.Length // of lines
	dashes []vg.Length
	offset vg.Length
	color  color.Color

	pushed []pen
}

// newPen returns the pen of a canvas of height h, whose own origin is at its top; vg has it at the bottom.
func newPen(h vg.Length) pen { return pen{m: affine{1, 0, 0, -1, 0, h.Points()}} }

// SetLineWidth sets the width of lines.
func (p *pen) SetLineWidth(w vg.Length) { p.width = w }

// SetLineDash sets the dash pattern of lines.
func (p *pen) SetLineDash(ds []vg.Length, offset vg.Length) {
	p.dashes, p.offset = slices.Clone(ds), offset
}

// SetColor sets the colour of everything.
func (p *pen) SetColor(c color.Color) { p.color = c }

// Rotate turns what follows counterclockwise.
func (p *pen) Rotate(rad float64) {
	sin, cos := math.Sincos(rad)
	p.m = p.m.mul(affine{cos, sin, -sin, cos, 0, 0})
}

// Translate moves what follows.
func (p *pen) Translate(by vg.Point) {
	p.m = p.m.mul(affine{1, 0, 0, 1, by.X.Points(), by.Y.Points()})
}

// Scale stretches what follows.
func (p *pen) Scale(x, y float64) { p.m = p.m.mul(affine{x, 0, 0, y, 0, 0}) }

// Push keeps the state for Pop.
func (p *pen) Push() { p.pushed = append(p.pushed, *p) }

// Pop goes back to the state of the last Push.
func (p *pen) Pop() {
	last := len(p.pushed) - 1
	kept := p.pushed[:last]
	*p = p.pushed[last]
	p.pushed = kept
}

func btoi(b bool) int {
	if b {
		return 1
	}
	return 0
}

// An affine transform takes (x, y) to (a x + c y + e, b x + d y + f), as SVG's matrix(a b c d e f).
type affine struct{ a, b, c, d, e, f float64 }

// mul returns the transform that applies n first.
func (m affine) mul(n affine) affine {
	return affine{
		m.a*n.a + m.c*n.b, m.b*n.a + m.d*n.b,
		m.a*n.c + m.c*n.d, m.b*n.c + m.d*n.d,
		m.a*n.e + m.c*n.f + m.e, m.b*n.e + m.d*n.f + m.f,
	}
}

func (m affine) apply(p vg.Point) (x, y float64) {
	return m.a*p.X.Points() + m.c*p.Y.Points() + m.e, m.b*p.X.Points() + m.d*p.Y.Points() + m.f
}

// scale returns by how much m widens lines.
func (m affine) scale() float64 { return math.Sqrt(math.Abs(m.a*m.d - m.b*m.c)) }

// turn returns the angle in degrees, clockwise as SVG counts, by which m turns the direction of writing.
func (m affine) turn() float64 { return math.Round(math.Atan2(m.b, m.a)*180/math.Pi*100) / 100 }

// bezierArc returns the start of an arc and the cubic curves that follow it, each of at most a quarter of a circle:
// control points at 4/3 tan(angle/4) of the radius along the tangents, which is within 3e-4 of the radius.
func bezierArc(arc vg.PathComp) (start vg.Point, curves [][3]vg.Point) {
	n := max(1, int(math.Ceil(math.Abs(arc.Angle)/(math.Pi/2)-1e-9)))
	step := arc.Angle / float64(n)
	k := 4.0 / 3 * math.Tan(step/4)
	at := func(t, along float64) vg.Point {
		sin, cos := math.Sincos(t)
		return vg.Point{
			X: arc.Pos.X + arc.Radius*vg.Length(cos-along*sin),
			Y: arc.Pos.Y + arc.Radius*vg.Length(sin+along*cos),
		}
	}
	for i := range n {
		a, b := arc.Start+float64(i)*step, arc.Start+float64(i+1)*step
		curves = append(curves, [3]vg.Point{at(a, k), at(b, -k), at(b, 0)})
	}
	return at(arc.Start, 0), curves
}
