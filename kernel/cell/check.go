package cell

import (
	"errors"
	"fmt"
	"go/ast"
	"go/scanner"
	"go/token"
	"go/types"
	"slices"
	"strconv"
	"strings"
)

// unit is a checked cell: what is lowered, compiled and, if that succeeds, committed.
type unit struct {
	src      *source
	info     *types.Info
	decls    []*decl                         // the cell's own declarations and the dependants that are compiled again
	plain    map[*ast.FuncDecl]*ast.FuncDecl // functions and methods that were checked in the form of plain functions
	objects  map[string]types.Object         // the new package-level objects; methods as "T.M"
	texts    map[string]*decl                // where they come from
	vars     map[types.Object]*types.Var     // variable of a statement -> the package-level variable that it becomes
	order    []*types.Var                    // the values of vars in source order
	imports  map[string]string               // name -> path, of the cell's import declarations
	concrete bool                            // an instance of generic code is being checked
	last     ast.Expr                        // the last statement's expression if it has a value
}

// problem is one error of the checker.
type problem struct {
	pos token.Pos
	msg string
}

// check type-checks a cell in three passes: declarations, statements, and the functions that need the others' results
// (a function that uses a variable of its own cell, a method on a type of an earlier cell). Nothing of the session changes,
// but for methods that are added to earlier types; see addMethod.
func (in *Interpreter) check(src *source, p *plan) (*unit, error) {
	u := &unit{src: src, info: newInfo(), plain: map[*ast.FuncDecl]*ast.FuncDecl{}, objects: map[string]types.Object{},
		texts: map[string]*decl{}, vars: map[types.Object]*types.Var{}, imports: map[string]string{}}
	if err := in.collectImports(u); err != nil {
		return nil, err
	}
	u.decls = p.decls
	own := map[string]bool{}      // package-level names of the declarations
	ownTypes := map[string]bool{} // of these the types
	for _, d := range u.decls {
		for _, n := range declared(d.node) {
			own[n] = true
			u.texts[n] = d
			if g, ok := d.node.(*ast.GenDecl); ok && g.Tok == token.TYPE {
				ownTypes[n] = true
			}
		}
	}
	variables := map[string]bool{}
	for _, id := range src.variables() {
		if own[id.Name] {
			return nil, in.problems([]problem{{id.Pos(), id.Name + " redeclared in this cell"}})
		}
		variables[id.Name] = true
	}

	// First pass: declarations.
	late := in.late(u, ownTypes, variables)
	first := in.scope(own, u.imports)
	var decls []ast.Decl
	for _, d := range u.decls {
		if f, ok := d.node.(*ast.FuncDecl); ok && late[f] {
			decls = append(decls, heading(f, u.plain[f], ownTypes))
			continue
		}
		decls = append(decls, d.node)
	}
	if err := in.pass(u, first, decls, nil); err != nil {
		return nil, err
	}
	for name := range own {
		if o := first.Scope().Lookup(name); o != nil {
			u.objects[name] = o
		}
	}
	if err := in.addMethods(u, first, ownTypes); err != nil {
		return nil, err
	}

	// Second pass: statements.
	second := in.scope(own, u.imports)
	u.insert(second)
	if src.list != nil {
		param := types.NewParam(token.NoPos, second, "", types.NewSlice(types.Universe.Lookup("any").Type()))
		second.Scope().Insert(types.NewFunc(token.NoPos, second, valuesName, types.NewSignatureType(nil, nil, nil, types.NewTuple(param), nil, true)))
	}
	if n := len(src.fn.Body.List); n > 0 && src.list == nil {
		if x, ok := src.fn.Body.List[n-1].(*ast.ExprStmt); ok {
			u.last = x.X
		}
	}
	if err := in.pass(u, second, []ast.Decl{src.fn}, u.last); err != nil {
		return nil, err
	}
	if u.last != nil {
		if tv := u.info.Types[u.last]; !tv.IsValue() {
			u.last = nil
		} else if err := in.overflow(u.last, tv); err != nil {
			return nil, err
		}
	}
	for _, id := range src.variables() {
		v, ok := u.info.Defs[id].(*types.Var)
		if !ok {
			continue // assigned, not declared, by its :=
		}
		// Its package is an empty one: through this cell's, each variable would keep those before it alive.
		g := types.NewVar(v.Pos(), in.pkg, v.Name(), v.Type())
		u.vars[v] = g
		u.objects[v.Name()] = g
		u.order = append(u.order, g)
	}

	// Third pass: what needs both.
	if len(late) > 0 {
		replaced := map[string]bool{}
		for name := range u.objects {
			replaced[name] = true
		}
		third := in.scope(replaced, u.imports)
		u.insert(third)
		var decls []ast.Decl
		for _, d := range u.decls {
			if f, ok := d.node.(*ast.FuncDecl); ok && late[f] {
				decls = append(decls, u.plain[f])
			}
		}
		if err := in.pass(u, third, decls, nil); err != nil {
			return nil, err
		}
	}
	return u, in.usesPhantom(u)
}

