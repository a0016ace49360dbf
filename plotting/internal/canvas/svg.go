package canvas

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

// SVG draws as an SVG document.
//
// gonum's own SVG canvas embeds whole fonts, 400 kB each as text; this one embeds the glyphs in use, some kilobytes, so
// that a drawing looks the same wherever it is opened and its text can still be searched and copied. It also applies all
// transforms itself, thins dense lines, names the drawing for screen readers, and joins strokes of one style to one path.
type SVG struct {
	pen
	w, h     vg.Length
	elements []svgElement
	fonts    []*svgFont // in the order of their first use
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

// NewSVG returns an empty drawing of w by h.
func NewSVG(w, h vg.Length) *SVG {
	c := &SVG{pen: newPen(h), w: w, h: h}
	vg.Initialize(c)
	return c
}

// Size returns the size of the drawing.
func (c *SVG) Size() (w, h vg.Length) { return c.w, c.h }

// Stroke draws a line along a path.
func (c *SVG) Stroke(p vg.Path) {
	s := c.pen
	if s.width <= 0 {
		return
	}
	scale := s.m.scale()
	var a strings.Builder
	a.WriteString(`fill="none"` + paint("stroke", s.color) + ` stroke-width="` + decimal(s.width.Points()*scale) + `"`)
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

// Fill fills a path.
func (c *SVG) Fill(p vg.Path) {
	c.addPath(strings.TrimPrefix(paint("fill", c.color), " "), p)
}

func (c *SVG) addPath(attributes string, p vg.Path) {
	// Translucent paths stay apart: where two of them cross, the colours add up.
	n := len(c.elements)
	if n == 0 || c.elements[n-1].tag != "path" || c.elements[n-1].attributes != attributes || strings.Contains(attributes, "opacity") {
		c.elements = append(c.elements, svgElement{tag: "path", attributes: attributes})
		n++
	}
	c.pathData(&c.elements[n-1].path, p)
}

func (c *SVG) pathData(b *strings.Builder, p vg.Path) {
	point := func(command byte, ps ...vg.Point) {
		b.WriteByte(command)
		for i, p := range ps {
			if i > 0 {
				b.WriteByte(' ')
			}
			x, y := c.m.apply(p)
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

// FillString writes text from the point on.
func (c *SVG) FillString(face font.Face, at vg.Point, s string) {
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
	x, y := c.m.apply(at)
	a := ` x="` + decimal(x) + `" y="` + decimal(y) + `"`
	if turn := c.m.turn(); turn != 0 {
		a += ` transform="rotate(` + decimal(turn) + " " + decimal(x) + " " + decimal(y) + `)"`
	}
	scale := c.m.scale()
	// textLength keeps the layout even in a viewer that takes a font of its own.
	a += ` font-size="` + decimal(face.Font.Size.Points()*scale) + `" textLength="` + decimal(face.Width(s).Points()*scale) + `"` + paint("fill", c.color)
	c.elements = append(c.elements, svgElement{tag: "text", attributes: a, text: s, font: f})
}

func (c *SVG) font(face font.Face) *svgFont {
	for _, f := range c.fonts {
		if f.font == face.Face {
			return f
		}
	}
	f := &svgFont{font: face.Face}
	c.fonts = append(c.fonts, f)
	return f
}

// DrawImage draws an image, stretched to the rectangle. It panics on images that are empty.
func (c *SVG) DrawImage(to vg.Rectangle, img image.Image) {
	var buf bytes.Buffer
	if err := png.Encode(&buf, img); err != nil {
		panic(fmt.Errorf("canvas: cannot draw an image: %w", err))
	}
	x0, y0 := c.m.apply(to.Min)
	x1, y1 := c.m.apply(to.Max)
	c.elements = append(c.elements, svgElement{tag: "image", attributes: fmt.Sprintf(
		` x="%s" y="%s" width="%s" height="%s" preserveAspectRatio="none" href="data:image/png;base64,%s"`,
		decimal(min(x0, x1)), decimal(min(y0, y1)), decimal(math.Abs(x1-x0)), decimal(math.Abs(y1-y0)),
		base64.StdEncoding.EncodeToString(buf.Bytes()))})
}

// Document returns the drawing as an SVG document of the given size in CSS pixels. Its ids and the names of its fonts
// come from its content: they differ from drawing to drawing, and the same drawing has the same bytes.
func (c *SVG) Document(width, height int, title, description string) (string, error) {
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
		width, height, decimal(c.w.Points()), decimal(c.h.Points()), id, id)
	fmt.Fprintf(&doc, "<title id=\"%s-title\">%s</title>\n<desc id=\"%s-desc\">%s</desc>\n", id, escape(title), id, escape(description))
	if len(c.fonts) > 0 {
		doc.WriteString("<style>\n")
		for i, f := range c.fonts {
			family := id + "-" + strconv.Itoa(i)
			data, err := subset.Cut(f.font, family, f.characters)
			if err != nil {
				return "", fmt.Errorf("canvas: cannot embed a font: %w", err)
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

func (c *SVG) family(f *svgFont) string {
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
