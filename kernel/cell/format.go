package cell

import (
	"cmp"
	"fmt"
	"go/types"
	"io"
	"reflect"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"
	"unsafe"
)

// Interpreted types are invisible to reflect: a cell's struct is an anonymous one with an X before its unexported fields, and
// its methods are unknown. So that fmt prints such a value as Go would, it gets a shown in its place, which knows the
// static type.
type shown struct {
	in    *Interpreter
	v     reflect.Value
	t     types.Type // nil if only v is known
	depth int
	quiet bool // in an unexported field, of which fmt calls no methods
	left  *int // elements that may still be written; nil for no limit
}

const (
	textLimit = 10_000 // elements of a shown value, as in plotting.Text
	deepest   = 100    // nesting at which a value must hold itself
)

// typed stands around an argument of fmt's functions, for instance: it returns v, or what prints like v in Go.
func (in *Interpreter) typed(id int, v any) any {
	in.types.Lock()
	t := in.typeTable[id]
	in.types.Unlock()
	s := in.shown(v, t)
	if s == nil {
		return v
	}
	return s
}

// typeName gives the name of a value's type as %T does.
func (in *Interpreter) typeName(id int, v any) string {
	in.types.Lock()
	t := in.typeTable[id]
	in.types.Unlock()
	s := &shown{in: in, v: reflect.ValueOf(v), t: t}
	s.resolve()
	if !s.v.IsValid() {
		return "<nil>"
	}
	return s.typeName()
}

// holds reports whether an any may hold a value of that very type. Of paired types the interpreter keeps the type with the
// value, so that T(5) is no plain int; of others only the shape is known.
func (in *Interpreter) holds(id int, v any) bool {
	in.types.Lock()
	want := in.typeTable[id]
	in.types.Unlock()
	s := &shown{in: in, v: reflect.ValueOf(v)}
	pair := s.v.IsValid() && s.v.Type() == in.vm.pair
	s.resolve()
	if !pair {
		return !paired(want)
	}
	return s.t == nil || types.Identical(s.t, want)
}

// paired reports whether the interpreter puts a pair of type and value into an any: for a cell's types with methods other
// than structs.
func paired(t types.Type) bool {
	n, ok := types.Unalias(t).(*types.Named)
	if !ok || n.Obj().Pkg() == nil || n.Obj().Pkg().Path() != "main" || n.NumMethods() == 0 {
		return false
	}
	switch n.Underlying().(type) {
	case *types.Struct, *types.Interface:
		return false
	}
	return true
}

// shown returns what prints like v in Go, or nil if v does so by itself.
func (in *Interpreter) shown(v any, t types.Type) *shown {
	s := &shown{in: in, v: reflect.ValueOf(v), t: t}
	s.resolve()
	if !s.v.IsValid() || !in.interpreted(s.v, s.t, 0) {
		return nil
	}
	return s
}

// interpreted reports whether a value holds anything of an interpreted type.
func (in *Interpreter) interpreted(v reflect.Value, t types.Type, depth int) bool {
	if !v.IsValid() || depth > deepest {
		return false
	}
	switch t := types.Unalias(orNil(t)).(type) {
	case *types.Named:
		return t.Obj().Pkg() != nil && t.Obj().Pkg().Path() == "main" || v.Kind() == reflect.Interface && in.interpreted(v.Elem(), nil, depth+1)
	case *types.Struct:
		return true
	}
	switch v.Kind() {
	case reflect.Struct:
		return v.Type().Name() == "" || v.Type() == in.vm.pair
	case reflect.Interface:
		return in.interpreted(v.Elem(), nil, depth+1)
	case reflect.Slice, reflect.Array:
		if e := v.Type().Elem(); e.Kind() == reflect.Interface {
			for i := range v.Len() {
				if in.interpreted(v.Index(i), nil, depth+1) {
					return true
				}
			}
			return false
		}
		return in.interpretedType(v.Type().Elem(), elem(t))
	case reflect.Map:
		if v.Type().Elem().Kind() == reflect.Interface {
			for it := v.MapRange(); it.Next(); {
				if in.interpreted(it.Value(), nil, depth+1) {
					return true
				}
			}
		}
		return in.interpretedType(v.Type().Elem(), elem(t)) || in.interpretedType(v.Type().Key(), key(t))
	case reflect.Pointer:
		return in.interpretedType(v.Type().Elem(), elem(t))
	}
	return false
}

// interpretedType is interpreted for the type of elements.
func (in *Interpreter) interpretedType(r reflect.Type, t types.Type) bool {
	return in.interpreted(reflect.Zero(r), t, 0)
}

