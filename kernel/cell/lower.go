package cell

import (
	"fmt"
	"go/ast"
	"go/token"
	"go/types"
	"slices"
	"strconv"
	"strings"

	"golang.org/x/tools/go/ast/astutil"
)

// program is a lowered cell, in the order in which the interpreter must take it.
type program struct {
	imports, types, vars, funcs []ast.Decl
	entry                       string // the function of the statements; empty if there are none
	serial                      int    // of the run; see stillMine
	setup                       string // a function to call before it, or empty
	uses                        map[*decl]map[string]types.Object
	slots                       map[types.Object]string // the interpreter's names of the new objects
	shown                       []types.Type            // static types of the last expression's values; nil if it has none
	printed                     bool                    // the last expression is a print, whose count is not shown
	used                        map[string]bool         // aliases of packages that the interpreter has not imported before
	functions                   []*function
	instances                   map[types.Object][]*instance
	named                       map[string]types.Type // instances of generic types, by their names in the interpreter
	marks                       map[string]bool       // variables that hold the places of functions
}

// lowering rewrites the trees of one unit in place.
type lowering struct {
	in        *Interpreter
	u         *unit
	p         *program
	bad       []problem
	params    map[types.Object]bool                // type parameters of instances, as names of types
	funcBody  *ast.BlockStmt                       // body of the function that is being lowered
	nest      []ast.Node                           // loops and function literals around the node at hand
	hoisted   map[*ast.BlockStmt]bool              // blocks made of one statement, whose label belongs to their last one
	literals  int                                  // function literals so far
	temps     int                                  // variables made so far
	typed     map[*ast.CallExpr]map[int]types.Type // arguments whose static type goes with them
	nameArgs  map[*ast.CallExpr][]int              // of these the ones of which only the type's name is printed
	sets      [][2]string                          // variables of methods and the functions that they are to hold
	synthetic map[*ast.CallExpr]bool               // calls that the lowering made
}

// lower rewrites a checked cell into Go that the interpreter runs well.
func (in *Interpreter) lower(u *unit) (*program, error) {
	in.runs++
	l := &lowering{in: in, u: u, p: &program{serial: in.runs, slots: map[types.Object]string{}, uses: map[*decl]map[string]types.Object{}, marks: map[string]bool{}, used: map[string]bool{}, instances: map[types.Object][]*instance{}, named: map[string]types.Type{}}, synthetic: map[*ast.CallExpr]bool{}, hoisted: map[*ast.BlockStmt]bool{}, params: map[types.Object]bool{}, typed: map[*ast.CallExpr]map[int]types.Type{}, nameArgs: map[*ast.CallExpr][]int{}}
	pos := u.src.fn.Body.Lbrace
	l.name(pos)
	for _, d := range u.decls {
		l.p.uses[d] = l.uses(d.node)
	}
	for _, d := range u.decls {
		l.decl(d.node)
	}
	l.setup(pos)
	l.body(u.src.fn)
	for _, m := range sorted(l.p.marks) {
		if !l.in.marked[m] {
			l.p.vars = append(l.p.vars, varDecl(pos, m, &ast.Ident{Name: "int", NamePos: pos}))
		}
	}
	for _, alias := range sorted(l.p.used) {
		l.p.imports = append(l.p.imports, importDecl(pos, alias, l.in.aliasPath[alias]))
	}
	if len(l.bad) > 0 {
		return nil, in.problems(l.bad)
	}
	return l.p, nil
}

