package cell

import (
	"fmt"
	"strings"

	"linewright/plotting"
)

// show takes the values of a cell's last expression.
func (in *Interpreter) show(values ...any) {
	r := in.here()
	types := r.program.shown
	if n := len(types); n > 0 && isError(types[n-1]) && len(values) == n {
		if err, _ := values[n-1].(error); err != nil {
			r.failure = err
			return
		}
		if n > 1 {
			values = values[:n-1]
		}
	}
	if r.program.printed {
		return
	}
	b := plotting.Bundle{Data: map[string]any{"text/plain": strings.TrimSuffix(fmt.Sprintln(values...), "\n")}}
	if len(values) == 1 {
		var err error
		if b, err = plotting.Render(values[0]); err != nil {
			r.failure = err
			return
		}
	}
	r.bundle = &b
}
