package cell

import (
	"bytes"
	"errors"
	"fmt"
	"go/ast"
	"go/scanner"
	"go/token"
	"go/types"
	"maps"
	"strings"
)

// plan is what a cell makes the session compile: its own declarations, and those of earlier cells that depend on what it
// replaces, so that they see the new meaning.
type plan struct {
	own      []*decl
	replaced map[string]bool // names that get a new meaning; methods as "T.M"
	kept     map[string]bool // dependants that stay as they were since they do not compile any more
	decls    []*decl         // own and dependants
}

// analyse checks a cell together with its dependants. A dependant that no longer compiles stays as it was.
func (in *Interpreter) analyse(src *source) (*unit, error) {
	p := &plan{replaced: map[string]bool{}, kept: map[string]bool{}}
	if err := in.own(src, p); err != nil {
		return nil, err
	}
	for {
		in.dependants(src, p)
		u, err := in.check(src, p)
		if err != nil {
			var renew renewal
			if errors.As(err, &renew) && !p.replaced[string(renew)] {
				p.replaced[string(renew)] = true
				continue
			}
			if in.blame(src, p, err) {
				continue
			}
			return nil, err
		}
		again := false
		for _, v := range u.order {
			e := in.names[v.Name()]
			if e == nil || p.replaced[v.Name()] {
				continue
			}
			if old, ok := e.obj.(*types.Var); !ok || !types.Identical(old.Type(), v.Type()) {
				p.replaced[v.Name()] = true
				again = again || in.needed(p, v.Name())
			}
		}
		if !again {
			return u, nil
		}
	}
}

// own collects the cell's declarations. A type that is declared again word for word, from names that mean the same, stays
// the type that it was, so that running a cell again does not make strangers of the values of its types.
func (in *Interpreter) own(src *source, p *plan) error {
	var bad []problem
	same := map[string]bool{}
	for _, d := range src.decls {
		switch n := d.node.(type) {
		case *ast.GenDecl:
			if n.Tok == token.IMPORT {
				continue
			}
			if n.Tok == token.TYPE && in.unchanged(d) {
				for _, name := range declared(n) {
					same[name] = true
				}
			}
		case *ast.FuncDecl:
			if n.Recv == nil && n.Name.Name == "init" {
				bad = append(bad, problem{n.Name.Pos(), "func init: a cell is run, it is not initialised; write the statements in the cell"})
			}
			if n.Body == nil {
				bad = append(bad, problem{n.Name.Pos(), "func " + n.Name.Name + " has no body"})
			}
		}
	}
	if len(bad) > 0 {
		return in.problems(bad)
	}
	// What mentions a type that does change, changes too.
	for again := true; again; {
		again = false
		for _, d := range src.decls {
			var names []string
			switch n := d.node.(type) {
			case *ast.GenDecl:
				if n.Tok != token.TYPE {
					continue
				}
				names = declared(n)
			case *ast.FuncDecl:
				name, generic := receiver(n)
				if name == "" {
					continue
				}
				names = []string{name}
				if generic || in.otherSignature(name, n) {
					again = again || same[name]
					delete(same, name)
				}
			}
			for m := range mentionsOf(d.node) {
				if same[m] || !redeclares(src, m) {
					continue
				}
				for _, n := range names {
					again = again || same[n]
					delete(same, n)
				}
			}
		}
	}
	for _, d := range src.decls {
		names := declared(d.node)
		if g, ok := d.node.(*ast.GenDecl); ok {
			if g.Tok == token.IMPORT {
				continue
			}
			if len(names) > 0 && same[names[0]] {
				continue
			}
		}
		p.own = append(p.own, d)
		for _, n := range names {
			if in.names[n] != nil {
				p.replaced[n] = true
			}
		}
		if f, ok := d.node.(*ast.FuncDecl); ok && f.Recv != nil {
			name, _ := receiver(f)
			if key := name + "." + f.Name.Name; in.names[key] != nil {
				p.replaced[key] = true
			}
		}
	}
	return nil
}

// mentionsOf returns the names in a declaration as far as they shape a type: of a method only its heading.
func mentionsOf(d ast.Decl) map[string]bool {
	if f, ok := d.(*ast.FuncDecl); ok {
		return mentions(f.Type)
	}
	return mentions(d)
}

