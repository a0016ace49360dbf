package plotting

import (
	"testing"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
	"linewright/builtins/spectrum"
)

// TestCatalogue draws the spectrum and the waveform of every code of the catalogue, and each spectrum over that of the
// code before it: nothing overlaps, whatever the code.
func TestCatalogue(t *testing.T) {
	train := pulse.Train{SymbolRate: 2.048e6, Peak: 1, Load: 100}
	bits := []byte{1, 0, 1, 1, 0, 0, 0, 0, 1, 1, 1, 1, 1, 1, 1, 1}
	var before *spectrum.PSD
	for _, name := range linecode.Names() {
		t.Run(name, func(t *testing.T) {
			code, err := linecode.ByName(name)
			if err != nil {
				t.Fatal(err)
			}
			p, err := spectrum.Exact(code, train)
			if err != nil {
				t.Fatal(err)
			}
			checkLayout(t, Spectrum(p).Figure)
			checkLayout(t, Waveform(code, train, bits))
			if before != nil {
				checkLayout(t, Spectrum(before, p).Figure)
				checkLayout(t, Spectrum(before, p).Linear().Figure)
			}
			before = p
		})
	}
}