func orNil(t types.Type) types.Type {
	if t == nil {
		return types.Typ[types.Invalid]
	}
	return t
}

func elem(t types.Type) types.Type {
	if t == nil {
		return nil
	}
	if e, ok := t.Underlying().(interface{ Elem() types.Type }); ok {
		return e.Elem()
	}
	return nil
}

func key(t types.Type) types.Type {
	if t == nil {
		return nil
	}
	if m, ok := t.Underlying().(*types.Map); ok {
		return m.Key()
	}
	return nil
}

// resolve follows interfaces to the value and, as far as it can be known, the type in them.
func (s *shown) resolve() {
	for s.v.IsValid() {
		switch {
		case s.v.Kind() == reflect.Interface:
			s.v, s.t = s.v.Elem(), nil
		case s.v.Type() == s.in.vm.pair:
			s.v, s.t = s.in.unwrap(s.v)
		default:
			if s.t != nil {
				if _, ok := s.t.Underlying().(*types.Interface); ok {
					s.t = nil
				}
			}
			if s.t == nil && s.v.Kind() == reflect.Struct && s.v.Type().Name() == "" {
				s.t = s.in.byShape(s.v.Type())
			}
			return
		}
	}
}

// unwrap takes a value and its type out of yaegi's private pair of a value and the node that knows its type.
func (in *Interpreter) unwrap(v reflect.Value) (reflect.Value, types.Type) {
	c := reflect.New(v.Type()).Elem()
	c.Set(v)
	inner := *(*reflect.Value)(unsafe.Pointer(c.FieldByName("value").UnsafeAddr()))
	node := c.FieldByName("node")
	if node.IsNil() {
		return inner, nil
	}
	typ := node.Elem().FieldByName("typ")
	if typ.IsNil() {
		return inner, nil
	}
	name := typ.Elem().FieldByName("name").String()
	pointer := false
	if name == "" { // a pointer's type has no name; its element's has
		if val := typ.Elem().FieldByName("val"); val.Kind() == reflect.Pointer && !val.IsNil() {
			name, pointer = val.Elem().FieldByName("name").String(), true
		}
	}
	in.types.Lock()
	defer in.types.Unlock()
	t := in.named[name]
	if t != nil && pointer {
		t = types.NewPointer(t)
	}
	return inner, t
}

// byShape finds the one live struct type of the cells that a reflect type can stand for. Two types of the same shape in an
// any cannot be told apart.
func (in *Interpreter) byShape(r reflect.Type) types.Type {
	in.types.Lock()
	defer in.types.Unlock()
	var found types.Type
	for _, e := range in.names {
		o, ok := e.obj.(*types.TypeName)
		if !ok || o.IsAlias() || !sameShape(r, o.Type(), 0) {
			continue
		}
		if found != nil {
			return nil
		}
		found = o.Type()
	}
	return found
}

// sameShape reports whether an interpreted struct type of static type t has the reflect type r.
func sameShape(r reflect.Type, t types.Type, depth int) bool {
	s, ok := t.Underlying().(*types.Struct)
	if !ok || r.Kind() != reflect.Struct || r.Name() != "" || r.NumField() != s.NumFields() || depth > 3 {
		return false
	}
	for i := range s.NumFields() {
		f, rf := s.Field(i), r.Field(i)
		if fieldName(rf.Name) != f.Name() || kindOf(f.Type()) != rf.Type.Kind() {
			return false
		}
		if rf.Type.Kind() == reflect.Struct && rf.Type.Name() == "" && !sameShape(rf.Type, f.Type(), depth+1) {
			return false
		}
	}
	return true
}

// kindOf is the reflect kind of a static type.
func kindOf(t types.Type) reflect.Kind {
	switch u := t.Underlying().(type) {
	case *types.Basic:
		return basicKinds[u.Kind()]
	case *types.Struct:
		return reflect.Struct
	case *types.Pointer:
		return reflect.Pointer
	case *types.Slice:
		return reflect.Slice
	case *types.Array:
		return reflect.Array
	case *types.Map:
		return reflect.Map
	case *types.Chan:
		return reflect.Chan
	case *types.Signature:
		return reflect.Func
	case *types.Interface:
		return reflect.Interface
	}
	return reflect.Invalid
}

var basicKinds = map[types.BasicKind]reflect.Kind{
	types.Bool: reflect.Bool, types.String: reflect.String, types.UnsafePointer: reflect.UnsafePointer, types.Uintptr: reflect.Uintptr,
	types.Int: reflect.Int, types.Int8: reflect.Int8, types.Int16: reflect.Int16, types.Int32: reflect.Int32, types.Int64: reflect.Int64,
	types.Uint: reflect.Uint, types.Uint8: reflect.Uint8, types.Uint16: reflect.Uint16, types.Uint32: reflect.Uint32, types.Uint64: reflect.Uint64,
	types.Float32: reflect.Float32, types.Float64: reflect.Float64, types.Complex64: reflect.Complex64, types.Complex128: reflect.Complex128,
}