// name gives the new objects their names and declares the variables. A variable that is declared again with the same type
// keeps its place, so that running a cell again leaves no garbage.
func (l *lowering) name(pos token.Pos) {
	for _, name := range sorted(l.u.objects) {
		switch o := l.u.objects[name].(type) {
		case *types.TypeName:
			l.p.slots[o] = l.in.gens.fresh(name)
		case *types.Func:
			l.p.slots[o] = l.in.gens.fresh(strings.ReplaceAll(name, ".", "_"))
		}
	}
	for _, v := range l.u.order {
		if e := l.in.names[v.Name()]; e != nil {
			if old, ok := e.obj.(*types.Var); ok && types.Identical(old.Type(), v.Type()) {
				l.p.slots[v] = l.in.slots[old]
				continue
			}
		}
		slot := l.in.gens.fresh(v.Name())
		l.p.slots[v] = slot
		t := l.typeExpr(v.Type(), v.Pos())
		if t == nil {
			continue
		}
		l.p.vars = append(l.p.vars, varDecl(pos, slot, t))
	}
}

func varDecl(pos token.Pos, name string, t ast.Expr) ast.Decl {
	return &ast.GenDecl{Tok: token.VAR, TokPos: pos, Specs: []ast.Spec{&ast.ValueSpec{Names: []*ast.Ident{{Name: name, NamePos: pos}}, Type: t}}}
}

// slot returns the interpreter's name of a package-level object, or "".
func (l *lowering) slot(o types.Object) string {
	if o == nil {
		return ""
	}
	if v := l.u.vars[o]; v != nil {
		o = v
	}
	if s := l.p.slots[o]; s != "" {
		return s
	}
	return l.in.slots[o]
}

func (l *lowering) fail(pos token.Pos, format string, args ...any) {
	l.bad = append(l.bad, problem{pos, fmt.Sprintf(format, args...)})
}

// decl lowers one declaration. Constants are folded where they are used, so their declarations vanish.
func (l *lowering) decl(d ast.Decl) {
	switch d := d.(type) {
	case *ast.GenDecl:
		if d.Tok != token.TYPE {
			break
		}
		d.Specs = slices.DeleteFunc(d.Specs, func(s ast.Spec) bool { return l.isConstraint(s.(*ast.TypeSpec)) })
		if len(d.Specs) > 0 {
			l.rewrite(d, nil)
			l.p.types = append(l.p.types, d)
		}
	case *ast.FuncDecl:
		l.function(d)
	}
}

// function lowers a function or method.
func (l *lowering) function(d *ast.FuncDecl) {
	name := d.Name.Name
	from, to := d.Name.Pos(), d.End()
	recv, generic := receiver(d)
	if generic || d.Type.TypeParams != nil {
		return // compiled when it is used
	}
	if recv != "" {
		name = recv + "." + name
		if fn, ok := l.u.objects[name].(*types.Func); ok {
			d = l.method(d, fn)
		}
	}
	l.rewrite(d, d.Body)
	l.zeroResults(d.Type, d.Body)
	l.mark(name, kernel+"at_"+strings.ReplaceAll(name, ".", "_"), from, to, d.Body)
	l.p.funcs = append(l.p.funcs, d)
}

// uses returns the package-level objects of cells that a declaration mentions.
func (l *lowering) uses(d ast.Decl) map[string]types.Object {
	used := map[string]types.Object{}
	ast.Inspect(d, func(n ast.Node) bool {
		id, ok := n.(*ast.Ident)
		if !ok {
			return true
		}
		o := l.u.info.Uses[id]
		if o == nil || o.Pkg() == nil || o.Pkg().Path() != "main" {
			return true
		}
		key := o.Name()
		if fn, ok := o.(*types.Func); ok && fn.Signature().Recv() != nil {
			t := typeName(fn.Signature().Recv().Type())
			if t == nil {
				return true
			}
			key = t.Name() + "." + key
		}
		if e := l.in.names[key]; l.u.objects[key] == o || e != nil && e.obj == o {
			used[key] = o
		}
		return true
	})
	return used
}

