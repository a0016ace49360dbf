package canvas

import (
	"image"
	"math"
	"slices"
	"strings"
	"unicode/utf8"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
)

// One character of a terminal takes CellWidth by CellHeight of the drawing. It is about twice as high as wide, and holds
// 2 by 4 braille dots.
const (
	CellWidth  = 6 * vg.Length(1)
	CellHeight = 12 * vg.Length(1)
)

// Terminal draws in characters: text where it stands, straight lines along an axis as box-drawing characters, filled
// marks as bullets, everything else as braille dots. What is nearly white (grids, backgrounds) is left out, and colours
// are lost; dash patterns stay.
type Terminal struct {
	pen
	columns, rows int
	cells         []cell    // row by row from the top
	header        [2]string // turned text: of the left and of the right half
}

type cell struct {
	text rune
	box  byte // box-drawing lines
	dots byte // braille dots, as the low byte of the character
}

// Box-drawing lines through a cell.
const (
	vertical = 1 << iota
	horizontal
)

// boxes has the character for each set of lines.
var boxes = [4]rune{' ', '│', '─', '┼'}

// NewTerminal returns an empty picture of so many columns and rows.
func NewTerminal(columns, rows int) *Terminal {
	t := &Terminal{columns: columns, rows: rows, cells: make([]cell, columns*rows)}
	t.pen = newPen(vg.Length(rows) * CellHeight)
	vg.Initialize(t)
	return t
}

// Size returns the size of the drawing, which is that of its cells.
func (t *Terminal) Size() (w, h vg.Length) {
	return vg.Length(t.columns) * CellWidth, vg.Length(t.rows) * CellHeight
}

// DrawImage draws nothing: braille dots cannot show an image.
func (t *Terminal) DrawImage(vg.Rectangle, image.Image) {}

// at returns the cell of a column and a row, nil outside.
func (t *Terminal) at(column, row int) *cell {
	if column < 0 || column >= t.columns || row < 0 || row >= t.rows {
		return nil
	}
	return &t.cells[row*t.columns+column]
}

// A dot is a place in braille dots from the top left.
type dot struct{ x, y float64 }

// dotAt returns where a point lies. A point on the edge of the canvas belongs to the outermost dot.
func (t *Terminal) dotAt(p vg.Point) dot {
	x, y := t.m.apply(p)
	inside := func(v float64, n int) float64 { return math.Max(0, math.Min(v, float64(n)-1e-6)) }
	return dot{inside(x/CellWidth.Points()*2, 2*t.columns), inside(y/CellHeight.Points()*4, 4*t.rows)}
}

// braille has the bit of each dot of a cell, by row and column (Unicode 1.1, block U+2800).
var braille = [4][2]byte{{0x01, 0x08}, {0x02, 0x10}, {0x04, 0x20}, {0x40, 0x80}}

func (t *Terminal) set(d dot) {
	x, y := int(d.x), int(d.y)
	if c := t.at(x/2, y/4); c != nil {
		c.dots |= braille[y%4][x%2]
	}
}

// light reports whether what is drawn now is nearly white.
func (t *Terminal) light() bool { return t.color != nil && Luminance(t.color) > 0.7 }

// Stroke draws a line along a path.
func (t *Terminal) Stroke(p vg.Path) {
	if t.width <= 0 || t.light() {
		return
	}
	lines := t.flatten(p)
	for _, l := range lines {
		if len(l) == 2 && t.box(l[0], l[1]) {
			continue
		}
		run := t.offset.Points()
		for i := range len(l) - 1 {
			run = t.line(l[i], l[i+1], run)
		}
	}
}

