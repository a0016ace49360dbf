package plotting

import (
	"bytes"
	"encoding/base64"
	"encoding/xml"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"io"
	"math"
	"regexp"
	"strings"
	"sync"
	"testing"
	"unicode"
	"unicode/utf8"

	"golang.org/x/image/font/sfnt"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"

	"linewright/builtins/pulse"
)

// figures are the kinds of figure, with what may go wrong in each.
func figures(t *testing.T) map[string]*Figure {
	t.Helper()
	with := func(v float64) *plot.Plot {
		p := plot.New()
		p.Title.Text = `a gonum plot <&">`
		p.X.Label.Text, p.Y.Label.Text = "x", "y"
		line, points, err := plotter.NewLinePoints(plotter.XYs{{X: 0, Y: 0}, {X: 1, Y: v}, {X: 2, Y: -v}})
		if err != nil {
			t.Fatal(err)
		}
		p.Add(line, points)
		p.Legend.Add("line", line)
		return p
	}
	bits := []byte{1, 0, 1, 1, 0, 0, 0, 0, 1, 1, 0, 1}
	return map[string]*Figure{
		"four":     newSpectrum(fakes(120), false, 6.144e6).Figure,
		"linear":   newSpectrum(fakes(120), true, 6.144e6).Figure,
		"no load":  newSpectrum(fakes(0), true, 6.144e6).Figure,
		"one":      newSpectrum(fakes(0)[2:3], false, 6.144e6).Figure,
		"two":      newSpectrum(fakes(0)[1:3], false, 6e6).Figure,
		"waveform": newWaveform(marks{}, pulse.Train{BitRate: 2.048e6, Level: 3, Shape: pulse.Rect(0.5)}, bits),
		"gonum":    Of(with(3)),
	}
}

// TestSVG reads each figure's SVG as a viewer that has nothing but the document.
func TestSVG(t *testing.T) {
	seen := map[string]string{}
	for name, f := range figures(t) {
		t.Run(name, func(t *testing.T) {
			svg, err := f.SVG()
			if err != nil {
				t.Fatal(err)
			}
			if len(svg) > 120_000 {
				t.Errorf("%d bytes", len(svg))
			}
			root := true
			d := xml.NewDecoder(strings.NewReader(svg))
			ids := map[string]bool{}
			for {
				token, err := d.Token()
				if err == io.EOF {
					break
				}
				if err != nil {
					t.Fatalf("not well formed: %v", err)
				}
				e, ok := token.(xml.StartElement)
				if !ok {
					continue
				}
				attributes := map[string]string{}
				for _, a := range e.Attr {
					attributes[a.Name.Local] = a.Value
					if strings.Contains(a.Name.Local, "href") {
						t.Errorf("<%s> refers to %.60q", e.Name.Local, a.Value)
					}
					if strings.Contains(a.Value, "NaN") || strings.Contains(a.Value, "Inf") {
						t.Errorf("<%s %s=%.60q>", e.Name.Local, a.Name.Local, a.Value)
					}
				}
				if root {
					root = false
					want := map[string]string{"width": "672", "height": "416", "viewBox": "0 0 504 312"}
					if name == "waveform" {
						want = map[string]string{"width": "672", "height": "280", "viewBox": "0 0 504 210"}
					}
					if e.Name != (xml.Name{Space: "http://www.w3.org/2000/svg", Local: "svg"}) {
						t.Errorf("root is %v", e.Name)
					}
					for k, v := range want {
						if attributes[k] != v {
							t.Errorf("%s is %q, want %q", k, attributes[k], v)
						}
					}
				}
				if id := attributes["id"]; id != "" {
					if ids[id] || seen[id] != "" {
						t.Errorf("id %s stands twice, also in %q", id, seen[id])
					}
					ids[id], seen[id] = true, name
				}
			}
			if len(ids) != 2 {
				t.Errorf("ids %v, want those of title and description", ids)
			}
			checkFonts(t, svg)
			again, err := f.SVG()
			if err != nil || again != svg {
				t.Errorf("drawn again, the figure differs (%v)", err)
			}
		})
	}
}

var (
	fontFace = regexp.MustCompile(`@font-face\{font-family:(\S+?);src:url\(data:font/ttf;base64,([^)]+)\)\}`)
	textTag  = regexp.MustCompile(`<text font-family="([^,"]+)[^>]*>([^<]*)</text>`)
)

// checkFonts fails unless the document has a font with all glyphs for each of its texts and nothing but data: in its
// style sheet.
func checkFonts(t *testing.T, svg string) {
	t.Helper()
	fonts := map[string]*sfnt.Font{}
	for _, m := range fontFace.FindAllStringSubmatch(svg, -1) {
		data, err := base64.StdEncoding.DecodeString(m[2])
		if err != nil {
			t.Fatal(err)
		}
		if fonts[m[1]], err = sfnt.Parse(data); err != nil {
			t.Fatal(err)
		}
	}
	if n := strings.Count(svg, "url("); n != len(fonts) {
		t.Errorf("%d references, of which %d are fonts", n, len(fonts))
	}
	texts := textTag.FindAllStringSubmatch(svg, -1)
	if len(texts) != strings.Count(svg, "<text") {
		t.Errorf("%d of %d texts name a font", len(texts), strings.Count(svg, "<text"))
	}
	for _, m := range texts {
		var s string
		if err := xml.Unmarshal([]byte("<a>"+m[2]+"</a>"), &s); err != nil {
			t.Fatal(err)
		}
		for _, r := range s {
			if f := fonts[m[1]]; f == nil {
				t.Errorf("%q is in font %q, which is not there", s, m[1])
			} else if g, err := f.GlyphIndex(nil, r); err != nil || g == 0 {
				t.Errorf("%q: the font has no %q (%v)", s, r, err)
			}
		}
	}
}