// body lowers the cell's statements: what they declare is assigned, and the last expression is shown.
func (l *lowering) body(fn *ast.FuncDecl) {
	if len(fn.Body.List) == 0 {
		return
	}
	switch {
	case l.u.src.list != nil:
		l.showList(fn)
	case l.u.last != nil:
		l.show(fn)
	}
	var list []ast.Stmt
	for _, s := range fn.Body.List {
		list = append(list, l.statement(s)...)
	}
	fn.Body.List = list
	from, to := fn.Body.Pos(), fn.Body.End()
	l.rewrite(fn.Body, fn.Body)
	l.mark("", kernel+"at", from, to, fn.Body)
	l.guard(fn.Body)
	l.p.entry = kernel + "cell" // the same each time, so that the interpreter drops the last one
	fn.Name.Name = l.p.entry
	l.p.funcs = append(l.p.funcs, fn)
}

// statement turns a top-level declaration of variables into assignments.
func (l *lowering) statement(s ast.Stmt) []ast.Stmt {
	switch s := s.(type) {
	case *ast.LabeledStmt:
		if list := l.statement(s.Stmt); len(list) == 1 {
			s.Stmt = list[0]
		} else {
			s.Stmt = &ast.BlockStmt{Lbrace: s.Stmt.Pos(), List: list, Rbrace: s.Stmt.End()}
		}
	case *ast.AssignStmt:
		if s.Tok == token.DEFINE {
			s.Tok = token.ASSIGN
		}
	case *ast.DeclStmt:
		g, ok := s.Decl.(*ast.GenDecl)
		if !ok || g.Tok != token.VAR {
			break
		}
		var list []ast.Stmt
		for _, sp := range g.Specs {
			v := sp.(*ast.ValueSpec)
			as := &ast.AssignStmt{Tok: token.ASSIGN, TokPos: v.Pos(), Rhs: v.Values}
			for _, id := range v.Names {
				if len(v.Values) == 0 && id.Name == "_" {
					continue
				}
				as.Lhs = append(as.Lhs, id)
				if len(v.Values) == 0 {
					as.Rhs = append(as.Rhs, l.zero(l.u.info.Defs[id].Type(), id.Pos()))
				}
			}
			if len(as.Lhs) > 0 {
				list = append(list, as)
			}
		}
		return list
	}
	return []ast.Stmt{s}
}

// show wraps the last expression.
func (l *lowering) show(fn *ast.FuncDecl) {
	s := fn.Body.List[len(fn.Body.List)-1].(*ast.ExprStmt)
	switch t := l.u.info.Types[s.X].Type.(type) {
	case *types.Tuple:
		for v := range t.Variables() {
			l.p.shown = append(l.p.shown, v.Type())
		}
	default:
		l.p.shown = []types.Type{types.Default(t)}
	}
	l.p.printed = l.prints(s.X)
	s.X = l.hook("Show", s.X.Pos(), s.X)
}

// showList shows the values of a last line a, b.
func (l *lowering) showList(fn *ast.FuncDecl) {
	s := fn.Body.List[len(fn.Body.List)-1].(*ast.ExprStmt)
	for _, x := range l.u.src.list.Args {
		l.p.shown = append(l.p.shown, types.Default(l.u.info.TypeOf(x)))
	}
	s.X = l.hook("Show", s.X.Pos(), l.u.src.list.Args...)
}

// hook is a call of this package from a lowered cell.
func (l *lowering) hook(name string, pos token.Pos, args ...ast.Expr) *ast.CallExpr {
	call := &ast.CallExpr{
		Fun:    &ast.SelectorExpr{X: &ast.Ident{Name: kernel, NamePos: pos}, Sel: &ast.Ident{Name: name, NamePos: pos}},
		Lparen: pos, Args: args, Rparen: pos,
	}
	l.synthetic[call] = true
	return call
}

// mark marks the places in a function's body; see marking.
func (l *lowering) mark(name, variable string, from, to token.Pos, body *ast.BlockStmt) {
	(&marking{l: l}).function(name, variable, from, to, body)
}