// fieldName is the source's name of a field of an interpreted struct.
func fieldName(name string) string {
	name = plain(name)
	if rest, ok := strings.CutPrefix(name, "X"); ok && rest != "" {
		if r, _ := utf8.DecodeRuneInString(rest); !unicode.IsUpper(r) {
			return rest
		}
	}
	return name
}

// Format implements fmt.Formatter.
func (s *shown) Format(f fmt.State, verb rune) {
	s.resolve()
	directive := fmt.FormatString(f, verb)
	switch {
	case !s.v.IsValid():
		fmt.Fprintf(f, directive, nil)
		return
	case verb == 'T':
		fmt.Fprint(f, s.typeName())
		return
	case s.depth > deepest:
		fmt.Fprint(f, "...")
		return
	}
	if !s.quiet && !f.Flag('#') && strings.ContainsRune("vsxXq", verb) {
		for _, name := range []string{"Error", "String"} {
			if call := s.in.textMethod(s.v, s.t, name); call != nil {
				fmt.Fprintf(f, directive, protect(call, s.v))
				return
			}
		}
	}
	if !s.in.interpreted(s.v, s.t, 0) && s.v.CanInterface() {
		fmt.Fprintf(f, directive, s.v.Interface())
		return
	}
	switch s.v.Kind() {
	case reflect.Struct:
		s.structure(f, verb)
	case reflect.Slice, reflect.Array:
		open, sep, end := "[", " ", "]"
		if verb == 'v' && f.Flag('#') {
			open, sep, end = s.typeName()+"{", ", ", "}"
		}
		io.WriteString(f, open)
		for i := range s.v.Len() {
			if i > 0 {
				io.WriteString(f, sep)
			}
			if !s.take(f) {
				break
			}
			s.child(s.v.Index(i), elem(s.t), s.quiet).Format(f, verb)
		}
		io.WriteString(f, end)
	case reflect.Map:
		s.mapping(f, verb)
	case reflect.Pointer:
		switch {
		case s.v.IsNil():
			io.WriteString(f, "<nil>")
			return
		case s.depth == 0 && slices.Contains([]reflect.Kind{reflect.Struct, reflect.Map, reflect.Slice, reflect.Array}, s.v.Elem().Kind()) && verb != 'p':
			io.WriteString(f, "&")
			s.child(s.v.Elem(), elem(s.t), s.quiet).Format(f, verb)
		case f.Flag('#'):
			fmt.Fprintf(f, "(%s)(%#x)", s.typeName(), s.v.Pointer())
		default:
			fmt.Fprintf(f, directive, s.v.Interface())
		}
	default:
		fmt.Fprintf(f, directive, s.v.Interface())
	}
}

func (s *shown) child(v reflect.Value, t types.Type, quiet bool) *shown {
	return &shown{in: s.in, v: v, t: t, depth: s.depth + 1, quiet: quiet, left: s.left}
}

// take counts an element; at the limit it writes an ellipsis and returns false.
func (s *shown) take(f fmt.State) bool {
	if s.left == nil {
		return true
	}
	if *s.left <= 0 {
		io.WriteString(f, "...")
		return false
	}
	*s.left--
	return true
}

func (s *shown) structure(f fmt.State, verb rune) {
	var static *types.Struct
	if s.t != nil {
		static, _ = s.t.Underlying().(*types.Struct)
	}
	sep := " "
	if f.Flag('#') {
		io.WriteString(f, s.typeName())
		sep = ", "
	}
	io.WriteString(f, "{")
	for i := range s.v.NumField() {
		if i > 0 {
			io.WriteString(f, sep)
		}
		name := fieldName(s.v.Type().Field(i).Name)
		var t types.Type
		if static != nil && i < static.NumFields() {
			t = static.Field(i).Type()
		}
		if f.Flag('+') || f.Flag('#') {
			io.WriteString(f, name+":")
		}
		r, _ := utf8.DecodeRuneInString(name)
		s.child(s.v.Field(i), t, s.quiet || !unicode.IsUpper(r)).Format(f, verb)
	}
	io.WriteString(f, "}")
}

