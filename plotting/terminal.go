package plotting

import (
	"image"
	"image/color"
	"math"
	"slices"
	"strings"
	"unicode/utf8"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
)

const (
	terminalColumns, terminalRows = 72, 18

	// One character takes so many points of the drawing. A character of a terminal is about twice as high as wide, and
	// holds 2 × 4 braille dots.
	cellWidth, cellHeight = 6 * vg.Length(1), 12 * vg.Length(1)
)

// A terminal draws a figure in characters: text where it stands, straight lines along an axis as box-drawing
// characters, everything else as braille dots, filled marks as bullets. What is nearly white (grids, backgrounds) is
// left out, and colours are lost; dash patterns stay.
type terminal struct {
	columns, rows int
	cells         []cell // row by row from the top
	state         svgState
	stack         []svgState
	header        [2]string // turned text: of the left and of the right half
}

type cell struct {
	text rune
	box  byte // arms of a box-drawing character
	dots byte // braille dots, as the low byte of the character
}

// Arms of box-drawing characters.
const (
	up = 1 << iota
	down
	left
	right
)

// boxes has the character for each set of arms; a lone arm draws as the whole line.
var boxes = [16]rune{' ', '│', '│', '│', '─', '┘', '┐', '┤', '─', '└', '┌', '├', '─', '┴', '┬', '┼'}

func newTerminal(columns, rows int) *terminal {
	t := &terminal{columns: columns, rows: rows, cells: make([]cell, columns*rows)}
	t.state.m = affine{1, 0, 0, -1, 0, float64(rows) * cellHeight.Points()}
	vg.Initialize(t)
	return t
}

func (t *terminal) Size() (w, h vg.Length) {
	return vg.Length(t.columns) * cellWidth, vg.Length(t.rows) * cellHeight
}
func (t *terminal) SetLineWidth(w vg.Length) { t.state.line = w }
func (t *terminal) SetColor(clr color.Color) { t.state.color = clr }
func (t *terminal) Rotate(rad float64)       { t.state.m = t.state.m.mul(rotation(rad)) }
func (t *terminal) Scale(x, y float64)       { t.state.m = t.state.m.mul(affine{x, 0, 0, y, 0, 0}) }
func (t *terminal) Push()                    { t.stack = append(t.stack, t.state) }
func (t *terminal) Pop() {
	t.state, t.stack = t.stack[len(t.stack)-1], t.stack[:len(t.stack)-1]
}
func (t *terminal) Translate(by vg.Point) {
	t.state.m = t.state.m.mul(affine{1, 0, 0, 1, by.X.Points(), by.Y.Points()})
}
func (t *terminal) SetLineDash(ds []vg.Length, offset vg.Length) {
	t.state.dashes, t.state.offset = slices.Clone(ds), offset
}

// DrawImage draws nothing: braille dots cannot show an image.
func (t *terminal) DrawImage(vg.Rectangle, image.Image) {}

// at returns the cell of a column and a row, nil outside.
func (t *terminal) at(column, row int) *cell {
	if column < 0 || column >= t.columns || row < 0 || row >= t.rows {
		return nil
	}
	return &t.cells[row*t.columns+column]
}

// A dot is a place in braille dots from the top left.
type dot struct{ x, y float64 }

// dotAt returns where a point lies. A point on the edge of the canvas belongs to the outermost dot.
func (t *terminal) dotAt(p vg.Point) dot {
	x, y := t.state.m.apply(p)
	inside := func(v float64, n int) float64 { return math.Max(0, math.Min(v, float64(n)-1e-6)) }
	return dot{inside(x/cellWidth.Points()*2, 2*t.columns), inside(y/cellHeight.Points()*4, 4*t.rows)}
}

// braille has the bit of each dot of a cell, by row and column (Unicode 1.1, block U+2800).
var braille = [4][2]byte{{0x01, 0x08}, {0x02, 0x10}, {0x04, 0x20}, {0x40, 0x80}}

func (t *terminal) set(d dot) {
	x, y := int(d.x), int(d.y)
	if c := t.at(x/2, y/4); c != nil {
		c.dots |= braille[y%4][x%2]
	}
}

// light reports whether what is drawn now is nearly white.
func (t *terminal) light() bool { return t.state.color != nil && luminance(t.state.color) > 0.7 }

func (t *terminal) Stroke(p vg.Path) {
	if t.state.line <= 0 || t.light() {
		return
	}
	lines := t.flatten(p)
	for _, l := range lines {
		if len(l) == 2 && t.box(l[0], l[1]) {
			continue
		}
		run := t.state.offset.Points()
		for i := range len(l) - 1 {
			run = t.line(l[i], l[i+1], run)
		}
	}
}

