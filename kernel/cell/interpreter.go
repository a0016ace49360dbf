package cell

import (
	"cmp"
	"context"
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"go/types"
	"maps"
	"reflect"
	"strings"
	"sync"
	"sync/atomic"

	"github.com/traefik/yaegi/interp"
	"golang.org/x/tools/go/types/typeutil"

	"linewright/plotting"
)

// Output takes what a running cell puts out. Its methods may be called from any goroutine. An Output that also has the
// method Exit(code int) is asked to end the process when a cell calls os.Exit or log.Fatal, after it has passed on
// what it holds; without it the process ends at once.
type Output interface {
	Stream(name string, p []byte) // "stdout" or "stderr"; may be called with a few bytes at a time
	Display(b plotting.Bundle, id string, update bool)
	Clear(wait bool)
	Ask(prompt string, secret bool) (string, error) // page.ErrNoReader where nobody can be asked; ctx error on interrupt
}

// Error is a failed cell, ready for the protocol's error message. Trace lines are plain text.
type Error struct {
	Name  string // "compile error", "panic", "interrupted", "error"
	Value string
	Trace []string
}

func (e *Error) Error() string { return e.Name + ": " + e.Value }

// Options set up an [Interpreter]. The zero value works.
type Options struct {
	Parameters map[string]string // values of page parameters set for the run
}

// Interpreter is one session: what its cells have declared, and the interpreter that runs them. Its methods may be called
// from any goroutine; cells run one at a time.
type Interpreter struct {
	opt     Options
	vm      *machine
	fset    *token.FileSet
	running sync.Mutex // held while a cell runs

	// types guards what the checker reads and writes, all below and every go/types object that they hold. It is held for
	// the milliseconds of a check, never while a cell runs, so that completion answers meanwhile.
	types     sync.Mutex
	lib       *library
	names     map[string]*entry             // live package-level declarations
	imports   map[string]string             // names of the cells' own imports -> path
	preloaded map[string]string             // names of packages that need no import -> path
	slots     map[types.Object]string       // the interpreter's names of live objects and of all types
	phantoms  map[*types.Func]bool          // methods of cells that then did not compile
	methods   map[types.Object]string       // method -> the interpreter's variable that holds its function
	texts     map[*types.Func]reflect.Value // String and Error methods -> a pointer to the variable in methods
	named     map[string]types.Type         // the interpreter's name of a type -> the type
	pkg       *types.Package                // of the cells' variables; see check
	instances map[types.Object][]*instance  // of generic functions and types
	generics  map[string]*genericPackage    // path -> source of a standard package's generic code
	typeTable []types.Type                  // what the calls of typed in lowered code refer to
	typeIDs   typeutil.Map
	pairs     map[pairKey]any // see pairOf
	gens      generations
	runs      int               // serial number of the last cell
	aliases   map[string]string // package path -> name under which the interpreter imports it
	aliasPath map[string]string // the reverse
	imported  map[string]bool   // aliases that the interpreter has imported

	current atomic.Pointer[run] // the running cell, or the last one
	settled chan struct{}       // closed when an interrupted cell has come to rest; owned by the holder of running

	marked     map[string]bool // marks that the interpreter has
	tracks     tracks
	traces     traces
	goroutines goroutines
	watching   atomic.Bool
	serial     *int     // the interpreter's variable with the serial number of the running cell
	notes      []string // what the next cell says on its stderr; owned by the holder of running once settled
	page       pageState
}

// entry is one live package-level declaration.
type entry struct {
	obj  types.Object
	cell int
	decl *decl                   // nil for variables
	uses map[string]types.Object // what the declaration mentions: package-level names, methods as "T.M"
}

