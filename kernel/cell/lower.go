package cell

import (
	"fmt"
	"go/ast"
	"go/token"
	"go/types"
	"slices"
	"strings"
)

// program is a lowered cell, in the order in which the interpreter must take it.
type program struct {
	imports, types, vars, funcs []ast.Decl
	entry                       string       // the function of the statements; empty if there are none
	setup                       string       // a function to call before it, or empty
	serial                      int          // of the run; see stillMine
	shown                       []types.Type // static types of the last expression's values; nil if it has none
	printed                     bool         // the last expression is a print, whose count is not shown

	// What the session takes over when all has been compiled.
	slots     map[types.Object]string           // the interpreter's names of the new objects
	uses      map[*decl]map[string]types.Object // what each declaration mentions
	used      map[string]bool                   // aliases of packages that the interpreter has not imported before
	methods   map[types.Object]string           // new variables of methods
	instances map[types.Object][]*instance      // new instances of generic functions and types
	named     map[string]types.Type             // instances of generic types, by their names in the interpreter
	functions []*function                       // where the functions lie; see marks.go
	marks     map[string]bool                   // variables that hold the places of functions
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
	ranged    map[*ast.BlockStmt]bool              // blocks that were loops over functions
	results   []types.Type                         // of the function that is being lowered
	framed    map[*ast.FuncLit]bool                // literals that recover would not work in; see recoverCall
	called    map[ast.Expr]bool                    // functions of calls
	comms     map[ast.Stmt]bool                    // sends and receives of select statements
	returns   map[*ast.ReturnStmt][]types.Type     // what returns give their values to
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
	l := &lowering{
		in: in, u: u,
		p: &program{
			serial: in.runs, slots: map[types.Object]string{}, uses: map[*decl]map[string]types.Object{}, methods: map[types.Object]string{}, marks: map[string]bool{},
			used: map[string]bool{}, instances: map[types.Object][]*instance{}, named: map[string]types.Type{},
		},
		params: map[types.Object]bool{}, framed: map[*ast.FuncLit]bool{}, hoisted: map[*ast.BlockStmt]bool{}, ranged: map[*ast.BlockStmt]bool{}, called: map[ast.Expr]bool{}, comms: map[ast.Stmt]bool{}, returns: map[*ast.ReturnStmt][]types.Type{}, synthetic: map[*ast.CallExpr]bool{},
		typed: map[*ast.CallExpr]map[int]types.Type{}, nameArgs: map[*ast.CallExpr][]int{},
	}
	pos := u.src.fn.Body.Lbrace
	l.name(pos)
	for _, d := range u.decls {
		l.p.uses[d] = l.uses(d.node)
	}
	for _, d := range u.decls {
		l.decl(d.node)
	}
	l.body(u.src.fn)
	l.setup(pos)
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
		for _, s := range d.Specs {
			s := s.(*ast.TypeSpec)
			if o := l.u.info.Defs[s.Name]; o != nil {
				l.refuseEndless(s.Name.Pos(), o.Type())
			}
		}
		if len(d.Specs) > 0 {
			l.rewrite(d, nil)
			l.p.types = append(l.p.types, d)
		}
	case *ast.FuncDecl:
		l.function(d)
	}
}

// refuseEndless refuses a type that contains itself with no struct or interface between, such as type T []T: the interpreter
// looks for its end.
func (l *lowering) refuseEndless(pos token.Pos, t types.Type) {
	seen := map[types.Type]bool{}
	var contains func(u types.Type) bool
	contains = func(u types.Type) bool {
		switch u := types.Unalias(u).(type) {
		case *types.Named:
			if u == t {
				return true
			}
			if seen[u] || u.Obj().Pkg() == nil || u.Obj().Pkg().Path() != "main" {
				return false
			}
			seen[u] = true
			return contains(u.Underlying())
		case *types.Map:
			return contains(u.Key()) || contains(u.Elem())
		case *types.Signature:
			for _, list := range []*types.Tuple{u.Params(), u.Results()} {
				for v := range list.Variables() {
					if contains(v.Type()) {
						return true
					}
				}
			}
		case interface{ Elem() types.Type }:
			return contains(u.Elem())
		}
		return false
	}
	if contains(t.Underlying()) {
		name := types.TypeString(t, brief)
		l.fail(pos, "the interpreter cannot have type %s, which contains itself with no struct between; put what contains it into a struct", name)
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
	l.results = l.fieldTypes(d.Type.Results)
	l.rewrite(d, d.Body)
	l.results = nil
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

// hook is a call of this package from a lowered cell.
func (l *lowering) hook(name string, pos token.Pos, args ...ast.Expr) *ast.CallExpr {
	for i, x := range args {
		if call, ok := x.(*ast.CallExpr); ok && !l.synthetic[call] {
			if t := l.u.info.TypeOf(x); t != nil && isAny(t) {
				// In parentheses, since the interpreter takes the values out of pairs that a call gives straight to
				// compiled code.
				args[i] = &ast.ParenExpr{Lparen: x.Pos(), X: x, Rparen: x.End()}
			}
		}
	}
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
