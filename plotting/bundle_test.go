package plotting

import (
	"bytes"
	"errors"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"maps"
	"slices"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/google/go-cmp/cmp"
	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/spectrum"
)

// TestRenderForms checks in which forms each kind of value shows.
func TestRenderForms(t *testing.T) {
	figure := []string{"image/png", "image/svg+xml", "text/plain"}
	table := []string{"text/html", "text/plain"}
	plain := []string{"text/plain"}
	type pair struct{ A, B int }
	for _, tt := range []struct {
		name  string
		v     any
		forms []string
		text  string // all of text/plain, "" not to look
	}{
		{"nil", nil, plain, "<nil>"},
		{"number", 0.1, plain, "0.1"},
		{"string", `a "b" <c>`, plain, `a "b" <c>`},
		{"bool", true, plain, "true"},
		{"struct", pair{1, 2}, plain, "{1 2}"},
		{"strings", []string{"a", "b"}, plain, "[a b]"},
		{"bits", []byte{1, 0, 1}, table, "[1 0 1]"},
		{"floats", []float64{1, 0.5}, table, "[1 0.5]"},
		{"array", [2]int{1, 2}, table, "[1 2]"},
		{"complex", []complex128{1i}, table, "[(0+1i)]"},
		{"rows", [][]float64{{1, 2}, {3, 4}}, table, "[[1 2] [3 4]]"},
		{"no floats", []float64{}, plain, "[]"},
		{"matrix", mat.NewDense(1, 2, []float64{1, 2}), table, fmt.Sprint(mat.NewDense(1, 2, []float64{1, 2}))},
		{"tones", []spectrum.Line{{Freq: 1, Power: 2}}, table, "[{1 2}]"},
		{"figure", Of(plot.New()), figure, ""},
		{"spectrum figure", newSpectrum(fakes(0), false, 6e6), figure, ""},
		{"plot", plot.New(), figure, ""},
		{"image", image.NewGray(image.Rect(0, 0, 3, 2)), []string{"image/png", "text/plain"}, "image of 3 × 2 pixels"},
		{"nil figure", (*Figure)(nil), plain, "<nil>"},
		{"nil plot", (*plot.Plot)(nil), plain, "<nil>"},
		{"nil code", (*linecode.Code)(nil), plain, "<nil>"},
		{"nil density", (*spectrum.PSD)(nil), plain, "<nil>"},
		{"nil matrix", (*mat.Dense)(nil), plain, "<nil>"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			b, err := Render(tt.v)
			if err != nil {
				t.Fatal(err)
			}
			if diff := cmp.Diff(tt.forms, slices.Sorted(maps.Keys(b.Data))); diff != "" {
				t.Errorf("forms (-want +got):\n%s", diff)
			}
			if got := b.Data[mimeText]; tt.text != "" && got != tt.text {
				t.Errorf("text/plain is %q, want %q", got, tt.text)
			}
			if b.Metadata == nil {
				t.Error("no metadata, not even an empty object")
			}
		})
	}
}

func TestRenderError(t *testing.T) {
	err := errors.New("wrong")
	if b, got := Render(err); got != err || b.Data != nil {
		t.Errorf("an error renders as %v, %v; want itself", b, got)
	}
}

// TestRenderFailure: what gonum panics on is an error of Render's that names the kind of value.
func TestRenderFailure(t *testing.T) {
	log := plot.New()
	log.Add(plotter.NewFunction(func(x float64) float64 { return x }))
	log.X.Scale, log.X.Tick.Marker = plot.LogScale{}, plot.LogTicks{}
	log.X.Min, log.X.Max = 0, 1
	for name, v := range map[string]any{
		"logarithm of 0": log,
		"no plot":        &Figure{Width: DefaultWidth, Height: DefaultHeight},
		"empty image":    image.NewGray(image.Rect(0, 0, 0, 0)),
	} {
		if _, err := Render(v); err == nil || !strings.HasPrefix(err.Error(), "plotting: cannot show ") {
			t.Errorf("%s: error %v", name, err)
		}
	}
}

// TestRenderInterrupt: an interrupt that stops a drawing stays recognisable in the error.
func TestRenderInterrupt(t *testing.T) {
	stop := errors.New("interrupted")
	p := plot.New()
	p.Add(plotter.NewFunction(func(float64) float64 { panic(stop) }))
	if _, err := Render(p); !errors.Is(err, stop) {
		t.Errorf("error %v, want one that wraps %v", err, stop)
	}
}