// New starts a session.
func New(opt Options) (*Interpreter, error) {
	lib, err := newLibrary()
	if err != nil {
		return nil, err
	}
	in := &Interpreter{
		opt: opt, lib: lib,
		pkg:   types.NewPackage("main", "main"),
		names: map[string]*entry{}, imports: map[string]string{}, preloaded: map[string]string{"fmt": "fmt", "math": "math"},
		slots: map[types.Object]string{}, phantoms: map[*types.Func]bool{}, methods: map[types.Object]string{}, texts: map[*types.Func]reflect.Value{}, named: map[string]types.Type{}, instances: map[types.Object][]*instance{}, generics: map[string]*genericPackage{}, gens: generations{},
		aliases: map[string]string{}, aliasPath: map[string]string{}, imported: map[string]bool{},
		marked:     map[string]bool{},
		tracks:     tracks{cells: map[int][]*function{}, marks: map[string]*int{}},
		traces:     traces{of: map[uint64][]int{}},
		goroutines: goroutines{of: map[uint64]*run{}},
	}
	for name, path := range lib.own {
		in.preloaded[name] = path
	}
	in.vm, err = newMachine(stream{in, "stdout"}, traceWriter{in}, in.hooks(), in.replacements(), compiledSymbols)
	if err != nil {
		return nil, err
	}
	in.fset = in.vm.yaegi.FileSet()
	if _, err := in.vm.yaegi.Eval(`import ` + kernel + ` "linewright/cell"`); err != nil {
		return nil, err
	}
	if _, err := in.vm.yaegi.Eval("var " + kernel + "run int; func " + asError + "(err error) error { return err }; func " + asAny + "(v any) any { return v }"); err != nil {
		return nil, err
	}
	v, err := in.vm.yaegi.Eval("&" + kernel + "run")
	if err != nil {
		return nil, err
	}
	in.serial = v.Interface().(*int)
	in.settled = make(chan struct{})
	close(in.settled)
	return in, nil
}

// hooks are the functions of this package that lowered cells call.
func (in *Interpreter) hooks() interp.Exports {
	return interp.Exports{
		"linewright/cell/cell": {
			"Show":        reflect.ValueOf(in.show),
			"Recover":     reflect.ValueOf(in.recovered),
			"Go":          reflect.ValueOf(in.start),
			"Leave":       reflect.ValueOf(in.leave),
			"Deferred":    reflect.ValueOf(func() *deferred { return new(deferred) }),
			"Defer":       reflect.ValueOf(func(d *deferred, f func()) { d.calls = append(d.calls, f) }),
			"RunDeferred": reflect.ValueOf(runDeferred),
			"LoopEnded":   reflect.ValueOf(loopEnded),
			"Typed":       reflect.ValueOf(in.typed),
			"TypeName":    reflect.ValueOf(in.typeName),

			"Holds":     reflect.ValueOf(in.holds),
			"Pair":      reflect.ValueOf(in.pairOf),
			"Bare":      reflect.ValueOf(bare),
			"Refuse":    reflect.ValueOf(refuse),
			"NotA":      reflect.ValueOf(notA),
			"Equal":     reflect.ValueOf(in.equal),
			"Runes":     reflect.ValueOf(func(s string) []rune { return []rune(s) }),
			"Starts":    reflect.ValueOf(starts),
			"Complex":   reflect.ValueOf(func(re, im float64) complex128 { return complex(re, im) }),
			"Clear":     reflect.ValueOf(func(v any) { reflect.ValueOf(v).Clear() }),
			"MinInt":    reflect.ValueOf(least[int64]),
			"MaxInt":    reflect.ValueOf(most[int64]),
			"MinUint":   reflect.ValueOf(least[uint64]),
			"MaxUint":   reflect.ValueOf(most[uint64]),
			"MinFloat":  reflect.ValueOf(least[float64]),
			"MaxFloat":  reflect.ValueOf(most[float64]),
			"MinString": reflect.ValueOf(least[string]),
			"MaxString": reflect.ValueOf(most[string]),
		},
	}
}

// least and most are min and max with any number of arguments.
func least[T cmp.Ordered](first T, rest ...T) T {
	for _, x := range rest {
		first = min(first, x)
	}
	return first
}

func most[T cmp.Ordered](first T, rest ...T) T {
	for _, x := range rest {
		first = max(first, x)
	}
	return first
}

// Run executes one cell; n is its number for positions ("cell[3]:2:5"). The bundle is nil if the last statement has no
// value. An error is an *[Error].
func (in *Interpreter) Run(ctx context.Context, n int, code, cellID string, out Output) (*plotting.Bundle, error) {
	in.running.Lock()
	defer in.running.Unlock()
	<-in.settled
	r := in.begin(ctx, n, code, cellID, out)
	defer r.end()
	p, err := in.prepare(r, code)
	if err != nil {
		return nil, r.compileError(err)
	}
	return in.execute(r, p)
}

// Evaluate evaluates one expression (user_expressions). It declares nothing.
func (in *Interpreter) Evaluate(ctx context.Context, expr string, out Output) (plotting.Bundle, error) {
	if _, err := parser.ParseExpr(expr); err != nil {
		return plotting.Bundle{}, &Error{Name: "compile error", Value: "no expression: " + expr, Trace: []string{"no expression: " + expr}}
	}
	n := 0
	if r := in.current.Load(); r != nil {
		n = r.n
	}
	b, err := in.Run(ctx, n, expr, "", out)
	if err != nil {
		return plotting.Bundle{}, err
	}
	if b == nil {
		return plotting.Bundle{}, &Error{Name: "error", Value: "the expression has no value: " + expr, Trace: []string{"the expression has no value: " + expr}}
	}
	return *b, nil
}

