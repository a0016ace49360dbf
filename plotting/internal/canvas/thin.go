package canvas

import (
	"math"

	"gonum.org/v1/plot/vg"
)

// Pixel is one pixel of a PNG at twice the nominal size, 192 to the inch.
const Pixel = vg.Length(72.0 / 192)

// thinPath returns a path that is one dense line of rising x with fewer points, every other path as it is. The canvases
// draw through it, so that figures of ten thousands of points stay small, whoever drew them.
func thinPath(p vg.Path) vg.Path {
	line := make([]vg.Point, len(p))
	for i, e := range p {
		if i == 0 && e.Type != vg.MoveComp || i > 0 && (e.Type != vg.LineComp || e.Pos.X < line[i-1].X) {
			return p
		}
		line[i] = e.Pos
	}
	var out vg.Path
	for i, at := range thin(line) {
		if i == 0 {
			out.Move(at)
		} else {
			out.Line(at)
		}
	}
	return out
}

// thin reduces a dense line to each pixel column's first, lowest, highest and last point, which draw the same pixels.
func thin(line []vg.Point) []vg.Point {
	if n := len(line); n < 3 || vg.Length(n) <= 2*(line[n-1].X-line[0].X)/Pixel {
		return line
	}
	var out []vg.Point
	for i := 0; i < len(line); {
		column := math.Floor(float64(line[i].X / Pixel))
		low, high, last := i, i, i
		for j := i + 1; j < len(line) && math.Floor(float64(line[j].X/Pixel)) == column; j++ {
			if line[j].Y < line[low].Y {
				low = j
			}
			if line[j].Y > line[high].Y {
				high = j
			}
			last = j
		}
		for k, j := range []int{i, min(low, high), max(low, high), last} {
			if k == 0 || line[j] != out[len(out)-1] {
				out = append(out, line[j])
			}
		}
		i = last + 1
	}
	return out
}
