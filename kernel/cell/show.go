package cell

import (
	"fmt"
	"go/types"
	"reflect"
	"strings"

	"linewright/plotting"
)

// show takes the values of a cell's last expression.
func (in *Interpreter) show(values ...any) {
	r := in.here()
	static := r.program.shown
	if n := len(static); n > 0 && isError(static[n-1]) && len(values) == n {
		if err, _ := values[n-1].(error); err != nil {
			r.failure = err
			return
		}
		if n > 1 {
			values, static = values[:n-1], static[:n-1]
		}
	}
	if r.program.printed {
		return
	}
	var b plotting.Bundle
	var err error
	if len(values) == 1 {
		b, err = in.render(values[0], static[0])
	} else {
		texts := make([]string, len(values))
		for i, v := range values {
			texts[i] = in.text(v, static[i])
		}
		b = textBundle(strings.Join(texts, " "))
	}
	if err != nil {
		r.failure = err
		return
	}
	r.bundle = &b
}

// render gives the forms of one value. Static is nil where the static type is not known.
func (in *Interpreter) render(v any, static types.Type) (plotting.Bundle, error) {
	if s, ok := v.(*shown); ok {
		return textBundle(s.text()), nil
	}
	if static != nil {
		if _, ok := static.Underlying().(*types.Signature); ok && !reflect.ValueOf(v).IsNil() {
			return textBundle(types.TypeString(static, brief)), nil
		}
	}
	if s := in.shown(v, static); s != nil {
		return textBundle(s.text()), nil
	}
	return plotting.Render(v)
}

// text is the text/plain form of one of several values.
func (in *Interpreter) text(v any, static types.Type) string {
	if s := in.shown(v, static); s != nil {
		return s.text()
	}
	return plotting.Text(v)
}

// text writes a value as fmt.Print does, up to a limit of elements.
func (s *shown) text() string {
	n := elements(s.v, 0)
	if n <= textLimit {
		return fmt.Sprint(s)
	}
	left := textLimit
	s.left = &left
	return fmt.Sprintf("%v (%d elements)", s, n)
}

// elements counts the elements of a value's slices, arrays and maps.
func elements(v reflect.Value, depth int) int {
	n := 0
	if depth > deepest {
		return 0
	}
	each := func(e reflect.Value) { n += max(1, elements(e, depth+1)) }
	switch v.Kind() {
	case reflect.Slice, reflect.Array:
		for i := range v.Len() {
			each(v.Index(i))
		}
	case reflect.Map:
		for it := v.MapRange(); it.Next(); {
			each(it.Value())
		}
	case reflect.Struct:
		for i := range v.NumField() {
			n += elements(v.Field(i), depth+1)
		}
	case reflect.Interface:
		return elements(v.Elem(), depth+1)
	}
	return n
}

func textBundle(s string) plotting.Bundle {
	return plotting.Bundle{Data: map[string]any{"text/plain": s}, Metadata: map[string]any{}}
}
