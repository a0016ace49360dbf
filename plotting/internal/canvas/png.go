package canvas

import (
	"bytes"
	"image/png"
	"math"
	"slices"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/vgimg"
)

// pieceLength is how many segments of a line the raster canvas draws at once.
const pieceLength = 48

// PNG is gonum's raster canvas, made fast for long lines: the time that its rasteriser takes for a line grows
// faster than the square of its length where the line goes to and fro, so lines are drawn in pieces. The pieces
// overlap by one segment, which leaves no gap at the joints, and carry the dash pattern on.
type PNG struct {
	*vgimg.Canvas
	dashes []vg.Length
	offset vg.Length
}

// NewPNG returns a canvas of w by h at so many pixels an inch.
func NewPNG(w, h vg.Length, dpi int) *PNG {
	return &PNG{Canvas: vgimg.NewWith(vgimg.UseWH(w, h), vgimg.UseDPI(dpi))}
}

// SetLineDash sets the dash pattern of lines.
func (c *PNG) SetLineDash(ds []vg.Length, offset vg.Length) {
	c.dashes, c.offset = slices.Clone(ds), offset
	c.Canvas.SetLineDash(ds, offset)
}

// Stroke draws a line along a path.
func (c *PNG) Stroke(p vg.Path) {
	if p = thinPath(p); len(p) <= pieceLength {
		c.Canvas.Stroke(p)
		return
	}
	defer c.Canvas.SetLineDash(c.dashes, c.offset)
	var piece vg.Path
	var run vg.Length // length of the line before the piece
	var last vg.Length
	flush := func() {
		if len(piece) > 1 {
			c.Canvas.SetLineDash(c.dashes, c.offset+run)
			c.Canvas.Stroke(piece)
		}
	}
	var at, start vg.Point
	for _, e := range p {
		switch e.Type {
		case vg.MoveComp:
			flush()
			piece, run, last = vg.Path{e}, 0, 0
			start = e.Pos
		case vg.CloseComp:
			e = vg.PathComp{Type: vg.LineComp, Pos: start}
			fallthrough
		case vg.LineComp:
			piece = append(piece, e)
			last += distance(at, e.Pos)
			if len(piece) > pieceLength {
				flush()
				n := len(piece)
				step := distance(piece[n-2].Pos, piece[n-1].Pos)
				run += last - step
				last = step
				piece = vg.Path{{Type: vg.MoveComp, Pos: piece[n-2].Pos}, piece[n-1]}
			}
		default: // curves are short; they stay in the piece in which they begin
			piece = append(piece, e)
		}
		at = e.Pos
	}
	flush()
}

func distance(a, b vg.Point) vg.Length {
	return vg.Length(math.Hypot(float64(b.X-a.X), float64(b.Y-a.Y)))
}

// Encode returns the drawing as a PNG file.
func (c *PNG) Encode() ([]byte, error) {
	var buf bytes.Buffer
	err := png.Encode(&buf, c.Image())
	return buf.Bytes(), err
}
