package cell

import (
	"errors"
	"log"
	"os"
	"reflect"
	"runtime"
	"slices"
	"strings"
	"time"

	"github.com/traefik/yaegi/interp"
)

// replacements are functions of the standard library that mean something else in a cell.
func (in *Interpreter) replacements() interp.Exports {
	l := log.New(stream{in, "stderr"}, "", log.LstdFlags)
	table := map[string]any{
		"Default": func() *log.Logger { return l }, "Flags": l.Flags, "Output": l.Output, "Prefix": l.Prefix,
		"Panic": l.Panic, "Panicf": l.Panicf, "Panicln": l.Panicln, "Print": l.Print, "Printf": l.Printf, "Println": l.Println,
		"SetFlags": l.SetFlags, "SetOutput": l.SetOutput, "SetPrefix": l.SetPrefix, "Writer": l.Writer,
		"Fatal":   func(v ...any) { l.Print(v...); in.exit(1) },
		"Fatalf":  func(format string, v ...any) { l.Printf(format, v...); in.exit(1) },
		"Fatalln": func(v ...any) { l.Println(v...); in.exit(1) },
	}
	logs := map[string]reflect.Value{}
	for name, f := range table {
		logs[name] = reflect.ValueOf(f)
	}
	return interp.Exports{
		"errors/errors": {
			"Is": reflect.ValueOf(in.errorIs),
			"As": reflect.ValueOf(in.errorAs),
		},
		"log/log":   logs,
		"os/os":     {"Exit": reflect.ValueOf(in.exit)},
		"time/time": {"Sleep": reflect.ValueOf(in.sleep)},
	}
}

// exit ends the kernel with a cell's code, after the output has passed on what it holds.
func (in *Interpreter) exit(code int) {
	r := in.here()
	o, ok := r.out.(interface{ Exit(code int) })
	if !ok {
		os.Exit(code)
	}
	o.Exit(code)
	// If the end takes a moment, nothing more of the cell runs in it.
	<-r.ctx.Done()
	runtime.Goexit()
}

// sleep is time.Sleep that an interrupt ends.
func (in *Interpreter) sleep(d time.Duration) {
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-t.C:
	case <-in.here().ctx.Done():
		// The interrupt stops the interpreter a moment later; the statement after this one must not run before.
		time.Sleep(10 * time.Millisecond)
	}
}

// errorIs is errors.Is for cells: the interpreter wraps an error of a cell's type anew each time, so that identity is that of
// what is inside.
func (in *Interpreter) errorIs(err, target error) bool {
	if errors.Is(err, target) {
		return true
	}
	want := in.inside(target)
	if !want.IsValid() || !want.Comparable() {
		return false
	}
	return in.inChain(err, func(v reflect.Value) bool {
		return v.Type() == want.Type() && v.Comparable() && v.Equal(want)
	})
}

// errorAs is errors.As for cells, whose error types have no methods that the original could see.
func (in *Interpreter) errorAs(err error, target any) bool {
	p := reflect.ValueOf(target)
	if p.Kind() == reflect.Pointer && !p.IsNil() {
		if in.inChain(err, func(v reflect.Value) bool {
			if v.Type() != p.Type().Elem() {
				return false
			}
			p.Elem().Set(v)
			return true
		}) {
			return true
		}
		if t := p.Type().Elem(); t.Kind() != reflect.Interface && !t.Implements(reflect.TypeFor[error]()) {
			return false
		}
	}
	return errors.As(err, target)
}

// inside returns the cell's value in an error, or an invalid value for a compiled error.
func (in *Interpreter) inside(err error) reflect.Value {
	v := reflect.ValueOf(err)
	if v.Kind() != reflect.Struct || !strings.HasPrefix(v.Type().Name(), "_") || v.NumField() == 0 || v.Type().Field(0).Name != "IValue" {
		return reflect.Value{}
	}
	s := &shown{in: in, v: v.Field(0)}
	s.resolve()
	return s.v
}

func (in *Interpreter) inChain(err error, found func(reflect.Value) bool) bool {
	for err != nil {
		if v := in.inside(err); v.IsValid() && found(v) {
			return true
		}
		switch x := err.(type) {
		case interface{ Unwrap() error }:
			err = x.Unwrap()
		case interface{ Unwrap() []error }:
			return slices.ContainsFunc(x.Unwrap(), func(e error) bool { return in.inChain(e, found) })
		default:
			return false
		}
	}
	return false
}
