package plotting

import (
	"math"
	"testing"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// A recorder draws a figure and keeps where its texts and dark lines lie, in points from the top left.
type recorder struct {
	*svgCanvas
	texts []writing
	lines [][][2]float64
}

// A writing is one text and the box of its letters: from a descender to a capital.
type writing struct {
	text           string
	x0, y0, x1, y1 float64
}

func (r *recorder) FillString(face font.Face, at vg.Point, s string) {
	r.svgCanvas.FillString(face, at, s)
	size := face.Font.Size
	w := writing{s, math.Inf(1), math.Inf(1), math.Inf(-1), math.Inf(-1)}
	for _, corner := range []vg.Point{{X: 0, Y: -0.2 * size}, {X: face.Width(s), Y: 0.72 * size}} {
		x, y := r.state.m.apply(at.Add(corner))
		w.x0, w.y0, w.x1, w.y1 = min(w.x0, x), min(w.y0, y), max(w.x1, x), max(w.y1, y)
	}
	r.texts = append(r.texts, w)
}

func (r *recorder) Stroke(p vg.Path) {
	r.svgCanvas.Stroke(p)
	if luminance(r.state.color) > 0.5 { // grid and boundaries may pass behind a text
		return
	}
	var line [][2]float64
	for _, e := range p {
		if e.Type == vg.CloseComp {
			continue // marks are small; their last side is near the others
		}
		x, y := r.state.m.apply(e.Pos)
		if e.Type == vg.MoveComp {
			r.lines, line = append(r.lines, line), nil
		}
		line = append(line, [2]float64{x, y})
	}
	r.lines = append(r.lines, line)
}

// canvasOf returns where a figure of the default size draws its plot.
func canvasOf(c vg.CanvasSizer) draw.Canvas {
	return draw.Crop(draw.New(c), margin, -margin, margin, -margin)
}

// checkLayout fails unless all texts of the figure lie within it, apart from each other and clear of all lines.
func checkLayout(t *testing.T, f *Figure) {
	t.Helper()
	width, height, err := f.pixels()
	if err != nil {
		t.Fatal(err)
	}
	r := &recorder{svgCanvas: newSVG(vg.Length(width)*0.75, vg.Length(height)*0.75)}
	f.draw(r, *f.Plot)
	if len(r.texts) < 4 {
		t.Errorf("only %d texts", len(r.texts))
	}
	for i, a := range r.texts {
		if a.x0 < 1 || a.y0 < 1 || a.x1 > float64(width)*0.75-1 || a.y1 > float64(height)*0.75-1 {
			t.Errorf("%q leaves the figure: %+v", a.text, a)
		}
		for _, b := range r.texts[:i] {
			if a.x0 < b.x1 && b.x0 < a.x1 && a.y0 < b.y1 && b.y0 < a.y1 {
				t.Errorf("%q %+v lies over %q %+v", a.text, a, b.text, b)
			}
		}
		for _, l := range r.lines {
			for k := range max(0, len(l)-1) {
				if crosses(l[k], l[k+1], a) {
					t.Errorf("a line from %.1f to %.1f runs through %q %+v", l[k], l[k+1], a.text, a)
				}
			}
		}
	}
}

// crosses reports whether the line from a to b meets the box, by cutting it at the box's sides in turn.
func crosses(a, b [2]float64, w writing) bool {
	from, to := 0.0, 1.0
	for axis, side := range [2][2]float64{{w.x0, w.x1}, {w.y0, w.y1}} {
		d := b[axis] - a[axis]
		if d == 0 {
			if a[axis] <= side[0] || a[axis] >= side[1] {
				return false
			}
			continue
		}
		s0, s1 := (side[0]-a[axis])/d, (side[1]-a[axis])/d
		from, to = max(from, min(s0, s1)), min(to, max(s0, s1))
	}
	return from < to
}
