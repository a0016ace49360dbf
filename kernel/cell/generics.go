package cell

import (
	"fmt"
	"go/ast"
	"go/token"
	"go/types"
	"slices"
	"strings"
)

// Generic code never reaches the interpreter, which infers types badly: the checker knows the type arguments of every use,
// so each instance is compiled from the declaration's source with its type parameters as names of those types.

// instance is one compiled instance of a generic function or type.
type instance struct {
	args    []types.Type
	slot    string
	typ     *types.Named           // of a type: itself
	methods map[string]*types.Func // of a type: the methods that have slots
}

func (in *instance) is(args []types.Type) bool {
	return slices.EqualFunc(in.args, args, types.Identical)
}

func list(l *types.TypeList) []types.Type {
	return slices.Collect(l.Types())
}

// instance finds an instance that exists or that this cell has made.
func (l *lowering) instance(origin types.Object, args []types.Type) *instance {
	for _, table := range []map[types.Object][]*instance{l.p.instances, l.in.instances} {
		for _, i := range table[origin] {
			if i.is(args) {
				return i
			}
		}
	}
	return nil
}

// funcInstance returns the name of an instance of a generic function of the cells; it makes one if there is none.
func (l *lowering) funcInstance(fn *types.Func, args []types.Type, pos token.Pos) string {
	if i := l.instance(fn, args); i != nil {
		return i.slot
	}
	i := &instance{args: args, slot: l.in.gens.fresh(fn.Name())}
	l.p.instances[fn] = append(l.p.instances[fn], i)
	d := l.source(fn, fn.Name(), pos)
	if d == nil {
		return i.slot
	}
	f := d.node.(*ast.FuncDecl)
	var names []string
	for _, field := range f.Type.TypeParams.List {
		for _, id := range field.Names {
			names = append(names, id.Name)
		}
	}
	t := *f.Type
	t.TypeParams = nil
	l.concrete(&ast.FuncDecl{Name: &ast.Ident{Name: i.slot, NamePos: f.Name.Pos()}, Type: &t, Body: f.Body}, names, args, fn.Name(), f, l.in.generic(fn.Pkg()))
	return i.slot
}

// source parses the declaration of a generic object anew.
func (l *lowering) source(o types.Object, key string, pos token.Pos) *decl {
	if g := l.in.generic(o.Pkg()); g != nil {
		again := *g.decls[key]
		if err := again.parse(l.in.fset); err != nil {
			l.fail(pos, "%v", err)
			return nil
		}
		return &again
	}
	d := l.u.texts[key]
	if l.u.objects[key] != o {
		d = nil
		if e := l.in.names[key]; e != nil && e.obj == o {
			d = e.decl
		}
	}
	if d == nil {
		l.fail(pos, "%s was declared again since; run the cell that uses the old one again", key)
		return nil
	}
	again := *d
	if err := again.parse(l.in.fset); err != nil {
		l.fail(pos, "%v", err)
		return nil
	}
	return &again
}

// concrete checks a function, whose type parameters are names of the given types, and lowers it. Home is the package that it
// belongs to, nil for the cells.
func (l *lowering) concrete(f *ast.FuncDecl, names []string, args []types.Type, name string, whole *ast.FuncDecl, home *genericPackage) {
	without := map[string]bool{}
	if home == nil {
		for n := range l.u.objects {
			without[n] = true
		}
	}
	for _, n := range names {
		without[n] = true
	}
	var p *types.Package
	if home == nil {
		p = l.in.scope(without, l.u.imports)
	} else {
		p = home.scope(without)
	}
	for i, n := range names {
		if n != "_" {
			o := types.NewTypeName(f.Pos(), p, n, args[i])
			l.params[o] = true
			p.Scope().Insert(o)
		}
	}
	for _, n := range sorted(l.u.objects) {
		if home == nil && !slices.Contains(names, n) && p.Scope().Lookup(n) == nil && !strings.Contains(n, ".") {
			p.Scope().Insert(l.u.objects[n])
		}
	}
	l.u.concrete = true
	imports := l.u.imports
	if home != nil {
		l.u.imports = home.imports
	}
	err := l.in.pass(l.u, p, []ast.Decl{f}, nil)
	l.u.concrete, l.u.imports = false, imports
	if err != nil {
		l.fail(f.Pos(), "in the instance of %s for %s: %v", name, typeList(args), err)
		return
	}
	nest, results := l.nest, l.results
	l.nest, l.results = nil, l.fieldTypes(f.Type.Results)
	defer func() { l.nest, l.results = nest, results }()
	from, to := whole.Name.Pos(), whole.End()
	slot := f.Name.Name
	l.rewrite(f, f.Body)
	l.zeroResults(f.Type, f.Body)
	f.Name.Name = slot
	if home == nil {
		l.mark(name, kernel+"at_"+slot, from, to, f.Body)
	}
	l.p.funcs = append(l.p.funcs, f)
}

