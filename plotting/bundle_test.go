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

	"github.com/google/go-cmp/cmp"
	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"

	"linewright/builtins/linecode"
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
