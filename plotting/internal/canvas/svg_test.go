package canvas

import (
	"encoding/xml"
	"image"
	"image/color"
	"io"
	"math"
	"strings"
	"testing"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/font/liberation"
	"gonum.org/v1/plot/vg"
)

func document(t *testing.T, c *SVG, title string) string {
	t.Helper()
	svg, err := c.Document(200, 100, title, "described")
	if err != nil {
		t.Fatal(err)
	}
	d := xml.NewDecoder(strings.NewReader(svg))
	for {
		if _, err := d.Token(); err == io.EOF {
			return svg
		} else if err != nil {
			t.Fatalf("not well formed: %v\n%s", err, svg)
		}
	}
}

func face(size vg.Length) font.Face {
	cache := font.NewCache(liberation.Collection())
	return cache.Lookup(font.Font{Typeface: "Liberation", Variant: "Sans"}, size)
}

// TestSVGElements holds what each call draws against SVG written by hand; SVG has its origin at the top.
func TestSVGElements(t *testing.T) {
	corner := func() (p vg.Path) {
		p.Move(vg.Point{X: 10, Y: 10})
		p.Line(vg.Point{X: 20, Y: 30.128})
		return p
	}
	for _, tt := range []struct {
		name string
		draw func(c *SVG)
		want string
	}{
		{"stroke", func(c *SVG) { c.Stroke(corner()) }, `<path fill="none" stroke="#000000" stroke-width="1" d="M10 65L20 44.87"/>`},
		{"dashes", func(c *SVG) {
			c.SetLineDash([]vg.Length{3, 1.5}, 2)
			c.SetLineWidth(0.5)
			c.Stroke(corner())
		}, `<path fill="none" stroke="#000000" stroke-width="0.5" stroke-dasharray="3 1.5" stroke-dashoffset="2" d="M10 65L20 44.87"/>`},
		{"equal strokes are one path", func(c *SVG) { c.Stroke(corner()); c.Stroke(corner()) },
			`<path fill="none" stroke="#000000" stroke-width="1" d="M10 65L20 44.87M10 65L20 44.87"/>`},
		{"translucent strokes are not", func(c *SVG) {
			c.SetColor(color.NRGBA{0, 0, 255, 51})
			c.Stroke(corner())
			c.Stroke(corner())
		}, `<path fill="none" stroke="#0000ff" stroke-opacity="0.2" stroke-width="1" d="M10 65L20 44.87"/>` + "\n" +
			`<path fill="none" stroke="#0000ff" stroke-opacity="0.2" stroke-width="1" d="M10 65L20 44.87"/>`},
		{"no width, no line", func(c *SVG) { c.SetLineWidth(0); c.Stroke(corner()) }, ""},
		{"fill, closed", func(c *SVG) {
			p := corner()
			p.Close()
			c.Fill(p)
		}, `<path fill="#000000" d="M10 65L20 44.87Z"/>`},
		{"curves", func(c *SVG) {
			var p vg.Path
			p.Move(vg.Point{})
			p.QuadTo(vg.Point{X: 1, Y: 1}, vg.Point{X: 2})
			p.CubeTo(vg.Point{X: 3}, vg.Point{X: 4}, vg.Point{X: 5})
			c.Fill(p)
		}, `<path fill="#000000" d="M0 75Q1 74 2 75C3 75 4 75 5 75"/>`},
		{"moved and scaled", func(c *SVG) {
			c.Push()
			c.Translate(vg.Point{X: 5, Y: 5})
			c.Scale(2, 2)
			c.Stroke(corner())
			c.Pop()
			c.Stroke(corner())
		}, `<path fill="none" stroke="#000000" stroke-width="2" d="M25 50L45 9.74"/>` + "\n" +
			`<path fill="none" stroke="#000000" stroke-width="1" d="M10 65L20 44.87"/>`},
	} {
		t.Run(tt.name, func(t *testing.T) {
			c := NewSVG(150, 75)
			tt.draw(c)
			svg := document(t, c, "title")
			_, body, _ := strings.Cut(svg, "</desc>\n")
			if got := strings.TrimSpace(strings.TrimSuffix(body, "</svg>\n")); got != tt.want {
				t.Errorf("got  %s\nwant %s", got, tt.want)
			}
		})
	}
}

