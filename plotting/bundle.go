package plotting

import (
	"bytes"
	"fmt"
	"image"
	"image/png"
	"reflect"

	"gonum.org/v1/plot"

	"linewright/builtins/linecode"
	"linewright/builtins/spectrum"
)

// The MIME types of bundles.
const (
	mimeText = "text/plain"
	mimeHTML = "text/html"
	mimeSVG  = "image/svg+xml"
	mimePNG  = "image/png"
)

// Bundle is a value in the forms in which a front end can show it. It always has text/plain.
type Bundle struct {
	Data     map[string]any // MIME type -> string, []byte (binary, base64 on the wire), or JSON value for +json
	Metadata map[string]any // MIME type -> metadata, e.g. {"image/png": {"width": 320, "height": 200}}
}

// Render gives the forms of a value that is a cell's last expression, or is shown:
//
//   - a figure, a *plot.Plot of gonum, a density and a list of classes (as their [Spectrum]): image/svg+xml, image/png
//     and text/plain;
//   - a code: a card of its figures, text/html and text/plain;
//   - tones, slices of numbers, matrices: text/plain as fmt.Print gives it, and a bounded table (see [Table]);
//   - an image.Image: image/png and text/plain with its size;
//   - an error: itself, as the error;
//   - a string: text/plain, whole;
//   - everything else: text/plain (see [Text]).
//
// What cannot be drawn, such as a plot with a logarithmic axis from 0, is an error.
func Render(v any) (b Bundle, err error) {
	defer func() {
		if r := recover(); r != nil {
			b, err = Bundle{}, drawError(v, r)
		}
	}()
	if isNil(v) {
		return textBundle(sprint(v)), nil
	}
	switch v := v.(type) {
	case string:
		return textBundle(v), nil
	case error:
		return Bundle{}, v
	case drawn:
		return v.figure().bundle()
	case *plot.Plot:
		return Of(v).bundle()
	case *spectrum.PSD:
		return Spectrum(v).bundle()
	case []spectrum.Class:
		if len(v) > 0 {
			return classes(v).bundle()
		}
	case *linecode.Code:
		return card(v), nil
	case image.Image:
		return picture(v)
	}
	b = textBundle(sprint(v))
	if table, ok := Table(v); ok {
		b.Data[mimeHTML] = table
	}
	return b, nil
}

// drawn is what has a figure: [Figure] itself and what embeds one.
type drawn interface{ figure() *Figure }

// drawError makes an error of a panic while v was drawn. An error stays in the chain, so that an interrupt is known.
func drawError(v, r any) error {
	if err, ok := r.(error); ok {
		return fmt.Errorf("plotting: cannot show %T: %w", v, err)
	}
	return fmt.Errorf("plotting: cannot show %T: %v", v, r)
}

func textBundle(s string) Bundle {
	return Bundle{Data: map[string]any{mimeText: s}, Metadata: map[string]any{}}
}

// isNil reports whether v is nil or holds a nil pointer.
func isNil(v any) bool {
	rv := reflect.ValueOf(v)
	return !rv.IsValid() || rv.Kind() == reflect.Pointer && rv.IsNil()
}

func picture(img image.Image) (Bundle, error) {
	size := img.Bounds().Size()
	var buf bytes.Buffer
	if err := png.Encode(&buf, img); err != nil {
		return Bundle{}, fmt.Errorf("plotting: cannot show an image of %d × %d pixels: %w", size.X, size.Y, err)
	}
	b := textBundle(fmt.Sprintf("image of %d × %d pixels", size.X, size.Y))
	b.Data[mimePNG] = buf.Bytes()
	b.Metadata[mimePNG] = map[string]any{"width": size.X, "height": size.Y}
	return b, nil
}