// redeclares reports whether a cell declares a type or constant of that name.
func redeclares(src *source, name string) bool {
	for _, d := range src.decls {
		if g, ok := d.node.(*ast.GenDecl); !ok || g.Tok == token.IMPORT {
			continue
		}
		for _, n := range declared(d.node) {
			if n == name {
				return true
			}
		}
	}
	return false
}

// unchanged reports whether a type declaration is that of the live types of its names.
func (in *Interpreter) unchanged(d *decl) bool {
	for _, name := range declared(d.node) {
		e := in.names[name]
		if e == nil || e.decl == nil || e.decl.text != d.text {
			return false
		}
		for used, o := range e.uses {
			if live := in.names[used]; live == nil || live.obj != o {
				return false
			}
		}
		named, ok := e.obj.Type().(*types.Named)
		if !ok || named.TypeParams().Len() > 0 {
			return false
		}
		for i := range named.NumMethods() {
			if in.phantoms[named.Method(i)] {
				return false
			}
		}
	}
	return len(declared(d.node)) > 0
}

// otherSignature reports whether a live type has this method with another signature.
func (in *Interpreter) otherSignature(name string, f *ast.FuncDecl) bool {
	e := in.names[name+"."+f.Name.Name]
	return e != nil && e.decl.signature != signature(f)
}

// signature returns a method's receiver, parameter and result types as text.
func signature(f *ast.FuncDecl) string {
	var b bytes.Buffer
	for _, list := range []*ast.FieldList{f.Recv, f.Type.Params, f.Type.Results} {
		b.WriteByte('(')
		if list != nil {
			for _, field := range list.List {
				for range max(1, len(field.Names)) {
					b.WriteString(types.ExprString(field.Type) + ",")
				}
			}
		}
		b.WriteByte(')')
	}
	return b.String()
}

// dependants fills in the declarations of earlier cells that have to be compiled again.
func (in *Interpreter) dependants(src *source, p *plan) {
	own := map[string]bool{}
	for _, d := range p.own {
		for _, n := range d.names() {
			own[n] = true
		}
	}
	variables := map[string]bool{} // what had these names is gone, with its methods
	for _, id := range src.variables() {
		variables[id.Name] = true
	}
	replaced := maps.Clone(p.replaced)
	p.decls = append([]*decl(nil), p.own...)
	taken := map[*decl]bool{}
	for again := true; again; {
		again = false
		for _, key := range sorted(in.names) {
			e := in.names[key]
			typ, _, isMethod := strings.Cut(key, ".")
			if e.decl == nil || taken[e.decl] || own[key] || p.kept[key] || variables[typ] {
				continue
			}
			need := replaced[key]
			for used := range e.uses {
				need = need || replaced[used]
			}
			if isMethod && replaced[typ] {
				// The methods of a type that is declared anew go with it; those that stood in its old cell were left out on purpose.
				t := in.names[typ]
				need = !own[typ] || t == nil || t.decl == nil || t.decl.cell != e.decl.cell
			}
			if !need || isMethod && p.kept[typ] {
				continue
			}
			d := *e.decl
			if err := d.parse(in.fset); err != nil {
				continue // it was parsed once
			}
			taken[e.decl] = true
			p.decls = append(p.decls, &d)
			for _, n := range d.names() {
				replaced[n] = true
			}
			again = true
		}
	}
}

// names returns the keys of a declaration's entries.
func (d *decl) names() []string {
	if f, ok := d.node.(*ast.FuncDecl); ok && f.Recv != nil {
		name, _ := receiver(f)
		return []string{name + "." + f.Name.Name}
	}
	return declared(d.node)
}

// needed reports whether anything depends on a name.
func (in *Interpreter) needed(p *plan, name string) bool {
	for key, e := range in.names {
		if _, ok := e.uses[name]; ok && !p.kept[key] && e.decl != nil {
			return true
		}
	}
	return false
}

// blame finds the dependants in which errors lie and keeps them as they were.
func (in *Interpreter) blame(src *source, p *plan, err error) bool {
	var list scanner.ErrorList
	if !errors.As(err, &list) {
		return false
	}
	found := false
	for _, f := range list {
		n := cellOf(f.Pos.Filename)
		for _, d := range p.decls[len(p.own):] {
			end := in.fset.Position(d.node.End())
			at := place64(n, f.Pos.Line, f.Pos.Column)
			if d.cell != n || at < place64(n, d.line, d.column) || at > place64(n, end.Line, end.Column) {
				continue
			}
			for _, name := range d.names() {
				found = found || !p.kept[name]
				p.kept[name] = true
			}
		}
	}
	return found
}

