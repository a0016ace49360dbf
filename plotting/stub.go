// Package plotting stub.
package plotting

import (
	"gonum.org/v1/plot"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/spectrum"
)

// Bundle is a value in the forms in which a front end can show it.
type Bundle struct {
	Data     map[string]any // MIME type -> string, []byte (binary, base64 on the wire), or JSON value for +json
	Metadata map[string]any // MIME type -> metadata, e.g. {"image/png": {"width": 320, "height": 200}}
}
type Figure struct{ Plot *plot.Plot }

func Spectrum(ps ...*spectrum.PSD) *Figure                          { panic("stub") }
func Waveform(c *linecode.Code, t pulse.Train, bits []byte) *Figure { panic("stub") }

// Render gives the forms of a compiled value.
func Render(v any) (Bundle, error) { panic("stub") }