// Asked returns the names of the parameters that cells have asked for so far, sorted.
func (in *Interpreter) Asked() []string {
	in.page.mu.Lock()
	defer in.page.mu.Unlock()
	return sorted(in.page.asked)
}

// prepare checks, lowers and compiles a cell and, if all that succeeds, commits what it declares.
func (in *Interpreter) prepare(r *run, code string) (p *program, err error) {
	in.types.Lock()
	defer in.types.Unlock()
	defer func() {
		if v := recover(); v != nil {
			p, err = nil, fmt.Errorf("this kernel cannot compile the cell, which is a fault of the kernel: %v", v)
		}
	}()
	src, err := parse(in.fset, r.n, code)
	if err != nil {
		return nil, err
	}
	u, err := in.analyse(src)
	if err != nil {
		return nil, err
	}
	p, err = in.lower(u)
	if err != nil {
		return nil, err
	}
	if err := in.vm.declare(p.imports); err != nil {
		return nil, err
	}
	for alias := range p.used {
		in.imported[alias] = true
	}
	for _, group := range [][]ast.Decl{p.types, p.vars} {
		if err := in.vm.declare(group); err != nil {
			return nil, err
		}
	}
	// From here on the interpreter may have methods that call these variables, also if a function does not compile.
	maps.Copy(in.methods, p.methods)
	if err := in.vm.declare(p.funcs); err != nil {
		return nil, err
	}
	if err := in.mark(p); err != nil {
		return nil, err
	}
	if p.setup != "" {
		call, err := in.vm.call(p.setup)
		if err != nil {
			return nil, err
		}
		if err := call(); err != nil {
			return nil, err
		}
	}
	if err := in.findTexts(p); err != nil {
		return nil, err
	}
	in.tracks.add(u.src.n, p.functions)
	in.commit(u, p)
	return p, nil
}

// findTexts finds the variables of new String and Error methods.
func (in *Interpreter) findTexts(p *program) error {
	for o := range p.slots {
		fn, ok := o.(*types.Func)
		if !ok || in.methods[fn] == "" || fn.Name() != "String" && fn.Name() != "Error" || in.texts[fn].IsValid() {
			continue
		}
		v, err := in.vm.yaegi.Eval("&" + in.methods[fn])
		if err != nil {
			return err
		}
		in.texts[fn] = v
	}
	return nil
}

// mark finds the new marks in the interpreter's memory.
func (in *Interpreter) mark(p *program) error {
	for name := range p.marks {
		if in.marked[name] {
			continue
		}
		v, err := in.vm.yaegi.Eval("&" + name)
		if err != nil {
			return err
		}
		at, ok := v.Interface().(*int)
		if !ok {
			return fmt.Errorf("cell: the mark %s is a %v", name, v.Type())
		}
		in.marked[name] = true
		in.tracks.mu.Lock()
		in.tracks.marks[name] = at
		in.tracks.mu.Unlock()
	}
	return nil
}

// commit makes a compiled cell's declarations those of the session.
func (in *Interpreter) commit(u *unit, p *program) {
	for name, path := range u.imports {
		delete(in.names, name)
		in.imports[name] = path
	}
	for name, o := range u.objects {
		if e := in.names[name]; e != nil && e.obj != o {
			if _, isType := e.obj.(*types.TypeName); isType {
				// Values of the old type may live on, so its name stays known; its methods are not those of the new type.
				for key := range in.names {
					if strings.HasPrefix(key, name+".") && u.objects[key] == nil {
						delete(in.names, key)
					}
				}
			} else if !strings.Contains(name, ".") {
				delete(in.slots, e.obj)
			}
		}
		switch o := o.(type) {
		case *types.Func:
			delete(in.phantoms, o)
		case *types.TypeName:
			in.named[p.slots[o]] = o.Type()
		}
		delete(in.imports, name)
		e := &entry{obj: o, cell: u.src.n, decl: u.texts[name], uses: p.uses[u.texts[name]]}
		if e.decl != nil {
			e.cell = e.decl.cell
		}
		in.names[name] = e
	}
	maps.Copy(in.slots, p.slots)
	for o, list := range p.instances {
		in.instances[o] = append(in.instances[o], list...)
	}
	maps.Copy(in.named, p.named)
}