func typeList(args []types.Type) string {
	s := ""
	for i, a := range args {
		if i > 0 {
			s += ", "
		}
		s += types.TypeString(a, brief)
	}
	return s
}

// typeInstance returns the instance of a generic type of the cells; it makes one, with its methods, if there is none.
func (l *lowering) typeInstance(t *types.Named, pos token.Pos) *instance {
	origin := t.Origin().Obj()
	args := list(t.TypeArgs())
	if i := l.instance(origin, args); i != nil {
		return i
	}
	i := &instance{args: args, slot: l.in.gens.fresh(origin.Name()), typ: t, methods: map[string]*types.Func{}}
	l.p.instances[origin] = append(l.p.instances[origin], i)
	l.p.named[i.slot] = t
	l.refuseEndless(pos, t)
	if len(l.bad) > 0 {
		return i
	}
	under := l.typeExpr(t.Underlying(), pos)
	if under == nil {
		return i
	}
	l.p.types = append(l.p.types, &ast.GenDecl{Tok: token.TYPE, TokPos: pos, Specs: []ast.Spec{
		&ast.TypeSpec{Name: &ast.Ident{Name: i.slot, NamePos: pos}, Type: under},
	}})
	for k := range t.NumMethods() {
		m := t.Method(k)
		i.methods[m.Name()] = m
		l.p.slots[m] = l.in.gens.fresh(origin.Name() + "_" + m.Name())
	}
	for k := range t.NumMethods() {
		m := t.Method(k)
		key := origin.Name() + "." + m.Name()
		d := l.source(m.Origin(), key, pos)
		if d == nil {
			continue
		}
		f := d.node.(*ast.FuncDecl)
		l.concrete(l.method(f, m), receiverParams(f), args, key, f, nil)
	}
	return i
}

// receiverParams returns the names that a method gives to the type parameters of its receiver.
func receiverParams(f *ast.FuncDecl) []string {
	t := ast.Unparen(f.Recv.List[0].Type)
	if s, ok := t.(*ast.StarExpr); ok {
		t = ast.Unparen(s.X)
	}
	var params []ast.Expr
	switch x := t.(type) {
	case *ast.IndexExpr:
		params = []ast.Expr{x.Index}
	case *ast.IndexListExpr:
		params = x.Indices
	}
	var names []string
	for _, p := range params {
		id, ok := p.(*ast.Ident)
		if !ok {
			continue // the checker has refused it
		}
		if id.Name == "_" {
			id.Name = fmt.Sprintf("%su%d", kernel, len(names)) // as a name of a type it must be one
		}
		names = append(names, id.Name)
	}
	return names
}

// ofCells reports whether a named type is an instance of a generic type of the cells.
func ofCells(t types.Type) (*types.Named, bool) {
	n, ok := types.Unalias(t).(*types.Named)
	return n, ok && n.TypeArgs().Len() > 0 && n.Obj().Pkg() != nil && n.Obj().Pkg().Path() == "main"
}

// typeSlot returns the interpreter's name of a type of the cells, or of what a pointer points to; "" for others.
func (l *lowering) typeSlot(t types.Type) string {
	if p, ok := types.Unalias(t).(*types.Pointer); ok {
		t = p.Elem()
	}
	if n, ok := ofCells(t); ok {
		return l.typeInstance(n, n.Obj().Pos()).slot
	}
	return l.slot(typeName(t))
}

// methodSlot returns the function of a method; "" for methods of compiled types and of interfaces.
func (l *lowering) methodSlot(fn *types.Func) string {
	if fn.Origin() != fn {
		recv := fn.Signature().Recv().Type()
		if p, ok := recv.(*types.Pointer); ok {
			recv = p.Elem()
		}
		if n, ok := ofCells(recv); ok {
			if m := l.typeInstance(n, fn.Pos()).methods[fn.Name()]; m != nil {
				fn = m
			}
		}
	}
	return l.slot(fn)
}

// instantiate replaces a use of a generic function by its instance.
func (l *lowering) instantiate(x ast.Expr) ast.Expr {
	x = ast.Unparen(x)
	id, ok := x.(*ast.Ident)
	if s, is := x.(*ast.SelectorExpr); is {
		id, ok = s.Sel, true
	}
	if !ok {
		return nil
	}
	inst, ok := l.u.info.Instances[id]
	if !ok {
		return nil
	}
	fn := l.in.genericFunc(l.u.info.Uses[id])
	if fn == nil {
		return nil
	}
	return &ast.Ident{Name: l.funcInstance(fn, list(inst.TypeArgs), id.Pos()), NamePos: id.Pos()}
}

// isConstraint reports whether a type declaration is one of a generic type or of an interface that only constrains.
func (l *lowering) isConstraint(s *ast.TypeSpec) bool {
	if s.TypeParams != nil {
		return true
	}
	o := l.u.info.Defs[s.Name]
	if o == nil {
		return false
	}
	i, ok := o.Type().Underlying().(*types.Interface)
	return ok && !i.IsMethodSet()
}
