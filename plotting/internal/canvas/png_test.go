package canvas

import (
	"image"
	"math"
	"testing"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/vgimg"
)

// TestPieces: a line drawn in pieces looks as gonum draws it whole, dashed or not. Joints may be a shade darker, where
// the pieces overlap.
func TestPieces(t *testing.T) {
	var p vg.Path
	for i := range 400 {
		at := vg.Point{X: 10 + vg.Length(i), Y: vg.Length(100 + 60*math.Sin(float64(i)/15))}
		if i == 0 {
			p.Move(at)
		} else {
			p.Line(at)
		}
	}
	for name, dash := range map[string][]vg.Length{"solid": nil, "dashed": {7, 5}, "dash-dot": {8, 3, 2, 3}} {
		t.Run(name, func(t *testing.T) {
			pieces := NewPNG(420, 200, 96)
			whole := vgimg.NewWith(vgimg.UseWH(420, 200), vgimg.UseDPI(96))
			for _, c := range []vg.Canvas{pieces, whole} {
				c.SetLineDash(dash, 2)
				c.SetLineWidth(1.5)
				c.Stroke(p)
			}
			a, b := pieces.Image().(*image.RGBA), whole.Image().(*image.RGBA)
			differing := 0
			for i := range a.Pix {
				if d := int(a.Pix[i]) - int(b.Pix[i]); d > 40 || d < -100 {
					differing++
				}
			}
			if differing > 4*40 { // 40 pixels, four channels each: fewer than six a joint
				t.Errorf("%d pixels differ", differing/4)
			}
		})
	}
}
