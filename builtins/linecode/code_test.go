package linecode

import (
	"reflect"
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

// What a newcomer who dropped the error of New does with the code says so: every method, as its error or by a panic.
func TestNilCode(t *testing.T) {
	var c *Code
	code := reflect.ValueOf(c)
	for i := range code.NumMethod() {
		t.Run(code.Type().Method(i).Name, func(t *testing.T) {
			method := code.Method(i)
			args := make([]reflect.Value, method.Type().NumIn())
			for k := range args {
				args[k] = reflect.Zero(method.Type().In(k))
			}
			last := method.Type().NumOut() - 1
			var err error
			if method.Type().Out(last) == reflect.TypeFor[error]() {
				err, _ = method.Call(args)[last].Interface().(error)
			} else {
				err = panicOf(t, func() { method.Call(args) })
			}
			if err == nil || err.Error() != "linecode: this code is nil; look at the error that New or ByName returned" {
				t.Errorf("says %v", err)
			}
		})
	}
}
