package plotting

import (
	"encoding/xml"
	"fmt"
	"image/color"
	"io"
	"strconv"
	"strings"
	"testing"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"linewright/plotting/internal/canvas"
)

// canvasOf returns where a figure draws its plot on a canvas.
func canvasOf(c vg.CanvasSizer) draw.Canvas {
	return draw.Crop(draw.New(c), margin, -margin, margin, -margin)
}

// A writing is one text of an SVG and the box of its letters, from a descender to a capital, in points from the top left.
type writing struct {
	text           string
	x0, y0, x1, y1 float64
}

// A scene is what an SVG shows: its texts and its dark lines.
type scene struct {
	width, height float64
	texts         []writing
	lines         [][][2]float64
}

// readScene reads an SVG as this package writes it.
func readScene(t *testing.T, svg string) scene {
	t.Helper()
	var s scene
	d := xml.NewDecoder(strings.NewReader(svg))
	var text *writing
	for {
		token, err := d.Token()
		if err == io.EOF {
			return s
		}
		if err != nil {
			t.Fatal(err)
		}
		switch e := token.(type) {
		case xml.StartElement:
			at := map[string]string{}
			for _, a := range e.Attr {
				at[a.Name.Local] = a.Value
			}
			number := func(name string) float64 {
				v, err := strconv.ParseFloat(at[name], 64)
				if err != nil {
					t.Fatalf("<%s %s=%q>: %v", e.Name.Local, name, at[name], err)
				}
				return v
			}
			switch e.Name.Local {
			case "svg":
				if _, err := fmt.Sscanf(at["viewBox"], "0 0 %g %g", &s.width, &s.height); err != nil {
					t.Fatal(err)
				}
			case "text":
				x, y, width, size := number("x"), number("y"), number("textLength"), number("font-size")
				w := writing{"", x, y - 0.72*size, x + width, y + 0.2*size}
				if turn := at["transform"]; strings.HasPrefix(turn, "rotate(-90 ") {
					w = writing{"", x - 0.72*size, y - width, x + 0.2*size, y}
				} else if turn != "" {
					t.Fatalf("a text is turned by %s", turn)
				}
				s.texts = append(s.texts, w)
				text = &s.texts[len(s.texts)-1]
			case "path":
				var r, g, b uint8
				if n, _ := fmt.Sscanf(at["stroke"], "#%02x%02x%02x", &r, &g, &b); n != 3 {
					continue // a filled mark
				}
				if canvas.Luminance(color.NRGBA{r, g, b, 255}) < 0.5 { // grid and boundaries may pass behind a text
					s.lines = append(s.lines, readPath(t, at["d"])...)
				}
			}
		case xml.CharData:
			if text != nil {
				text.text += string(e)
			}
		case xml.EndElement:
			text = nil
		}
	}
}

// readPath returns the lines of a path; of a curve it has the ends.
func readPath(t *testing.T, d string) (lines [][][2]float64) {
	t.Helper()
	for _, part := range strings.Split(d, "M")[1:] {
		var line [][2]float64
		for _, step := range strings.FieldsFunc(part, func(r rune) bool { return r == 'L' || r == 'C' || r == 'Q' || r == 'Z' }) {
			numbers := strings.Fields(step)
			var at [2]float64
			for i := range at {
				v, err := strconv.ParseFloat(numbers[len(numbers)-2+i], 64)
				if err != nil {
					t.Fatalf("path %q: %v", step, err)
				}
				at[i] = v
			}
			line = append(line, at)
		}
		lines = append(lines, line)
	}
	return lines
}

// checkLayout fails unless all texts of the figure lie within it, apart from each other and clear of all lines.
func checkLayout(t *testing.T, f *Figure) {
	t.Helper()
	svg, err := f.SVG()
	if err != nil {
		t.Fatal(err)
	}
	s := readScene(t, svg)
	if len(s.texts) < 4 {
		t.Errorf("only %d texts", len(s.texts))
	}
	for i, a := range s.texts {
		if a.x0 < 1 || a.y0 < 1 || a.x1 > s.width-1 || a.y1 > s.height-1 {
			t.Errorf("%q leaves the figure: %+v", a.text, a)
		}
		for _, b := range s.texts[:i] {
			if a.x0 < b.x1 && b.x0 < a.x1 && a.y0 < b.y1 && b.y0 < a.y1 {
				t.Errorf("%q %+v lies over %q %+v", a.text, a, b.text, b)
			}
		}
		for _, l := range s.lines {
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

// TestCheckLayout: the check finds what it is for.
func TestCheckLayout(t *testing.T) {
	w := writing{"", 10, 10, 20, 20}
	for _, tt := range []struct {
		a, b [2]float64
		want bool
	}{
		{[2]float64{0, 0}, [2]float64{30, 30}, true}, {[2]float64{15, 0}, [2]float64{15, 30}, true},
		{[2]float64{12, 12}, [2]float64{13, 13}, true}, {[2]float64{0, 15}, [2]float64{9, 15}, false},
		{[2]float64{0, 20}, [2]float64{20, 40}, false}, {[2]float64{25, 0}, [2]float64{25, 30}, false},
	} {
		if got := crosses(tt.a, tt.b, w); got != tt.want {
			t.Errorf("a line from %v to %v crosses %v: %v", tt.a, tt.b, w, got)
		}
	}
	f := newSpectrum(fakes(0)[2:3], false, 6e6)
	svg, err := f.SVG()
	if err != nil {
		t.Fatal(err)
	}
	s := readScene(t, svg)
	texts := map[string]bool{}
	for _, w := range s.texts {
		texts[w.text] = true
	}
	if !texts["AMI"] || !texts["frequency (MHz)"] || !texts["−80"] {
		t.Errorf("texts %v", s.texts)
	}
	points := 0
	for _, l := range s.lines {
		points += len(l)
	}
	if points < 500 {
		t.Errorf("%d points of lines, want those of the curve", points)
	}
}