// TestPNG: a picture of twice the nominal size, opaque to its corners, the same bytes each time.
func TestPNG(t *testing.T) {
	for name, f := range figures(t) {
		t.Run(name, func(t *testing.T) {
			b, err := f.bundle()
			if err != nil {
				t.Fatal(err)
			}
			img, err := png.Decode(bytes.NewReader(b.Data[mimePNG].([]byte)))
			if err != nil {
				t.Fatal(err)
			}
			meta := b.Metadata[mimePNG].(map[string]any)
			if got, want := img.Bounds().Size(), image.Pt(2*meta["width"].(int), 2*meta["height"].(int)); got != want {
				t.Errorf("size %v, want twice the metadata's, %v", got, want)
			}
			if want := fmt.Sprintf(` width="%d" height="%d"`, meta["width"], meta["height"]); !strings.Contains(b.Data[mimeSVG].(string), want) {
				t.Errorf("the SVG has another size than%s", want)
			}
			if o, ok := img.(interface{ Opaque() bool }); !ok || !o.Opaque() {
				t.Error("the picture is not opaque: it could not be read on a dark page")
			}
			if c := color.NRGBAModel.Convert(img.At(0, 0)); c != (color.NRGBA{255, 255, 255, 255}) {
				t.Errorf("the corner is %v, want white", c)
			}
			again, err := f.bundle()
			if err != nil || !bytes.Equal(again.Data[mimePNG].([]byte), b.Data[mimePNG].([]byte)) {
				t.Errorf("drawn again, the picture differs (%v)", err)
			}
		})
	}
}

// TestTerminal: rows of at most 72 printable characters, none of which is a braille blank or white space at an end.
func TestTerminal(t *testing.T) {
	for name, f := range figures(t) {
		t.Run(name, func(t *testing.T) {
			text := f.String()
			rows := strings.Split(text, "\n")
			if len(rows) < terminalRows || len(rows) > terminalRows+1 {
				t.Errorf("%d rows, want %d and a header", len(rows), terminalRows)
			}
			dots := 0
			for _, r := range rows {
				if n := utf8.RuneCountInString(r); n > terminalColumns {
					t.Errorf("%d columns: %q", n, r)
				}
				if strings.TrimRight(r, " ") != r {
					t.Errorf("blanks at the end of %q", r)
				}
				for _, c := range r {
					if !unicode.IsPrint(c) || c == 0x2800 {
						t.Errorf("%U in %q", c, r)
					}
					if c > 0x2800 && c <= 0x28ff {
						dots++
					}
				}
			}
			if dots < 20 {
				t.Errorf("%d characters of dots:\n%s", dots, text)
			}
			for _, axis := range []string{f.Plot.X.Label.Text, f.Plot.Y.Label.Text} {
				if !strings.Contains(text, axis) {
					t.Errorf("the axis label %q is missing:\n%s", axis, text)
				}
			}
			if f.String() != text {
				t.Error("drawn again, the text differs")
			}
		})
	}
}

func TestLayout(t *testing.T) {
	for name, f := range figures(t) {
		for _, size := range [][2]vg.Length{{DefaultWidth, DefaultHeight}, {280, 200}, {800, 250}, {360, 500}} {
			t.Run(fmt.Sprintf("%s/%gx%g", name, size[0], size[1]), func(t *testing.T) {
				f.Width, f.Height = size[0], size[1]
				checkLayout(t, f)
			})
		}
	}
}

func TestFigureSizes(t *testing.T) {
	f := Of(plot.New())
	for _, size := range [][2]vg.Length{{0, 100}, {100, -1}, {1e6, 100}, {100, vg.Length(math.NaN())}} {
		f.Width, f.Height = size[0], size[1]
		if _, err := Render(f); err == nil || !strings.HasPrefix(err.Error(), "plotting: ") {
			t.Errorf("size %v: error %v", size, err)
		}
	}
}

// TestFigureGoesOn: what a user adds to the plot after the figure was made, or shown, is drawn, and drawing changes
// nothing in the plot.
func TestFigureGoesOn(t *testing.T) {
	f := newSpectrum(fakes(0)[:1], false, 6e6).Figure
	before, _ := f.SVG()
	_ = f.String()
	f.Plot.Title.Text = "with a limit"
	after, _ := f.SVG()
	if before == after || !strings.Contains(after, ">with a limit</text>") || !strings.Contains(f.String(), "with a limit") {
		t.Error("the title is missing")
	}
	f.Plot.Title.Text = ""
	if again, _ := f.SVG(); again != before {
		t.Error("drawing changed the plot")
	}
}

// TestFigureTogether: goroutines may show one figure at the same time.
func TestFigureTogether(t *testing.T) {
	f := newSpectrum(fakes(120), false, 6e6).Figure
	svg, _ := f.SVG()
	text := f.String()
	var wait sync.WaitGroup
	for range 4 {
		wait.Go(func() {
			if again, err := f.SVG(); err != nil || again != svg {
				t.Errorf("the SVG differs (%v)", err)
			}
			if f.String() != text {
				t.Error("the text differs")
			}
		})
	}
	wait.Wait()
}
