package cell

import (
	"log"
	"os"
	"reflect"
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
}

// sleep is time.Sleep that an interrupt ends.
func (in *Interpreter) sleep(d time.Duration) {
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-t.C:
	case <-in.here().ctx.Done():
	}
}
