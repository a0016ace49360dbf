package spectrum_test

import (
	"reflect"
	"strings"
	"testing"

	"linewright/builtins/pulse"
	"linewright/builtins/spectrum"
)

// What a newcomer who dropped an error does with the spectrum says so: every method, as its error or by a panic.
func TestNilPSD(t *testing.T) {
	var nothing *spectrum.PSD
	p := reflect.ValueOf(nothing)
	for i := range p.NumMethod() {
		t.Run(p.Type().Method(i).Name, func(t *testing.T) {
			method := p.Method(i)
			args := make([]reflect.Value, method.Type().NumIn())
			for k := range args {
				args[k] = reflect.Zero(method.Type().In(k))
				if args[k].CanFloat() {
					args[k] = reflect.ValueOf(0.5)
				}
			}
			const want = "spectrum: this spectrum is nil; look at the error that Exact or OfChain returned"
			got := ""
			if last := method.Type().NumOut() - 1; method.Type().Out(last) == reflect.TypeFor[error]() {
				if err, ok := method.Call(args)[last].Interface().(error); ok {
					got = err.Error()
				}
			} else {
				got = failure(func() { method.Call(args) })
			}
			if got != want {
				t.Errorf("says %q, want %q", got, want)
			}
		})
	}
}

func TestOfNothing(t *testing.T) {
	_, code := spectrum.Exact(nil, pulse.Train{})
	_, chain := spectrum.OfChain(nil, pulse.Train{})
	_, drive := pulse.Train{}.Drive(nil)
	for want, err := range map[string]error{"spectrum: Exact got a nil code": code, "spectrum: OfChain got a nil chain": chain, "pulse: Drive got no code": drive} {
		if err == nil || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("error %v does not begin with %q", err, want)
		}
	}
}