// TestRenderClasses: an encoder whose first bit decides for ever between sending bits and sending zeros ends in one of
// two classes. The figure of the average says so, and each class has a curve of its own under its probability.
func TestRenderClasses(t *testing.T) {
	code, err := linecode.New(linecode.Spec{Name: "fork", Bits: 1, Start: 0, Step: func(s any, word uint) (any, []float64) {
		switch s.(int) {
		case 0:
			return int(word) + 1, []float64{0}
		case 1:
			return 1, []float64{float64(word)}
		}
		return 2, []float64{2 * float64(word)}
	}})
	if err != nil {
		t.Fatal(err)
	}
	p, err := spectrum.Exact(code, pulse.Train{SymbolRate: 1e6})
	if err != nil {
		t.Fatal(err)
	}
	for _, tt := range []struct {
		v    any
		want []string
	}{
		{p, []string{"fork, average of 2 classes"}},
		{p.Classes(), []string{"class 1, probability 0.5", "class 2, probability 0.5"}},
	} {
		b, err := Render(tt.v)
		if err != nil {
			t.Fatal(err)
		}
		for _, name := range tt.want {
			if !strings.Contains(b.Data[mimeSVG].(string), ">"+name+"</text>") {
				t.Errorf("the figure of %T does not name %q", tt.v, name)
			}
		}
	}
}

// TestRenderCard: a code's card says of it what the code does.
func TestRenderCard(t *testing.T) {
	code, err := linecode.New(linecode.Spec{Name: `<i>own</i>`, Bits: 2, Start: 0, Step: func(_ any, word uint) (any, []float64) {
		if word == 3 {
			return 0, []float64{1.5, -1.5}
		}
		return 0, []float64{float64(word)}
	}})
	if err != nil {
		t.Fatal(err)
	}
	b, err := Render(code)
	if err != nil {
		t.Fatal(err)
	}
	// Four equally likely words of two bits take 1, 1, 1 and 2 symbols: 8 bits in 5 symbols.
	want := "<i>own</i>\n" +
		"  defined by            a script\n" +
		"  source bits per step  2\n" +
		"  rate                  1.6 bits per symbol in the mean; data change it\n" +
		"  levels                −1.5, 0, 1, 1.5, 2\n" +
		"  states                1, of which 1 recurrent and distinct\n" +
		"  delay                 none\n" +
		"  data                  P(1) = 0.5\n" +
		"  decoding              decodable, words told apart within 1 symbol"
	if diff := cmp.Diff(want, b.Data[mimeText]); diff != "" {
		t.Errorf("text/plain (-want +got):\n%s", diff)
	}
	caption, rows := parse(t, b.Data[mimeHTML].(string))
	if strings.Contains(b.Data[mimeHTML].(string), "<i>") || len(rows) != len(facts(code)) || caption != "" {
		t.Errorf("text/html: %s", b.Data[mimeHTML])
	}
	for i, f := range facts(code) {
		if diff := cmp.Diff([]string{f.what, f.value}, rows[i]); diff != "" {
			t.Errorf("row %d (-want +got):\n%s", i, diff)
		}
	}
	for _, name := range linecode.Names() {
		c, err := linecode.ByName(name)
		if err != nil {
			t.Fatal(err)
		}
		b, err := Render(c)
		if err != nil {
			t.Fatal(err)
		}
		for _, row := range strings.Split(b.Data[mimeText].(string), "\n") {
			if n := utf8.RuneCountInString(row); n > 76 || strings.Contains(row, "not worked out") {
				t.Errorf("%s: a row of %d characters: %q", name, n, row)
			}
		}
	}
}

func TestRenderImage(t *testing.T) {
	img := image.NewNRGBA(image.Rect(5, 5, 8, 7))
	img.Set(6, 6, color.NRGBA{1, 2, 3, 255})
	b, err := Render(img)
	if err != nil {
		t.Fatal(err)
	}
	got, err := png.Decode(bytes.NewReader(b.Data[mimePNG].([]byte)))
	if err != nil {
		t.Fatal(err)
	}
	if got.Bounds().Size() != image.Pt(3, 2) || color.NRGBAModel.Convert(got.At(1, 1)) != (color.NRGBA{1, 2, 3, 255}) {
		t.Errorf("%v, %v at (1, 1)", got.Bounds(), got.At(1, 1))
	}
	if diff := cmp.Diff(map[string]any{"image/png": map[string]any{"width": 3, "height": 2}}, b.Metadata); diff != "" {
		t.Errorf("metadata (-want +got):\n%s", diff)
	}
}

// TestEscaping: names with characters of HTML and XML, and such as XML cannot hold, leave every form readable.
func TestEscaping(t *testing.T) {
	const name = `<b>"A&B"</b>` + "\x00"
	d := fakes(0)[0].(fake)
	d.name = name
	svg, err := newSpectrum([]density{d, fakes(0)[1]}, false, 6e6).SVG()
	if err != nil {
		t.Fatal(err)
	}
	if strings.Contains(svg, "<b>") || strings.Contains(svg, "\x00") || !strings.Contains(svg, "&lt;b&gt;") {
		t.Error("the name is not escaped in SVG")
	}
	checkFonts(t, strings.ReplaceAll(svg, "�", ""))
}