// box draws a line along an axis; it reports false for every other line.
func (t *Terminal) box(a, b dot) bool {
	switch {
	case math.Abs(a.y-b.y) < 1e-3:
		from, to := int(math.Round(min(a.x, b.x)/2)), int(math.Round(max(a.x, b.x)/2))
		row := int((a.y - 0.5) / 4) // a line between two rows is the upper one's: axes stand above their texts
		for x := from; x < to; x++ {
			if c := t.at(x, row); c != nil {
				c.box |= horizontal
			}
		}
		return true
	case math.Abs(a.x-b.x) < 1e-3:
		for y := int(min(a.y, b.y) / 4); y <= int(max(a.y, b.y)/4); y++ {
			if c := t.at(int(a.x/2), y); c != nil {
				c.box |= vertical
			}
		}
		return true
	}
	return false
}

// line draws dots from a to b: one in each column, or in each row of steep lines, where the line passes its middle. run
// is the length drawn so far in points, for the dash pattern; it returns it after b.
func (t *Terminal) line(a, b dot, run float64) float64 {
	dx, dy := b.x-a.x, b.y-a.y
	length := math.Hypot(dx*CellWidth.Points()/2, dy*CellHeight.Points()/4)
	from, along := a.x, dx
	if math.Abs(dy) > math.Abs(dx) {
		from, along = a.y, dy
	}
	low, high := math.Floor(min(from, from+along)), math.Floor(max(from, from+along))
	for k := low; k <= high; k++ {
		s := 0.0
		if along != 0 {
			s = max(0, min((k+0.5-from)/along, 1))
		}
		if t.drawn(run + s*length) {
			t.set(dot{a.x + s*dx, a.y + s*dy})
		}
	}
	return run + length
}

// drawn reports whether the dash pattern draws at that length.
func (t *Terminal) drawn(run float64) bool {
	total := 0.0
	for _, d := range t.dashes {
		total += d.Points()
	}
	if total <= 0 {
		return true
	}
	run = math.Mod(run, total)
	for i, d := range t.dashes {
		if run -= d.Points(); run < 0 {
			return i%2 == 0
		}
	}
	return true
}

// Fill fills a path; a small one becomes a bullet.
func (t *Terminal) Fill(p vg.Path) {
	if t.light() {
		return
	}
	lines := t.flatten(p)
	low, high := dot{math.Inf(1), math.Inf(1)}, dot{math.Inf(-1), math.Inf(-1)}
	for _, l := range lines {
		for _, d := range l {
			low, high = dot{min(low.x, d.x), min(low.y, d.y)}, dot{max(high.x, d.x), max(high.y, d.y)}
		}
	}
	if high.x-low.x <= 4 && high.y-low.y <= 4 { // a mark
		if c := t.at(int((low.x+high.x)/4), int((low.y+high.y)/8)); c != nil {
			c.text = '•'
		}
		return
	}
	for y := math.Floor(low.y) + 0.5; y < high.y; y++ {
		for x := math.Floor(low.x) + 0.5; x < high.x; x++ {
			if inside(lines, dot{x, y}) {
				t.set(dot{x, y})
			}
		}
	}
}

// inside reports whether d lies within the polygons, by the even-odd rule.
func inside(polygons [][]dot, d dot) bool {
	in := false
	for _, l := range polygons {
		for i, a := range l {
			b := l[(i+1)%len(l)]
			if (a.y > d.y) != (b.y > d.y) && d.x < a.x+(d.y-a.y)/(b.y-a.y)*(b.x-a.x) {
				in = !in
			}
		}
	}
	return in
}