func TestSVGText(t *testing.T) {
	c := NewSVG(150, 75)
	c.FillString(face(10), vg.Point{X: 10, Y: 20}, "a < b & \"c\"\x01")
	c.Push()
	c.Rotate(math.Pi / 2)
	c.FillString(face(10), vg.Point{X: 5, Y: -30}, "up")
	c.Pop()
	c.FillString(face(0), vg.Point{}, "size 0")
	c.FillString(face(10), vg.Point{}, " ")
	svg := document(t, c, `<&">`)
	for _, want := range []string{
		`>a &lt; b &amp; &#34;c&#34;` + "\uFFFD</text>", ` x="10" y="55"`,
		` x="30" y="70" transform="rotate(-90 30 70)"`, `>up</text>`, "-title\">&lt;&amp;&#34;&gt;</title>",
	} {
		if !strings.Contains(svg, want) {
			t.Errorf("%s is missing in\n%s", want, svg)
		}
	}
	if strings.Count(svg, "<text") != 2 || strings.Count(svg, "@font-face") != 1 {
		t.Errorf("want two texts in one font:\n%s", svg)
	}
}

func TestSVGImage(t *testing.T) {
	c := NewSVG(150, 75)
	c.DrawImage(vg.Rectangle{Min: vg.Point{X: 10, Y: 10}, Max: vg.Point{X: 30, Y: 40}}, image.NewGray(image.Rect(0, 0, 2, 2)))
	if svg := document(t, c, ""); !strings.Contains(svg, `<image x="10" y="35" width="20" height="30" preserveAspectRatio="none" href="data:image/png;base64,`) {
		t.Errorf("image is wrong:\n%s", svg)
	}
}

// TestSVGIDs: the id depends on content, title and size, and on nothing else.
func TestSVGIDs(t *testing.T) {
	id := func(width vg.Length, title string) string {
		c := NewSVG(150, 75)
		c.SetLineWidth(width)
		c.Stroke(vg.Path{{Type: vg.MoveComp}, {Type: vg.LineComp, Pos: vg.Point{X: 1, Y: 1}}})
		_, rest, _ := strings.Cut(document(t, c, title), `aria-labelledby="`)
		return rest[:14]
	}
	a := id(1, "a")
	if id(1, "a") != a || id(2, "a") == a || id(1, "b") == a {
		t.Errorf("ids %s %s %s %s", a, id(1, "a"), id(2, "a"), id(1, "b"))
	}
}

// TestBezierArc: cubic curves for an arc stay within 3e-4 of the radius, the known error of a quarter circle.
func TestBezierArc(t *testing.T) {
	for _, angle := range []float64{0.1, math.Pi / 2, -math.Pi, 2 * math.Pi, -3} {
		from, curves := bezierArc(vg.PathComp{Pos: vg.Point{X: 3, Y: 4}, Radius: 2, Start: 0.3, Angle: angle})
		for _, q := range curves {
			for s := 0.0; s <= 1; s += 0.125 {
				at := bezier(s, []vg.Point{from, q[0], q[1], q[2]})
				if r := math.Hypot(float64(at.X-3), float64(at.Y-4)); math.Abs(r-2) > 2*3e-4 {
					t.Errorf("angle %g: radius %g", angle, r)
				}
			}
			from = q[2]
		}
		sin, cos := math.Sincos(0.3 + angle)
		if math.Hypot(float64(from.X)-3-2*cos, float64(from.Y)-4-2*sin) > 1e-12 {
			t.Errorf("angle %g: ends at %v", angle, from)
		}
	}
}