// insert puts the unit's new objects into a package.
func (u *unit) insert(p *types.Package) {
	for _, name := range sorted(u.objects) {
		if !strings.Contains(name, ".") {
			p.Scope().Insert(u.objects[name])
		}
	}
}

func newInfo() *types.Info {
	return &types.Info{
		Types: map[ast.Expr]types.TypeAndValue{}, Instances: map[*ast.Ident]types.Instance{},
		Defs: map[*ast.Ident]types.Object{}, Uses: map[*ast.Ident]types.Object{}, Implicits: map[ast.Node]types.Object{},
		Selections: map[*ast.SelectorExpr]*types.Selection{}, Scopes: map[ast.Node]*types.Scope{},
	}
}

// collectImports reads the import declarations.
func (in *Interpreter) collectImports(u *unit) error {
	var bad []problem
	for _, d := range u.src.decls {
		g, ok := d.node.(*ast.GenDecl)
		if !ok || g.Tok != token.IMPORT {
			continue
		}
		for _, s := range g.Specs {
			s := s.(*ast.ImportSpec)
			path, err := strconv.Unquote(s.Path.Value)
			if err != nil {
				bad = append(bad, problem{s.Pos(), "import path is no string"})
				continue
			}
			path = in.lib.resolve(path)
			p, err := in.lib.Import(path)
			if err != nil {
				bad = append(bad, problem{s.Pos(), in.noPackage(path)})
				continue
			}
			name := p.Name()
			if s.Name != nil {
				name = s.Name.Name
			}
			switch name {
			case "_": // the package is linked in already; there is nothing to do
			case ".":
				bad = append(bad, problem{s.Pos(), "a cell cannot import into its own names; write import " + s.Path.Value + " and " + p.Name() + ".Name"})
			default:
				u.imports[name] = path
			}
		}
	}
	return in.problems(bad)
}

// noPackage says that a package is not there, and which one may have been meant.
func (in *Interpreter) noPackage(path string) string {
	msg := fmt.Sprintf("package %q is not part of this kernel", path)
	base := path[strings.LastIndexByte(path, '/')+1:]
	var near []string
	for _, p := range in.lib.paths {
		if strings.HasSuffix(p, "/"+base) || p == base {
			near = append(near, strconv.Quote(p))
		}
	}
	if len(near) > 0 {
		msg += "; it has " + strings.Join(near, ", ")
	}
	return msg
}

// late finds the functions that the first pass can only take without their bodies, and makes plain functions of them.
func (in *Interpreter) late(u *unit, ownTypes, variables map[string]bool) map[*ast.FuncDecl]bool {
	late := map[*ast.FuncDecl]bool{}
	foreign := false // with a method on an earlier type, any function may use it
	for _, d := range u.decls {
		if f, ok := d.node.(*ast.FuncDecl); ok && f.Recv != nil {
			if name, generic := receiver(f); !ownTypes[name] && !generic {
				foreign = true
			}
		}
	}
	for i, d := range u.decls {
		f, ok := d.node.(*ast.FuncDecl)
		if !ok || f.Body == nil {
			continue
		}
		if _, generic := receiver(f); generic {
			continue // its type parameters exist only in the method's own form
		}
		used := foreign
		for n := range mentions(f.Body) {
			used = used || variables[n]
		}
		if used {
			late[f] = true
			u.plain[f] = asFunction(f, fmt.Sprintf("%sf%s%d", kernel, mark, i))
		}
	}
	return late
}

// asFunction returns a method as a function whose first parameter is the receiver; a function is only renamed.
func asFunction(f *ast.FuncDecl, name string) *ast.FuncDecl {
	t := *f.Type
	if f.Recv != nil {
		list := slices.Clone(f.Recv.List)
		if len(list) == 1 && len(list[0].Names) == 0 && f.Type.Params != nil && len(f.Type.Params.List) > 0 && len(f.Type.Params.List[0].Names) > 0 {
			field := *list[0]
			field.Names = []*ast.Ident{{Name: "_", NamePos: field.Pos()}}
			list[0] = &field
		}
		params := *f.Type.Params
		params.List = append(list, params.List...)
		// A receiver without a name beside unnamed parameters stays unnamed; a named one beside unnamed parameters needs names.
		named := false
		for _, p := range params.List {
			named = named || len(p.Names) > 0
		}
		if named {
			for i, p := range params.List {
				if len(p.Names) == 0 {
					field := *p
					field.Names = []*ast.Ident{{Name: "_", NamePos: p.Pos()}}
					params.List[i] = &field
				}
			}
		}
		t.Params = &params
	}
	return &ast.FuncDecl{Name: &ast.Ident{Name: name, NamePos: f.Name.Pos()}, Type: &t, Body: f.Body}
}

