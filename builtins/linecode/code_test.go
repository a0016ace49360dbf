package linecode

import (
	"slices"
	"sync"
	"testing"

	"linewright/builtins/source"
)

// A code is read only, up to what it finds out when first asked; goroutines may share it. The race detector is the judge.
func TestGoroutinesShareACode(t *testing.T) {
	code := HDB3()
	bits := source.Random().Bits(500, 1)
	sym, err := code.Encode(bits)
	if err != nil {
		t.Fatal(err)
	}
	var all sync.WaitGroup
	for range 4 {
		all.Go(func() {
			back, _, err := code.Decode(sym)
			if err != nil || !slices.Equal(back, bits) || code.Chain().States != 35 || !code.Decodable().Decodable {
				t.Errorf("%v, %v", back, err)
			}
		})
	}
	all.Wait()
}

// Figures that others may change are copies.
func TestFiguresAreCopies(t *testing.T) {
	code := AMI()
	code.Levels()[0] = 7
	wantEqual(t, "levels", code.Levels(), []float64{-1, 0, 1})
	sym, _ := code.Encode([]byte{1})
	sym[0] = 7
	sym, _ = code.Encode([]byte{1})
	wantEqual(t, "symbols", sym, []float64{1})
	names := Names()
	names[0] = "x"
	wantEqual(t, "name", Names()[0], "unipolar NRZ")
}
