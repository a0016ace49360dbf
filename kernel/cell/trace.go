package cell

import (
	"fmt"
	"reflect"

	"github.com/traefik/yaegi/interp"
)

// traceWriter takes the interpreter's lines about frames that a panic leaves.
type traceWriter struct{ in *Interpreter }

func (t traceWriter) Write(p []byte) (int, error) { return len(p), nil }

func (r *run) panicked(err error) error {
	msg := err.Error()
	if p, ok := err.(interp.Panic); ok {
		v := p.Value
		if rv, ok := v.(reflect.Value); ok && rv.CanInterface() {
			v = rv.Interface()
		}
		msg = fmt.Sprint(v)
	}
	return &Error{Name: "panic", Value: clean(msg), Trace: []string{"panic: " + clean(msg)}}
}
