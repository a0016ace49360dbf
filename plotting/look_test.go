package plotting

import (
	"os"
	"testing"

	"linewright/builtins/pulse"
)

func TestLook(t *testing.T) {
	out := func(name string, f *Figure) {
		b, err := f.bundle()
		if err != nil {
			t.Fatal(err)
		}
		os.WriteFile("/tmp/h5/"+name+".svg", []byte(b.Data[mimeSVG].(string)), 0o644)
		os.WriteFile("/tmp/h5/"+name+".png", b.Data[mimePNG].([]byte), 0o644)
		os.WriteFile("/tmp/h5/"+name+".txt", []byte(b.Data[mimeText].(string)), 0o644)
		t.Log(name, len(b.Data[mimeSVG].(string)), len(b.Data[mimePNG].([]byte)))
	}
	ds := fakes(120)
	s := newSpectrum(ds, false, spectrumRange(ds))
	out("four", s.Figure)
	out("lin", s.Linear().Figure)
	one := newSpectrum(fakes(0)[2:3], false, 6e6)
	out("one", one.Figure)
	bits := []byte{1, 0, 1, 1, 0, 0, 0, 0, 1, 1, 0, 1, 0, 0, 1, 1}
	out("wave", newWaveform(marks{}, pulse.Train{BitRate: 2.048e6, Level: 3, Shape: pulse.Rect(0.5)}, bits))
	out("wave2", newWaveform(marks{}, pulse.Train{BitRate: 2.048e6, Level: 3, Shape: pulse.HalfSine(1)}, bits))
	out("wave3", newWaveform(marks{}, pulse.Train{BitRate: 2.048e6, Level: 3, Transition: func(a, b float64) pulse.Shape { return pulse.Settle(a, b, 0.1) }}, append(bits, bits...)))
	out("two", newSpectrum(fakes(0)[1:3], false, 6e6).Figure)
}
