package plotting

import (
	"cmp"
	"fmt"
	"reflect"
	"slices"
	"strconv"
	"strings"
)

const (
	// TextLimit is how many elements of a value [Text] writes before it cuts.
	TextLimit = 10_000

	// deepest is the nesting at which [Text] takes a value for one that holds itself. The fmt package follows such a
	// value until the stack overflows, which would end the kernel.
	deepest = 100

	// countLimit bounds the work of counting a value that holds itself several times over.
	countLimit = 10_000_000
)

// Text returns the text/plain form of plain Go values: what fmt.Print gives for each, several parted by a space.
// A value of more than [TextLimit] elements (of slices, arrays and maps, nested ones added up) is cut there and
// followed by the count:
//
//	[0 1 2 3 ...] (20000 elements)
//
// A string is always whole.
func Text(vs ...any) string {
	parts := make([]string, len(vs))
	for i, v := range vs {
		parts[i] = sprint(v)
	}
	return strings.Join(parts, " ")
}

func sprint(v any) string {
	var c counter
	c.count(reflect.ValueOf(v), 0)
	if c.elements <= TextLimit && !c.endless {
		return fmt.Sprint(v)
	}
	p := printer{left: TextLimit}
	p.print(reflect.ValueOf(v), 0)
	if c.endless {
		return p.String()
	}
	return p.String() + " (" + strconv.Itoa(c.elements) + " elements)"
}

// A counter counts the elements that fmt.Print would write.
type counter struct {
	elements int
	endless  bool // the value holds itself
}

func (c *counter) count(v reflect.Value, depth int) {
	if c.endless = c.endless || depth > deepest || c.elements > countLimit; c.endless || opaque(v) {
		return
	}
	switch v.Kind() {
	case reflect.Slice, reflect.Array:
		if c.elements += v.Len(); plain(v.Type().Elem()) {
			return
		}
		c.elements -= v.Len() // the elements of its elements count instead
		for i := range v.Len() {
			c.element(v.Index(i), depth)
		}
	case reflect.Map:
		for it := v.MapRange(); it.Next(); {
			c.element(it.Value(), depth)
		}
	case reflect.Struct:
		for i := range v.NumField() {
			c.count(v.Field(i), depth+1)
		}
	case reflect.Interface:
		c.count(v.Elem(), depth+1)
	case reflect.Pointer:
		if depth == 0 { // fmt follows a pointer only at the top, and only to these
			switch v.Elem().Kind() {
			case reflect.Slice, reflect.Array, reflect.Map, reflect.Struct:
				c.count(v.Elem(), 1)
			}
		}
	}
}

// element counts one element, by its own elements if it has any.
func (c *counter) element(v reflect.Value, depth int) {
	before := c.elements
	c.count(v, depth+1)
	if c.elements == before {
		c.elements++
	}
}

// plain reports whether values of type t have no elements of their own.
func plain(t reflect.Type) bool {
	switch t.Kind() {
	case reflect.Slice, reflect.Array, reflect.Map, reflect.Struct, reflect.Interface:
		return false
	}
	return true
}

// opaque reports whether fmt.Print leaves v to a method of v's own.
func opaque(v reflect.Value) bool {
	if !v.IsValid() || !v.CanInterface() {
		return !v.IsValid()
	}
	switch v.Interface().(type) {
	case fmt.Formatter, fmt.Stringer, error:
		return v.Kind() != reflect.Interface
	}
	return false
}

// A printer writes a value as fmt.Print does until left elements are written, and "..." for the rest.
type printer struct {
	strings.Builder
	left int
}

func (p *printer) print(v reflect.Value, depth int) {
	if depth > deepest {
		p.WriteString("...")
		return
	}
	if !opaque(v) {
		switch v.Kind() {
		case reflect.Slice, reflect.Array:
			p.WriteByte('[')
			p.list(v.Len(), depth, v.Index)
			p.WriteByte(']')
			return
		case reflect.Map:
			p.WriteString("map[")
			entries := sortedEntries(v)
			p.list(len(entries), depth, func(i int) reflect.Value {
				p.WriteString(fmt.Sprint(entries[i].key) + ":")
				return entries[i].value
			})
			p.WriteByte(']')
			return
		case reflect.Struct:
			p.WriteByte('{')
			for i := range v.NumField() {
				if i > 0 {
					p.WriteByte(' ')
				}
				p.print(v.Field(i), depth+1)
			}
			p.WriteByte('}')
			return
		case reflect.Interface:
			if !v.IsNil() {
				p.print(v.Elem(), depth+1)
				return
			}
		case reflect.Pointer:
			if depth == 0 && !v.IsNil() {
				p.WriteByte('&')
				p.print(v.Elem(), 1)
				return
			}
		}
	}
	p.WriteString(fmt.Sprint(v)) // fmt prints the value that a reflect.Value holds
}

// list writes n elements, parted by spaces, as far as the limit allows.
func (p *printer) list(n, depth int, at func(int) reflect.Value) {
	for i := range n {
		if i > 0 {
			p.WriteByte(' ')
		}
		if p.left <= 0 {
			p.WriteString("...")
			return
		}
		before := p.left
		if p.print(at(i), depth+1); p.left == before {
			p.left--
		}
	}
}

// An entry is one of a map's.
type entry struct{ key, value reflect.Value }

// sortedEntries returns a map's entries in an order that does not change from run to run: numbers rise, as fmt has them,
// other keys go by their text.
func sortedEntries(m reflect.Value) []entry {
	var out []entry
	for it := m.MapRange(); it.Next(); {
		out = append(out, entry{it.Key(), it.Value()})
	}
	slices.SortStableFunc(out, func(x, y entry) int {
		switch a, b := x.key, y.key; {
		case a.CanInt():
			return cmp.Compare(a.Int(), b.Int())
		case a.CanUint():
			return cmp.Compare(a.Uint(), b.Uint())
		case a.CanFloat():
			return cmp.Compare(a.Float(), b.Float())
		default:
			return strings.Compare(fmt.Sprint(a), fmt.Sprint(b))
		}
	})
	return out
}