// prints reports whether a call is one of a function or method of fmt, io, os, bufio or log that returns the count of bytes
// and an error.
func (l *lowering) prints(x ast.Expr) bool {
	call, ok := ast.Unparen(x).(*ast.CallExpr)
	if !ok {
		return false
	}
	t, ok := l.u.info.Types[call].Type.(*types.Tuple)
	if !ok || t.Len() != 2 || !types.Identical(t.At(0).Type(), types.Typ[types.Int]) || !isError(t.At(1).Type()) {
		return false
	}
	var id *ast.Ident
	switch f := ast.Unparen(call.Fun).(type) {
	case *ast.SelectorExpr:
		id = f.Sel
	case *ast.Ident:
		id = f
	default:
		return false
	}
	o := l.u.info.Uses[id]
	if o == nil || o.Pkg() == nil {
		return false
	}
	switch o.Pkg().Path() {
	case "fmt", "io", "os", "bufio", "log":
		return true
	}
	return false
}

func isError(t types.Type) bool { return types.Identical(t, types.Universe.Lookup("error").Type()) }

// rewrite lowers a tree in place. Body is that of the function that it is, or nil.
func (l *lowering) rewrite(n ast.Node, body *ast.BlockStmt) {
	outer := l.funcBody
	l.funcBody = body
	astutil.Apply(n, l.before, l.after)
	l.funcBody = outer
}

// before folds constants and renames packages, from the outside in.
func (l *lowering) before(c *astutil.Cursor) bool {
	switch n := c.Node().(type) {
	case *ast.ForStmt, *ast.RangeStmt, *ast.FuncLit:
		l.nest = append(l.nest, n)
	case *ast.CallExpr:
		l.findTyped(n)
	}
	x, ok := c.Node().(ast.Expr)
	if !ok {
		return true
	}
	if tv, ok := l.u.info.Types[x]; ok && tv.Value != nil {
		if lit := l.constant(tv.Type, tv.Value, x); lit != nil {
			if lit != x {
				l.replace(c, lit)
			}
			return false
		}
	}
	if tv, ok := l.u.info.Types[x]; ok && tv.IsType() {
		if _, ok := ofCells(tv.Type); ok {
			l.replace(c, l.typeExpr(tv.Type, x.Pos()))
			return false
		}
	}
	switch x := x.(type) {
	case *ast.Ident:
		if o := l.u.info.Uses[x]; l.params[o] {
			if t := l.typeExpr(o.Type(), x.Pos()); t != nil {
				l.replace(c, t)
			}
			return false
		}
		if f := l.instantiate(x); f != nil {
			l.replace(c, f)
			return false
		}
	case *ast.IndexExpr:
		if f := l.instantiate(x.X); f != nil {
			l.replace(c, f)
			return false
		}
	case *ast.IndexListExpr:
		if f := l.instantiate(x.X); f != nil {
			l.replace(c, f)
			return false
		}
	}
	if s, ok := x.(*ast.SelectorExpr); ok {
		if id, ok := s.X.(*ast.Ident); ok {
			if p, ok := l.u.info.Uses[id].(*types.PkgName); ok {
				l.selector(s, id, p.Imported())
				return false
			}
		}
	}
	return true
}

// replace replaces an expression by one that takes over its type, since what lies around it is lowered later.
func (l *lowering) replace(c *astutil.Cursor, x ast.Expr) {
	if old, ok := c.Node().(ast.Expr); ok {
		if tv, ok := l.u.info.Types[old]; ok {
			l.u.info.Types[x] = tv
		}
	}
	c.Replace(x)
}

// inLoop reports whether the node at hand lies in a loop of its own function.
func (l *lowering) inLoop() bool {
	if len(l.nest) == 0 {
		return false
	}
	_, lit := l.nest[len(l.nest)-1].(*ast.FuncLit)
	return !lit
}

// selector lowers a name of a package.
func (l *lowering) selector(s *ast.SelectorExpr, id *ast.Ident, p *types.Package) {
	if !l.in.vm.has(p.Path(), s.Sel.Name) {
		why := "the interpreter's tables end before it"
		if o := p.Scope().Lookup(s.Sel.Name); o != nil && isGeneric(o) {
			why = "cells can use generic code of their own, not yet that of packages"
		}
		l.fail(s.Pos(), "%s.%s is not available: %s", p.Name(), s.Sel.Name, why)
		return
	}
	id.Name = l.alias(p)
}

