package plotting

import (
	"os"
	"testing"
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
	out("two", newSpectrum(fakes(0)[1:3], false, 6e6).Figure)
}
