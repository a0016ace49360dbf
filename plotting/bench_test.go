package plotting

import "testing"

// BenchmarkForms draws a spectrum of 1201 points with two curves and tones in its three forms.
func BenchmarkForms(b *testing.B) {
	f := newSpectrum(fakes(120)[1:3], false, 6e6)
	b.Run("svg", func(b *testing.B) {
		for b.Loop() {
			if _, err := f.SVG(); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("png", func(b *testing.B) {
		for b.Loop() {
			if _, _, _, err := f.PNG(); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("text", func(b *testing.B) {
		for b.Loop() {
			_ = f.String()
		}
	})
}