// flatten returns a path as lines, with a curve as its chords.
func (t *Terminal) flatten(p vg.Path) [][]dot {
	var lines [][]dot
	var line []dot
	var last vg.Point
	add := func(p vg.Point) { line, last = append(line, t.dotAt(p)), p }
	curve := func(points ...vg.Point) {
		const chords = 8
		from := last
		for i := 1; i <= chords; i++ {
			add(bezier(float64(i)/chords, append([]vg.Point{from}, points...)))
		}
	}
	for _, e := range p {
		switch e.Type {
		case vg.MoveComp:
			if len(line) > 1 {
				lines = append(lines, line)
			}
			line = nil
			add(e.Pos)
		case vg.LineComp:
			add(e.Pos)
		case vg.CurveComp:
			curve(append(slices.Clone(e.Control), e.Pos)...)
		case vg.ArcComp:
			start, curves := bezierArc(e)
			add(start)
			for _, q := range curves {
				curve(q[:]...)
			}
		case vg.CloseComp:
			if len(line) > 0 {
				line = append(line, line[0])
			}
		}
	}
	if len(line) > 1 {
		lines = append(lines, line)
	}
	return lines
}

// bezier returns the point of a Bézier curve at s, by de Casteljau's rule. It overwrites points.
func bezier(s float64, points []vg.Point) vg.Point {
	for n := len(points) - 1; n > 0; n-- {
		for i := range n {
			points[i] = points[i].Scale(vg.Length(1 - s)).Add(points[i+1].Scale(vg.Length(s)))
		}
	}
	return points[0]
}

// FillString writes text from the point on. Text that is turned is kept for the line above the picture.
func (t *Terminal) FillString(_ font.Face, at vg.Point, s string) {
	x, y := t.m.apply(at)
	if t.m.turn() != 0 {
		half := btoi(x > float64(t.columns)*CellWidth.Points()/2)
		t.header[half] = s
		return
	}
	// at is the text's lower left corner; a little above it is within the row.
	column, row := int(math.Round(x/CellWidth.Points())), int(math.Floor((y-CellHeight.Points()/2)/CellHeight.Points()))
	for _, r := range s {
		if c := t.at(column, row); c != nil && r != ' ' {
			c.text = r
		}
		column++
	}
}

// Picture returns the characters, row by row, blanks at the ends of rows cut, under the texts that stand sideways in
// the other forms: that of the left axis and that of the right one.
func (t *Terminal) Picture(leftAxis string) string {
	var b strings.Builder
	if top := leftAxis + t.header[1]; top != "" {
		gap := t.columns - utf8.RuneCountInString(top)
		b.WriteString(strings.TrimRight(leftAxis+strings.Repeat(" ", max(2, gap))+t.header[1], " ") + "\n")
	}
	for row := range t.rows {
		line := make([]rune, t.columns)
		for i, c := range t.cells[row*t.columns : (row+1)*t.columns] {
			switch {
			case c.text != 0:
				line[i] = c.text
			case c.dots != 0:
				line[i] = 0x2800 + rune(c.dots)
			default:
				line[i] = boxes[c.box]
			}
		}
		b.WriteString(strings.TrimRight(string(line), " ") + "\n")
	}
	return strings.TrimSuffix(b.String(), "\n")
}

// Characters is a text handler that measures text in the cells of a terminal.
type Characters struct{ text.Handler }

// Extents returns the height of a row.
func (Characters) Extents(font.Font) font.Extents {
	return font.Extents{Ascent: CellHeight, Height: CellHeight}
}

// Box returns the size of a line of text.
func (Characters) Box(s string, _ font.Font) (width, height, depth vg.Length) {
	return vg.Length(utf8.RuneCountInString(s)) * CellWidth, CellHeight, 0
}

// Draw writes text as its style aligns and turns it.
func (h Characters) Draw(c vg.Canvas, s string, sty text.Style, at vg.Point) {
	lines := h.Lines(s)
	c.Push()
	defer c.Pop()
	c.SetColor(sty.Color)
	c.Translate(at)
	c.Rotate(sty.Rotation)
	for i, l := range lines {
		width := vg.Length(utf8.RuneCountInString(l)) * CellWidth
		c.FillString(font.Face{}, vg.Point{
			X: width * vg.Length(sty.XAlign),
			Y: CellHeight * (vg.Length(len(lines)-1-i) + vg.Length(len(lines))*vg.Length(sty.YAlign)),
		}, l)
	}
}
