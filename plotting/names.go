package plotting

import (
	"image/color"
	"math"
	"unicode/utf8"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"linewright/plotting/internal/canvas"
)

const (
	longestName = 40 // characters of a name that a figure shows
	nameGap     = 3  // points between a name and what is beside it
	swatch      = 24 // points of line before a name in the strip
)

// names names the curves of a figure: each beside its curve where all find room, else all of them in a strip above the
// axes, where they cover nothing.
type names struct {
	curves []*curve
	marks  []draw.GlyphDrawer // mark of each curve in the strip, nil for none
	avoid  func(draw.Canvas, *plot.Plot) []vg.Rectangle

	// What fit decides.
	beside []vg.Point // lower left corners on the canvas
	rows   [][]int    // curves in each row of the strip; nil where the names stand beside the curves
}

func (n *names) label(i int) string {
	name := n.curves[i].name
	if utf8.RuneCountInString(name) > longestName {
		name = string([]rune(name)[:longestName-1]) + "…"
	}
	return name
}

func (n *names) textStyle(i int, p *plot.Plot) text.Style {
	return text.Style{Font: font.From(sans, labelSize), Color: legible(rgb(n.curves[i].style.Color)), Handler: p.TextHandler}
}

func rgb(c color.Color) color.NRGBA { return color.NRGBAModel.Convert(c).(color.NRGBA) }

// fit decides where the names go on a canvas of this size.
func (n *names) fit(p *plot.Plot, c draw.Canvas) {
	n.beside, n.rows = nil, nil
	data := p.DataCanvas(c)
	if n.beside = n.place(p, data); n.beside != nil {
		return
	}
	used := vg.Length(math.Inf(1))
	for i := range n.curves {
		width := n.entry(i, p)
		if used += width; used > data.Size().X {
			n.rows, used = append(n.rows, nil), width
		}
		last := len(n.rows) - 1
		n.rows[last] = append(n.rows[last], i)
	}
}

// entry returns the width of a name in the strip.
func (n *names) entry(i int, p *plot.Plot) vg.Length {
	sty := n.textStyle(i, p)
	return swatch + nameGap + sty.Width(" ")*2 + sty.Width(n.label(i)) + 2*nameGap
}

// place looks for a place beside each curve, where the name crosses no curve, no other name and nothing else. It
// returns nil if one finds none.
func (n *names) place(p *plot.Plot, c draw.Canvas) []vg.Point {
	envelopes := make([]envelope, len(n.curves))
	for i, v := range n.curves {
		envelopes[i] = newEnvelope(c, c.ClipLinesXY(v.lines(c, p)...))
	}
	taken := n.avoid(c, p)
	least := vg.Length(3 * nameGap) // of room: the name must be nearer to its own curve than to any other
	_, inCells := p.TextHandler.(canvas.Characters)
	if inCells {
		least = 2 * canvas.CellHeight
	}
	var out []vg.Point
	for i := range n.curves {
		sty := n.textStyle(i, p)
		width, height := sty.Width(n.label(i)), sty.Height(n.label(i))
		var best vg.Rectangle
		bestScore, found := vg.Length(0), false
		for x := c.Min.X + 2*nameGap; x+width+2*nameGap <= c.Max.X; x += 4 {
			low, high, ok := envelopes[i].over(x-nameGap, x+width+nameGap)
			lowest, highest, there := envelopes[i].over(x+width/2-1, x+width/2+1)
			if !ok || !there {
				continue
			}
			for side, y := range []vg.Length{high + nameGap, low - nameGap - height} {
				// How far the middle of the curve is off because its sides are in the way of the name.
				off := []vg.Length{high - highest, lowest - low}[side]
				if off > height {
					continue
				}
				if inCells { // whole rows, that next to the curve
					y = vg.Length(math.Ceil(float64(high/canvas.CellHeight))) * canvas.CellHeight
					if side == 1 {
						y = vg.Length(math.Floor(float64(low/canvas.CellHeight))-1) * canvas.CellHeight
					}
				}
				box := vg.Rectangle{Min: vg.Point{X: x, Y: y}, Max: vg.Point{X: x + width, Y: y + height}}
				if box.Min.Y < c.Min.Y || box.Max.Y > c.Max.Y || overlaps(box, taken) {
					continue
				}
				room := clearance(box, envelopes, i, 4*height)
				if room < least {
					continue
				}
				// Best close to the curve, and where that is high: there it is seen.
				if score := room - 2*off + 0.2*(y-c.Min.Y); !found || score > bestScore {
					best, bestScore, found = box, score, true
				}
			}
		}
		if !found {
			return nil
		}
		taken = append(taken, best)
		out = append(out, best.Min)
	}
	return out
}

// clearance returns how far the nearest other curve is from a box, at most most, and -1 if one crosses it.
func clearance(box vg.Rectangle, es []envelope, own int, most vg.Length) vg.Length {
	room := most
	for i, e := range es {
		low, high, ok := e.over(box.Min.X-nameGap, box.Max.X+nameGap)
		switch {
		case i == own || !ok:
		case low > box.Max.Y:
			room = min(room, low-box.Max.Y)
		case high < box.Min.Y:
			room = min(room, box.Min.Y-high)
		default:
			return -1
		}
	}
	return room
}

func overlaps(box vg.Rectangle, others []vg.Rectangle) bool {
	for _, o := range others {
		if box.Min.X < o.Max.X+nameGap && o.Min.X < box.Max.X+nameGap && box.Min.Y < o.Max.Y && o.Min.Y < box.Max.Y {
			return true
		}
	}
	return false
}

// GlyphBoxes keeps room for the strip above the axes.
func (n *names) GlyphBoxes(p *plot.Plot) []plot.GlyphBox {
	if n.rows == nil {
		return nil
	}
	height := vg.Length(len(n.rows))*n.rowHeight(p) + 2*nameGap
	return []plot.GlyphBox{{Y: 1, Rectangle: vg.Rectangle{Max: vg.Point{Y: height}}}}
}

func (n *names) rowHeight(p *plot.Plot) vg.Length { return n.textStyle(0, p).Height("X") + 1 }

// Plot writes the names.
func (n *names) Plot(c draw.Canvas, p *plot.Plot) {
	for i, at := range n.beside {
		sty := n.textStyle(i, p)
		c.FillText(sty, vg.Point{X: at.X, Y: at.Y + sty.FontExtents().Descent}, n.label(i))
	}
	height := n.rowHeight(p)
	for k, row := range n.rows {
		x, y := c.Min.X, c.Max.Y+2*nameGap+vg.Length(len(n.rows)-1-k)*height
		for _, i := range row {
			sty := n.textStyle(i, p)
			middle := y + height/2
			// Three points: in a terminal, a line of two would lose its dashes.
			c.StrokeLines(n.curves[i].style, []vg.Point{{X: x, Y: middle}, {X: x + swatch/2, Y: middle}, {X: x + swatch, Y: middle}})
			if n.marks[i] != nil {
				n.marks[i].DrawGlyph(&c, draw.GlyphStyle{Color: n.curves[i].style.Color, Radius: markRadius}, vg.Point{X: x + swatch/2, Y: middle})
			}
			c.FillText(sty, vg.Point{X: x + swatch + nameGap + sty.Width(" "), Y: y + sty.FontExtents().Descent}, n.label(i))
			x += n.entry(i, p)
		}
	}
}