// heading is the function of the first pass: without a body, and for a method on an earlier type as a plain function.
func heading(f, plain *ast.FuncDecl, ownTypes map[string]bool) *ast.FuncDecl {
	h := *f
	if name, _ := receiver(f); f.Recv != nil && !ownTypes[name] {
		h = *plain
	}
	h.Body = nil
	return &h
}

// scope returns a package that holds the session's objects except those of the given names.
func (in *Interpreter) scope(without map[string]bool, imports map[string]string) *types.Package {
	p := types.NewPackage("main", "main")
	for name, e := range in.names {
		if _, imported := imports[name]; !imported && !without[name] && !strings.Contains(name, ".") {
			p.Scope().Insert(e.obj)
		}
	}
	return p
}

// pass checks declarations in a package that has the session's objects already. The last expression of a cell may be
// unused.
func (in *Interpreter) pass(u *unit, p *types.Package, decls []ast.Decl, last ast.Expr) error {
	f := &ast.File{Name: ast.NewIdent("main"), Decls: in.importDecls(u, p, decls)}
	if len(decls) > 0 {
		f.Package = decls[0].Pos()
	}
	f.Decls = append(f.Decls, decls...)
	var found []types.Error
	conf := types.Config{Importer: in.lib, GoVersion: goVersion, Error: func(err error) {
		var e types.Error
		if !errors.As(err, &e) || e.Soft {
			return // unused variables and imports are fine in a notebook
		}
		if last != nil && strings.HasSuffix(e.Msg, "is not used") && last.Pos() <= e.Pos && e.Pos <= last.End() {
			return
		}
		// Each cell is a package to the checker, but all are one to the reader.
		if strings.HasPrefix(e.Msg, "implicit assignment to unexported field") && strings.Contains(e.Msg, "main.") {
			return
		}
		if u.concrete && (strings.HasPrefix(e.Msg, "impossible type ") || strings.HasPrefix(e.Msg, "duplicate case ") || strings.HasPrefix(e.Msg, "\t")) {
			return // only the instance is so special
		}
		found = append(found, e)
	}}
	// The errors come one by one to the function above.
	_ = types.NewChecker(&conf, in.fset, p, u.info).Files([]*ast.File{f})
	var bad []problem
	for _, e := range found {
		bad = append(bad, problem{e.Pos, in.hint(u, p, decls, e)})
	}
	return in.problems(bad)
}

const goVersion = "go1.26"

// importDecls declares the packages that the declarations mention and that no name of the cells hides.
func (in *Interpreter) importDecls(u *unit, p *types.Package, decls []ast.Decl) []ast.Decl {
	own := map[string]bool{}
	for _, d := range decls {
		for _, n := range declared(d) {
			own[n] = true
		}
	}
	needed := map[string]string{}
	for _, d := range decls {
		ast.Inspect(d, func(n ast.Node) bool {
			if s, ok := n.(*ast.SelectorExpr); ok {
				if id, ok := s.X.(*ast.Ident); ok && !own[id.Name] && p.Scope().Lookup(id.Name) == nil {
					if path := in.packageNamed(u.imports, id.Name); path != "" {
						needed[id.Name] = path
					}
				}
			}
			return true
		})
	}
	var out []ast.Decl
	for _, name := range sorted(needed) {
		out = append(out, &ast.GenDecl{Tok: token.IMPORT, Specs: []ast.Spec{&ast.ImportSpec{
			Name: ast.NewIdent(name), Path: &ast.BasicLit{Kind: token.STRING, Value: strconv.Quote(needed[name])},
		}}})
	}
	return out
}

// packageNamed returns the path of the package that a name means: the cell's import, an earlier cell's, or a package that
// is there without any import.
func (in *Interpreter) packageNamed(imports map[string]string, name string) string {
	if p := imports[name]; p != "" {
		return p
	}
	if p := in.imports[name]; p != "" {
		return p
	}
	return in.preloaded[name]
}

// problems makes one error of the checker's findings, or nil of none.
func (in *Interpreter) problems(list []problem) error {
	if len(list) == 0 {
		return nil
	}
	var errs scanner.ErrorList
	for _, p := range list {
		errs = append(errs, &scanner.Error{Pos: in.fset.Position(p.pos), Msg: plain(p.msg)})
	}
	errs.Sort()
	return slices.CompactFunc(errs, func(a, b *scanner.Error) bool { return *a == *b })
}

func sorted[V any](m map[string]V) []string {
	names := make([]string, 0, len(m))
	for n := range m {
		names = append(names, n)
	}
	slices.Sort(names)
	return names
}