// box draws a line along an axis; it reports false for every other line.
func (t *terminal) box(a, b dot) bool {
	switch {
	case math.Abs(a.y-b.y) < 1e-3:
		from, to := int(math.Round(min(a.x, b.x)/2)), int(math.Round(max(a.x, b.x)/2))
		row := int((a.y - 0.5) / 4) // a line between two rows is the upper one's: axes stand above their texts
		for x := from; x < to; x++ {
			if c := t.at(x, row); c != nil {
				c.box |= left | right
			}
		}
		return true
	case math.Abs(a.x-b.x) < 1e-3:
		for y := int(min(a.y, b.y) / 4); y <= int(max(a.y, b.y)/4); y++ {
			if c := t.at(int(a.x/2), y); c != nil {
				c.box |= up | down
			}
		}
		return true
	}
	return false
}

// line draws dots from a to b. run is the length drawn so far in points, for the dash pattern; it returns it after b.
func (t *terminal) line(a, b dot, run float64) float64 {
	dx, dy := b.x-a.x, b.y-a.y
	length := math.Hypot(dx*cellWidth.Points()/2, dy*cellHeight.Points()/4)
	n := math.Ceil(math.Max(math.Abs(dx), math.Abs(dy)))
	for i := 0.0; i <= n; i++ {
		s := 0.0
		if n > 0 {
			s = i / n
		}
		if t.drawn(run + s*length) {
			t.set(dot{a.x + s*dx, a.y + s*dy})
		}
	}
	return run + length
}

// drawn reports whether the dash pattern draws at that length.
func (t *terminal) drawn(run float64) bool {
	total := 0.0
	for _, d := range t.state.dashes {
		total += d.Points()
	}
	if total <= 0 {
		return true
	}
	run = math.Mod(run, total)
	for i, d := range t.state.dashes {
		if run -= d.Points(); run < 0 {
			return i%2 == 0
		}
	}
	return true
}

func (t *terminal) Fill(p vg.Path) {
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
func (t *terminal) flatten(p vg.Path) [][]dot {
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

func (t *terminal) FillString(_ font.Face, at vg.Point, s string) {
	x, y := t.state.m.apply(at)
	if t.state.m.turn() != 0 {
		half := btoi(x > float64(t.columns)*cellWidth.Points()/2)
		t.header[half] = s
		return
	}
	// at is the text's lower left corner; a little above it is within the row.
	column, row := int(math.Round(x/cellWidth.Points())), int(math.Floor((y-cellHeight.Points()/2)/cellHeight.Points()))
	for _, r := range s {
		if c := t.at(column, row); c != nil && r != ' ' {
			c.text = r
		}
		column++
	}
}

// picture returns the characters, row by row, blanks at the ends of rows cut, under the texts that stand sideways in
// the other forms: that of the left axis and that of the right one.
func (t *terminal) picture(leftAxis string) string {
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

// forTerminal returns p with its texts measured in characters, and the label of the left axis, which stands above the
// picture.
func forTerminal(p plot.Plot) (plot.Plot, string) {
	h := characters{p.TextHandler}
	p.TextHandler = h
	for _, s := range []*text.Style{
		&p.Title.TextStyle, &p.Legend.TextStyle, &p.X.Label.TextStyle, &p.X.Tick.Label, &p.Y.Label.TextStyle, &p.Y.Tick.Label,
	} {
		s.Handler = h
	}
	p.Title.Padding, p.X.Label.Padding, p.Y.Label.Padding = 0, 0, 0
	p.X.Tick.Length, p.Y.Tick.Length = cellHeight/4, 0
	p.X.Tick.Marker = labelled{p.X.Tick.Marker}
	p.X.Padding, p.Y.Padding = cellHeight, cellWidth
	label := p.Y.Label.Text
	p.Y.Label.Text = ""
	return p, label
}

// labelled leaves out the unlabelled ticks, for which a row of characters has no room.
type labelled struct{ plot.Ticker }

func (l labelled) Ticks(lo, hi float64) []plot.Tick {
	return slices.DeleteFunc(slices.Clone(l.Ticker.Ticks(lo, hi)), plot.Tick.IsMinor)
}

// characters is a text handler that measures text in the cells of a terminal.
type characters struct{ text.Handler }

func (characters) Extents(font.Font) font.Extents {
	return font.Extents{Ascent: cellHeight, Height: cellHeight}
}

func (characters) Box(s string, _ font.Font) (width, height, depth vg.Length) {
	return vg.Length(utf8.RuneCountInString(s)) * cellWidth, cellHeight, 0
}

func (h characters) Draw(c vg.Canvas, s string, sty text.Style, at vg.Point) {
	lines := h.Lines(s)
	c.Push()
	defer c.Pop()
	c.SetColor(sty.Color)
	c.Translate(at)
	c.Rotate(sty.Rotation)
	for i, l := range lines {
		width := vg.Length(utf8.RuneCountInString(l)) * cellWidth
		c.FillString(font.Face{}, vg.Point{
			X: width * vg.Length(sty.XAlign),
			Y: cellHeight * (vg.Length(len(lines)-1-i) + vg.Length(len(lines))*vg.Length(sty.YAlign)),
		}, l)
	}
}