func (s *shown) mapping(f fmt.State, verb rune) {
	open, sep, end := "map[", " ", "]"
	if f.Flag('#') {
		open, sep, end = s.typeName()+"{", ", ", "}"
	}
	keys := s.v.MapKeys()
	slices.SortFunc(keys, compare)
	io.WriteString(f, open)
	for i, k := range keys {
		if i > 0 {
			io.WriteString(f, sep)
		}
		if !s.take(f) {
			break
		}
		s.child(k, key(s.t), s.quiet).Format(f, verb)
		io.WriteString(f, ":")
		s.child(s.v.MapIndex(k), elem(s.t), s.quiet).Format(f, verb)
	}
	io.WriteString(f, end)
}

// compare orders keys of a map as fmt does, as far as their kinds have an order.
func compare(a, b reflect.Value) int {
	for a.Kind() == reflect.Interface && b.Kind() == reflect.Interface && !a.IsNil() && !b.IsNil() {
		a, b = a.Elem(), b.Elem()
	}
	if a.Kind() == b.Kind() {
		switch {
		case a.CanInt():
			return cmp.Compare(a.Int(), b.Int())
		case a.CanUint():
			return cmp.Compare(a.Uint(), b.Uint())
		case a.CanFloat():
			return cmp.Compare(a.Float(), b.Float())
		case a.Kind() == reflect.String:
			return cmp.Compare(a.String(), b.String())
		case a.Kind() == reflect.Struct || a.Kind() == reflect.Array:
			n, at := 0, reflect.Value.Field
			if a.Kind() == reflect.Array {
				n, at = a.Len(), reflect.Value.Index
			} else {
				n = a.NumField()
			}
			for i := range n {
				if c := compare(at(a, i), at(b, i)); c != 0 {
					return c
				}
			}
			return 0
		}
	}
	return cmp.Compare(fmt.Sprint(a), fmt.Sprint(b))
}

func (s *shown) typeName() string {
	if s.t != nil {
		return types.TypeString(s.t, func(p *types.Package) string { return p.Name() })
	}
	return s.v.Type().String()
}

// protect calls a String or Error method; a panic in it is text, as in fmt.
func protect(call func(reflect.Value) string, v reflect.Value) (text string) {
	defer func() {
		if r := recover(); r != nil {
			if v.Kind() == reflect.Pointer && v.IsNil() {
				text = "<nil>"
				return
			}
			x, _ := thrown(r)
			text = fmt.Sprintf("%%!v(PANIC=String method: %v)", x)
		}
	}()
	return call(v)
}

// textMethod returns a cell's method of that name without parameters and with a string as result, for a value of static
// type t.
func (in *Interpreter) textMethod(v reflect.Value, t types.Type, name string) func(reflect.Value) string {
	if t == nil {
		return nil
	}
	in.types.Lock()
	defer in.types.Unlock()
	sel := types.NewMethodSet(t).Lookup(nil, name)
	if sel == nil {
		return nil
	}
	fn := sel.Obj().(*types.Func)
	sig := fn.Signature()
	if sig.Params().Len() != 0 || sig.Results().Len() != 1 || !types.Identical(sig.Results().At(0).Type(), types.Typ[types.String]) {
		return nil
	}
	index := sel.Index()[:len(sel.Index())-1]
	f, ok := in.texts[in.canonical(fn)]
	_, wantPtr := sig.Recv().Type().(*types.Pointer)
	return func(v reflect.Value) string {
		for _, i := range index {
			v = reflect.Indirect(v).Field(i)
		}
		if !ok { // a compiled type's method, promoted
			if x, ok := v.Interface().(fmt.Stringer); ok && name == "String" {
				return x.String()
			}
			if x, ok := v.Interface().(error); ok && name == "Error" {
				return x.Error()
			}
			return fmt.Sprint(v.Interface())
		}
		switch {
		case wantPtr && v.Kind() != reflect.Pointer:
			p := reflect.New(v.Type())
			p.Elem().Set(v)
			v = p
		case !wantPtr && v.Kind() == reflect.Pointer && f.Elem().Type().In(0).Kind() != reflect.Pointer:
			v = v.Elem()
		}
		return f.Elem().Call([]reflect.Value{v})[0].String()
	}
}

// canonical returns the method that has the interpreter's function: of an instance of a generic type there are several
// equal ones.
func (in *Interpreter) canonical(fn *types.Func) *types.Func {
	if fn.Origin() == fn {
		return fn
	}
	recv := fn.Signature().Recv().Type()
	if p, ok := recv.(*types.Pointer); ok {
		recv = p.Elem()
	}
	if n, ok := ofCells(recv); ok {
		for _, i := range in.instances[n.Origin().Obj()] {
			if i.is(list(n.TypeArgs())) && i.methods[fn.Name()] != nil {
				return i.methods[fn.Name()]
			}
		}
	}
	return fn
}
