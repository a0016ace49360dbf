package plotting

import (
	"bytes"
	"crypto/sha256"
	"encoding/base64"
	"encoding/hex"
	"encoding/xml"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"math"
	"slices"
	"strconv"
	"strings"

	"golang.org/x/image/font/sfnt"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"

	"linewright/plotting/internal/subset"
)

// An svgCanvas draws a figure as SVG.
//
// gonum's own SVG canvas embeds whole fonts, 400 kB each as text of the notebook; this one embeds the glyphs in use,
// some kilobytes, so that a figure looks the same wherever it is opened and its text can still be searched and copied.
// It also applies all transforms itself, thins dense lines, names the figure for screen readers, and joins strokes of one style to one
// path.
type svgCanvas struct {
	width, height vg.Length
	state         svgState
	stack         []svgState
	elements      []svgElement
	fonts         []*svgFont // in the order of their first use
}

type svgState struct {
	m      affine
	line   vg.Length
	dashes []vg.Length
	offset vg.Length
	color  color.Color
}

// An svgElement is one path, text or image. Paths with equal attributes that follow each other are one element.
type svgElement struct {
	tag        string
	attributes string
	path       strings.Builder // of a path: its data
	text       string          // of a text
	font       *svgFont        // of a text
}

// An svgFont is one font with the characters that the figure writes in it.
type svgFont struct {
	font       *sfnt.Font
	characters []rune
}

func newSVG(w, h vg.Length) *svgCanvas {
	c := &svgCanvas{width: w, height: h}
	c.state.m = affine{1, 0, 0, -1, 0, h.Points()} // vg has its origin at the bottom, SVG at the top
	vg.Initialize(c)
	return c
}

func (c *svgCanvas) Size() (w, h vg.Length)   { return c.width, c.height }
func (c *svgCanvas) SetLineWidth(w vg.Length) { c.state.line = w }
func (c *svgCanvas) SetColor(clr color.Color) { c.state.color = clr }
func (c *svgCanvas) Rotate(rad float64)       { c.state.m = c.state.m.mul(rotation(rad)) }
func (c *svgCanvas) Scale(x, y float64)       { c.state.m = c.state.m.mul(affine{x, 0, 0, y, 0, 0}) }
func (c *svgCanvas) Push()                    { c.stack = append(c.stack, c.state) }
func (c *svgCanvas) Pop()                     { c.state, c.stack = c.stack[len(c.stack)-1], c.stack[:len(c.stack)-1] }
func (c *svgCanvas) Translate(by vg.Point) {
	c.state.m = c.state.m.mul(affine{1, 0, 0, 1, by.X.Points(), by.Y.Points()})
}
func (c *svgCanvas) SetLineDash(ds []vg.Length, offset vg.Length) {
	c.state.dashes, c.state.offset = slices.Clone(ds), offset
}

func (c *svgCanvas) Stroke(p vg.Path) {
	s := c.state
	if s.line <= 0 {
		return
	}
	scale := s.m.scale()
	var a strings.Builder
	a.WriteString(`fill="none"` + paint("stroke", s.color) + ` stroke-width="` + decimal(s.line.Points()*scale) + `"`)
	if len(s.dashes) > 0 {
		a.WriteString(` stroke-dasharray="`)
		for i, d := range s.dashes {
			if i > 0 {
				a.WriteByte(' ')
			}
			a.WriteString(decimal(d.Points() * scale))
		}
		a.WriteByte('"')
		if s.offset != 0 {
			a.WriteString(` stroke-dashoffset="` + decimal(s.offset.Points()*scale) + `"`)
		}
	}
	c.addPath(a.String(), thinPath(p))
}

func (c *svgCanvas) Fill(p vg.Path) {
	c.addPath(strings.TrimPrefix(paint("fill", c.state.color), " "), p)
}

func (c *svgCanvas) addPath(attributes string, p vg.Path) {
	// Translucent paths stay apart: where two of them cross, the colours add up.
	n := len(c.elements)
	if n == 0 || c.elements[n-1].tag != "path" || c.elements[n-1].attributes != attributes || strings.Contains(attributes, "opacity") {
		c.elements = append(c.elements, svgElement{tag: "path", attributes: attributes})
		n++
	}
	c.pathData(&c.elements[n-1].path, p)
}

func (c *svgCanvas) pathData(b *strings.Builder, p vg.Path) {
	point := func(command byte, ps ...vg.Point) {
		b.WriteByte(command)
		for i, p := range ps {
			if i > 0 {
				b.WriteByte(' ')
			}
			x, y := c.state.m.apply(p)
			b.WriteString(decimal(x) + " " + decimal(y))
		}
	}
	started := false
	for _, e := range p {
		switch e.Type {
		case vg.MoveComp:
			point('M', e.Pos)
		case vg.LineComp:
			point('L', e.Pos)
		case vg.CurveComp:
			point("?QC"[len(e.Control)], append(slices.Clone(e.Control), e.Pos)...)
		case vg.CloseComp:
			b.WriteByte('Z')
		case vg.ArcComp:
			start, curves := bezierArc(e)
			point("ML"[btoi(started)], start)
			for _, q := range curves {
				point('C', q[0], q[1], q[2])
			}
		}
		started = true
	}
}