// alias returns the name under which the interpreter has imported a package: one for each, whatever cells call it.
func (l *lowering) alias(p *types.Package) string {
	a, ok := l.in.aliases[p.Path()]
	if !ok {
		a = l.in.gens.fresh("p")
		l.in.aliases[p.Path()], l.in.aliasPath[a] = a, p.Path()
	}
	if !l.in.imported[a] {
		l.p.used[a] = true
	}
	return a
}

func importDecl(pos token.Pos, name, path string) ast.Decl {
	return &ast.GenDecl{Tok: token.IMPORT, TokPos: pos, Specs: []ast.Spec{&ast.ImportSpec{
		Name: &ast.Ident{Name: name, NamePos: pos}, Path: &ast.BasicLit{Kind: token.STRING, ValuePos: pos, Value: fmt.Sprintf("%q", path)},
	}}}
}

// after renames, from the inside out, and replaces what the interpreter does otherwise than Go.
func (l *lowering) after(c *astutil.Cursor) bool {
	switch c.Node().(type) {
	case *ast.ForStmt, *ast.RangeStmt, *ast.FuncLit:
		l.nest = l.nest[:len(l.nest)-1]
	}
	switch n := c.Node().(type) {
	case *ast.Ident:
		l.rename(n)
	case *ast.SelectorExpr:
		l.methodExpr(c, n)
	case *ast.CallExpr:
		l.wrapTyped(n)
		if x := l.builtin(n); x != nil {
			l.replace(c, x)
			break
		}
		l.methodCall(n)
	case *ast.FuncLit:
		l.zeroResults(n.Type, n.Body)
		l.capture(c, n)
	case *ast.IfStmt:
		l.head(c, n, n.Init)
	case *ast.SwitchStmt:
		l.head(c, n, n.Init)
	case *ast.GoStmt:
		c.Replace(l.goStmt(n))
	case *ast.DeferStmt:
		l.deferStmt(c, n)
	case *ast.ForStmt:
		l.forStmt(n, labelOf(c))
		l.head(c, n, n.Init)
	case *ast.RangeStmt:
		if s := l.rangeStmt(n); s != nil {
			c.Replace(s)
		}
	case *ast.TypeSwitchStmt:
		c.Replace(l.typeSwitch(n))
	case *ast.TypeAssertExpr:
		l.assert(c, n)
	case *ast.BinaryExpr:
		l.equality(c, n)
	case *ast.UnaryExpr:
		l.receive(c, n)
	case *ast.CommClause:
		l.commClause(n)
	case *ast.AssignStmt:
		l.parallel(c, n)
	case *ast.LabeledStmt:
		l.label(c, n)
	}
	return true
}

// builtin replaces calls of predeclared functions that the interpreter lacks or does otherwise.
func (l *lowering) builtin(n *ast.CallExpr) ast.Expr {
	id, ok := ast.Unparen(n.Fun).(*ast.Ident)
	if !ok {
		return nil
	}
	b, ok := l.u.info.Uses[id].(*types.Builtin)
	if !ok {
		return nil
	}
	switch b.Name() {
	case "recover":
		l.synthetic[n] = true
		return l.hook("Recover", n.Pos(), n)
	case "new":
		if tv := l.u.info.Types[n.Args[0]]; tv.IsValue() {
			return l.newValue(n)
		}
	case "clear":
		return l.hook("Clear", n.Pos(), n.Args...)
	case "min", "max":
		return l.minMax(b.Name(), n)
	}
	return nil
}

