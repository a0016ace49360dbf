package cell

import (
	"context"
	"errors"
	"fmt"
	"go/ast"
	"io"
	"reflect"
	"strings"
	"sync/atomic"
	"unsafe"

	"github.com/traefik/yaegi/interp"
	"github.com/traefik/yaegi/stdlib"

	"linewright/kernel/cell/symbols"
)

// machine is yaegi with the two private fields that interrupts need: the run id, which every interpreted frame compares
// before each step, and the channel that wakes its blocked channel operations.
//
// yaegi's own EvalWithContext replaces that channel in every run, so that a channel operation in a closure of an earlier
// cell could not be stopped, and it never takes the run id back, so that after a stop every earlier closure returns zero
// values. Here the channel is made once and never closed, and the id is restored when what was to stop has stopped.
type machine struct {
	yaegi  *interp.Interpreter
	tables []interp.Exports
	id     *uint64
	done   chan struct{}
	keeps  []reflect.Value // what yaegi keeps of all that was compiled, for its debugger only: trees and scopes
	pair   reflect.Type    // of what it keeps in an any for a value of a type with methods
}

func newMachine(stdout, stderr io.Writer, more ...interp.Exports) (*machine, error) {
	y := interp.New(interp.Options{Stdin: strings.NewReader(""), Stdout: stdout, Stderr: stderr, Unrestricted: true})
	tables := append([]interp.Exports{stdlib.Symbols, symbols.Symbols}, more...)
	for _, table := range tables {
		if err := y.Use(table); err != nil {
			return nil, fmt.Errorf("cell: loading symbols: %w", err)
		}
	}
	// Makes the channel, and makes channel operations that are compiled later look at it.
	if _, err := y.EvalWithContext(context.Background(), "0"); err != nil {
		return nil, fmt.Errorf("cell: starting the interpreter: %w", err)
	}
	m := &machine{yaegi: y, tables: tables}
	id, err := field[uint64](y, "id")
	if err != nil {
		return nil, err
	}
	done, err := field[chan struct{}](y, "done")
	if err != nil {
		return nil, err
	}
	m.id, m.done = id, *done
	if err := m.findKept(); err != nil {
		return nil, err
	}
	return m, m.findPair()
}

// findKept finds the lists of trees and scopes.
func (m *machine) findKept() error {
	wrong := errors.New("cell: this yaegi keeps its trees and scopes in another form; the pinned version is v0.16.1")
	y := reflect.ValueOf(m.yaegi).Elem()
	roots, scopes := y.FieldByName("roots"), y.FieldByName("scopes")
	if !roots.IsValid() || roots.Kind() != reflect.Slice || !scopes.IsValid() || scopes.Kind() != reflect.Map {
		return wrong
	}
	scope := scopes.MapIndex(reflect.ValueOf("main"))
	if !scope.IsValid() || scope.Kind() != reflect.Pointer || scope.IsNil() {
		return wrong
	}
	children := scope.Elem().FieldByName("child")
	if !children.IsValid() || children.Kind() != reflect.Slice {
		return wrong
	}
	for _, list := range []reflect.Value{roots, children} {
		m.keeps = append(m.keeps, reflect.NewAt(list.Type(), list.Addr().UnsafePointer()).Elem())
	}
	return nil
}

// findPair finds the private type of interface values.
func (m *machine) findPair() error {
	if _, err := m.yaegi.Eval("type " + kernel + "pair int; func (" + kernel + "pair) M() {}"); err != nil {
		return err
	}
	v, err := m.yaegi.Eval("[]any{" + kernel + "pair(1)}")
	if err != nil {
		return err
	}
	if list, ok := v.Interface().([]any); ok && len(list) == 1 {
		t := reflect.TypeOf(list[0])
		if t.Kind() == reflect.Struct {
			value, ok1 := t.FieldByName("value")
			_, ok2 := t.FieldByName("node")
			if ok1 && ok2 && value.Type == reflect.TypeFor[reflect.Value]() {
				m.pair = t
				return nil
			}
		}
	}
	return errors.New("cell: this yaegi keeps interface values in another form; the pinned version is v0.16.1")
}

// field returns the address of a private field of the pinned yaegi.
func field[T any](y *interp.Interpreter, name string) (*T, error) {
	f, ok := reflect.TypeFor[interp.Interpreter]().FieldByName(name)
	if !ok || f.Type != reflect.TypeFor[T]() {
		return nil, fmt.Errorf("cell: this yaegi has no field %s of type %v; the pinned version is v0.16.1", name, reflect.TypeFor[T]())
	}
	return (*T)(unsafe.Add(unsafe.Pointer(y), f.Offset)), nil
}

// stop makes all interpreted code return at its next step. It returns the id to restore.
func (m *machine) stop() (old uint64) { return atomic.AddUint64(m.id, 1) - 1 }

// restore lets the closures of the run id old work again.
func (m *machine) restore(old uint64) { atomic.StoreUint64(m.id, old) }

// wake ends the channel operations that are blocked now.
func (m *machine) wake() {
	for {
		select {
		case m.done <- struct{}{}:
		default:
			return
		}
	}
}

// compile compiles declarations and executes them. Nothing of the cell's own code runs here, except the values of
// declarations that the lowering makes.
func (m *machine) declare(decls []ast.Decl) error {
	if len(decls) == 0 {
		return nil
	}
	p, err := m.compile(&ast.File{Name: ast.NewIdent("main"), Package: decls[0].Pos(), Decls: decls})
	if err != nil {
		return err
	}
	_, err = m.yaegi.Execute(p)
	return err
}

// compile is CompileAST with its panics as errors.
func (m *machine) compile(n ast.Node) (p *interp.Program, err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("the interpreter cannot compile this: %v", r)
		}
	}()
	p, err = m.yaegi.CompileAST(n)
	if err == nil && p == nil {
		err = errors.New("the interpreter made nothing of this")
	}
	return p, err
}

// call returns what runs the function of that name, which has no parameters, and returns its panic. It compiles the call
// at once, so that only the run itself happens in another goroutine.
func (m *machine) call(name string) (func() error, error) {
	p, err := m.yaegi.Compile(name + "()")
	if err != nil {
		return nil, err
	}
	return func() error {
		_, err := m.yaegi.Execute(p)
		return err
	}, nil
}

// forget lets go of the trees of what was compiled, as far as no function needs them.
func (m *machine) forget() {
	for _, list := range m.keeps {
		list.SetZero()
	}
}

// has reports whether the symbol tables have the name of that package.
func (m *machine) has(path, name string) bool { return m.find(path, name).IsValid() }

// symbol returns the function of that name of a package, or nil.
func (m *machine) symbol(path, name string) any {
	if v := m.find(path, name); v.Kind() == reflect.Func {
		return v.Interface()
	}
	return nil
}

// find looks a name of a package up in the symbol tables.
func (m *machine) find(path, name string) reflect.Value {
	key := path + "/" + path[strings.LastIndexByte(path, '/')+1:]
	if path == "math/rand/v2" {
		key = path + "/rand"
	}
	for _, table := range m.tables {
		if v, ok := table[key][name]; ok {
			return v
		}
	}
	return reflect.Value{}
}