func (c *svgCanvas) FillString(face font.Face, at vg.Point, s string) {
	if face.Font.Size == 0 || strings.TrimSpace(s) == "" {
		return
	}
	f := c.font(face)
	for _, r := range s {
		if !slices.Contains(f.characters, r) {
			f.characters = append(f.characters, r)
		}
	}
	// The transform is a rotation about the text's start: SVG's y grows downwards, so it turns the other way.
	x, y := c.state.m.apply(at)
	a := ` x="` + decimal(x) + `" y="` + decimal(y) + `"`
	if turn := c.state.m.turn(); turn != 0 {
		a += ` transform="rotate(` + decimal(turn) + " " + decimal(x) + " " + decimal(y) + `)"`
	}
	scale := c.state.m.scale()
	// textLength keeps the layout even in a viewer that takes a font of its own.
	a += ` font-size="` + decimal(face.Font.Size.Points()*scale) + `" textLength="` + decimal(face.Width(s).Points()*scale) + `"` + paint("fill", c.state.color)
	c.elements = append(c.elements, svgElement{tag: "text", attributes: a, text: s, font: f})
}

func (c *svgCanvas) font(face font.Face) *svgFont {
	for _, f := range c.fonts {
		if f.font == face.Face {
			return f
		}
	}
	f := &svgFont{font: face.Face}
	c.fonts = append(c.fonts, f)
	return f
}

func (c *svgCanvas) DrawImage(to vg.Rectangle, img image.Image) {
	var buf bytes.Buffer
	if err := png.Encode(&buf, img); err != nil {
		panic(fmt.Errorf("plotting: cannot draw an image: %w", err))
	}
	x0, y0 := c.state.m.apply(to.Min)
	x1, y1 := c.state.m.apply(to.Max)
	c.elements = append(c.elements, svgElement{tag: "image", attributes: fmt.Sprintf(
		` x="%s" y="%s" width="%s" height="%s" preserveAspectRatio="none" href="data:image/png;base64,%s"`,
		decimal(min(x0, x1)), decimal(min(y0, y1)), decimal(math.Abs(x1-x0)), decimal(math.Abs(y1-y0)),
		base64.StdEncoding.EncodeToString(buf.Bytes()))})
}

// document returns the drawing as an SVG document of the given size in CSS pixels. Its ids and the names of its fonts
// come from its content: they differ from figure to figure, and the same figure has the same bytes.
func (c *svgCanvas) document(width, height int, title, description string) (string, error) {
	var body strings.Builder
	for _, e := range c.elements {
		switch e.tag {
		case "path":
			fmt.Fprintf(&body, "<path %s d=\"%s\"/>\n", e.attributes, e.path.String())
		case "text":
			fmt.Fprintf(&body, "<text font-family=\"%s\"%s>%s</text>\n", c.family(e.font), e.attributes, escape(e.text))
		default:
			fmt.Fprintf(&body, "<%s%s/>\n", e.tag, e.attributes)
		}
	}
	sum := sha256.Sum256([]byte(fmt.Sprint(width, height, title, description) + body.String()))
	id := "lw" + hex.EncodeToString(sum[:6])

	var doc strings.Builder
	fmt.Fprintf(&doc, `<svg xmlns="http://www.w3.org/2000/svg" width="%d" height="%d" viewBox="0 0 %s %s" role="img" aria-labelledby="%s-title %s-desc" stroke-linejoin="round">`+"\n",
		width, height, decimal(c.width.Points()), decimal(c.height.Points()), id, id)
	fmt.Fprintf(&doc, "<title id=\"%s-title\">%s</title>\n<desc id=\"%s-desc\">%s</desc>\n", id, escape(title), id, escape(description))
	if len(c.fonts) > 0 {
		doc.WriteString("<style>\n")
		for i, f := range c.fonts {
			family := id + "-" + strconv.Itoa(i)
			data, err := subset.Cut(f.font, family, f.characters)
			if err != nil {
				return "", fmt.Errorf("plotting: cannot embed a font of the figure: %w", err)
			}
			fmt.Fprintf(&doc, "@font-face{font-family:%s;src:url(data:font/ttf;base64,%s)}\n", family, base64.StdEncoding.EncodeToString(data))
		}
		doc.WriteString("</style>\n")
	}
	doc.WriteString(strings.ReplaceAll(body.String(), familyMark, id))
	doc.WriteString("</svg>\n")
	return doc.String(), nil
}

// familyMark stands for the figure's id in the name of a font until the id is known. It holds a character that no
// text can put there, because texts are escaped.
const familyMark = "<id>"

func (c *svgCanvas) family(f *svgFont) string {
	return familyMark + "-" + strconv.Itoa(slices.Index(c.fonts, f)) + ",Liberation Sans,Arial,Helvetica,sans-serif"
}

// paint returns the attributes of a colour, with a blank before.
func paint(what string, clr color.Color) string {
	if clr == nil {
		clr = color.Black
	}
	c := color.NRGBAModel.Convert(clr).(color.NRGBA)
	s := fmt.Sprintf(` %s="#%02x%02x%02x"`, what, c.R, c.G, c.B)
	if c.A != 255 {
		s += ` ` + what + `-opacity="` + decimal(float64(c.A)/255) + `"`
	}
	return s
}

// decimal writes a length with two decimals, a hundredth of a point, and no more characters than it needs.
func decimal(v float64) string {
	s := strings.TrimRight(strconv.FormatFloat(v, 'f', 2, 64), "0")
	if s = strings.TrimSuffix(s, "."); s == "-0" {
		return "0"
	}
	return s
}

// escape writes text for SVG. What XML cannot hold, such as a control character in the name of a code, becomes U+FFFD.
func escape(s string) string {
	var b strings.Builder
	_ = xml.EscapeText(&b, []byte(s)) // a strings.Builder takes everything
	return b.String()
}

func btoi(b bool) int {
	if b {
		return 1
	}
	return 0
}

// An affine transform takes (x, y) to (a x + c y + e, b x + d y + f), as SVG's matrix(a b c d e f).
type affine struct{ a, b, c, d, e, f float64 }

func rotation(rad float64) affine {
	sin, cos := math.Sincos(rad)
	return affine{cos, sin, -sin, cos, 0, 0}
}

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