// minMax turns min and max of variables into a call for the kind of their type.
func (l *lowering) minMax(name string, n *ast.CallExpr) ast.Expr {
	t := l.u.info.TypeOf(n)
	basic, ok := t.Underlying().(*types.Basic)
	if !ok {
		return nil
	}
	hook := map[string]string{"min": "Min", "max": "Max"}[name]
	var wide types.Type
	switch info := basic.Info(); {
	case info&types.IsString != 0:
		hook, wide = hook+"String", types.Typ[types.String]
	case info&types.IsFloat != 0:
		hook, wide = hook+"Float", types.Typ[types.Float64]
	case info&types.IsUnsigned != 0:
		hook, wide = hook+"Uint", types.Typ[types.Uint64]
	default:
		hook, wide = hook+"Int", types.Typ[types.Int64]
	}
	pos := n.Pos()
	convert := func(to types.Type, x ast.Expr) ast.Expr {
		return &ast.CallExpr{Fun: l.typeExpr(to, pos), Lparen: pos, Args: []ast.Expr{x}, Rparen: pos}
	}
	args := make([]ast.Expr, len(n.Args))
	for i, a := range n.Args {
		args[i] = convert(wide, a)
	}
	return convert(t, l.hook(hook, pos, args...))
}

func (l *lowering) rename(id *ast.Ident) {
	o := l.u.info.Uses[id]
	if o == nil {
		o = l.u.info.Defs[id]
	}
	if o == nil {
		return
	}
	if s := l.slot(o); s != "" {
		if fn, ok := o.(*types.Func); !ok || fn.Signature().Recv() == nil {
			id.Name = s
		}
		return
	}
	v, ok := o.(*types.Var)
	if !ok {
		return
	}
	switch {
	case v.IsField() && v.Embedded():
		// The field of an embedded type has the type's name, also the new one.
		if s := l.typeSlot(v.Type()); s != "" {
			id.Name = s
		}
	case !v.IsField() && types.Universe.Lookup(id.Name) != nil:
		id.Name += mark + "0" // a local variable called len or string
	}
}

// typeName returns the object of a named type or of a pointer to one, or nil.
func typeName(t types.Type) types.Object {
	if p, ok := t.(*types.Pointer); ok {
		t = p.Elem()
	}
	if n, ok := t.(*types.Named); ok {
		return n.Obj()
	}
	return nil
}

// guard lets the cell's function end where it wakes up after an interrupt that could not reach it: before each of its
// statements and in each turn of its loops it asks whether its run is still the current one.
func (l *lowering) guard(body *ast.BlockStmt) {
	var list []ast.Stmt
	for i, s := range body.List {
		if i > 0 {
			list = append(list, l.stillMine(s.Pos()))
		}
		list = append(list, s)
	}
	body.List = list
	ast.Inspect(body, func(n ast.Node) bool {
		var loop *ast.BlockStmt
		switch n := n.(type) {
		case *ast.FuncLit:
			return false
		case *ast.ForStmt:
			loop = n.Body
		case *ast.RangeStmt:
			loop = n.Body
		default:
			return true
		}
		if calls(loop) {
			loop.List = append([]ast.Stmt{l.stillMine(loop.Lbrace)}, loop.List...)
		}
		return true
	})
}

// calls reports whether a loop calls anything: one that does not cannot wait in compiled code.
func calls(body *ast.BlockStmt) bool {
	found := false
	ast.Inspect(body, func(n ast.Node) bool {
		_, call := n.(*ast.CallExpr)
		found = found || call
		return !found
	})
	return found
}

func (l *lowering) stillMine(pos token.Pos) ast.Stmt {
	return &ast.IfStmt{
		If: pos,
		Cond: &ast.BinaryExpr{
			X: &ast.Ident{Name: kernel + "run", NamePos: pos}, OpPos: pos, Op: token.NEQ,
			Y: &ast.BasicLit{Kind: token.INT, ValuePos: pos, Value: strconv.Itoa(l.p.serial)},
		},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{&ast.ExprStmt{X: l.hook("Leave", pos)}}, Rbrace: pos},
	}
}

func isGeneric(o types.Object) bool {
	switch t := o.Type().(type) {
	case *types.Signature:
		return t.TypeParams().Len() > 0
	case *types.Named:
		return t.TypeParams().Len() > 0
	}
	return false
}