// renewal is the error of a method with another signature than its type has: the type of that name must be made anew.
type renewal string

func (r renewal) Error() string { return "the type " + string(r) + " must be declared again" }

// addMethods gives the unit's types their methods in u.objects, and earlier types the methods that the cell adds.
func (in *Interpreter) addMethods(u *unit, first *types.Package, ownTypes map[string]bool) error {
	for _, d := range u.decls {
		f, ok := d.node.(*ast.FuncDecl)
		if !ok || f.Recv == nil {
			continue
		}
		name, generic := receiver(f)
		key := name + "." + f.Name.Name
		if ownTypes[name] {
			if fn, ok := u.info.Defs[f.Name].(*types.Func); ok {
				u.objects[key], u.texts[key] = fn, d
			}
			continue
		}
		if generic {
			return in.problems([]problem{{f.Name.Pos(), "the methods of a generic type belong in the cell that declares it"}})
		}
		fn, err := in.addMethod(u, f, name)
		if err != nil {
			return err
		}
		u.objects[key], u.texts[key] = fn, d
	}
	return nil
}

// addMethod adds one method to an earlier type, or finds the one that it replaces. go/types cannot take a method back, so
// one whose cell then fails to compile is remembered as a phantom, which no one may use.
func (in *Interpreter) addMethod(u *unit, f *ast.FuncDecl, name string) (*types.Func, error) {
	fail := func(format string, args ...any) (*types.Func, error) {
		return nil, in.problems([]problem{{f.Name.Pos(), fmt.Sprintf(format, args...)}})
	}
	plainFunc, ok := u.info.Defs[u.plain[f].Name].(*types.Func)
	if !ok {
		return fail("undefined: %s", name)
	}
	sig := plainFunc.Signature()
	recv := sig.Params().At(0)
	t := types.Unalias(recv.Type())
	if p, ok := t.(*types.Pointer); ok {
		t = types.Unalias(p.Elem())
	}
	named, ok := t.(*types.Named)
	if !ok || named.Obj().Pkg() == nil || named.Obj().Pkg().Path() != "main" {
		return fail("cannot define methods on %s, which is no type of a cell", name)
	}
	switch named.Underlying().(type) {
	case *types.Pointer, *types.Interface:
		return fail("invalid receiver type %s (pointer or interface type)", name)
	}
	if o, _, _ := types.LookupFieldOrMethod(named, true, named.Obj().Pkg(), f.Name.Name); o != nil {
		if v, ok := o.(*types.Var); ok && v.IsField() && directField(named, v) {
			return fail("field and method with the same name %s", f.Name.Name)
		}
	}
	var params []*types.Var
	for v := range sig.Params().Variables() {
		params = append(params, v)
	}
	method := types.NewSignatureType(recv, nil, nil, types.NewTuple(params[1:]...), sig.Results(), sig.Variadic())
	for old := range named.Methods() {
		if old.Name() != f.Name.Name {
			continue
		}
		if types.Identical(old.Signature(), method) && types.Identical(old.Signature().Recv().Type(), recv.Type()) {
			return old, nil
		}
		return nil, renewal(name)
	}
	fn := types.NewFunc(f.Name.Pos(), named.Obj().Pkg(), f.Name.Name, method)
	named.AddMethod(fn)
	in.phantoms[fn] = true
	return fn, nil
}

func directField(n *types.Named, v *types.Var) bool {
	s, ok := n.Underlying().(*types.Struct)
	if !ok {
		return false
	}
	for f := range s.Fields() {
		if f == v {
			return true
		}
	}
	return false
}

// usesPhantom finds the use of a method whose cell failed to compile.
func (in *Interpreter) usesPhantom(u *unit) error {
	var bad []problem
	for id, o := range u.info.Uses {
		fn, ok := o.(*types.Func)
		if !ok || !in.phantoms[fn] {
			continue
		}
		if key := typeName(fn.Signature().Recv().Type()).Name() + "." + fn.Name(); u.objects[key] == nil {
			bad = append(bad, problem{id.Pos(), fmt.Sprintf("%s undefined: the cell that was to define it did not compile", key)})
		}
	}
	return in.problems(bad)
}
