package cell

import (
	"fmt"
	"go/ast"
	"go/constant"
	"go/token"
	"go/types"

	"golang.org/x/tools/go/ast/astutil"
)

// This file walks the trees of a cell: it folds constants, renames, and hands to its neighbours what the interpreter does
// otherwise than Go.

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
	case *ast.FuncLit:
		l.nest = append(l.nest, n)
		if !l.called[n] {
			l.framed[n] = true
		}
		l.findReturns(n.Type, n.Body)
	case *ast.FuncDecl:
		l.findReturns(n.Type, n.Body)
	case *ast.ForStmt, *ast.RangeStmt:
		l.nest = append(l.nest, n)
	case *ast.CallExpr:
		l.called[ast.Unparen(n.Fun)] = true
		l.recoverCall(n)
		l.findTyped(n)
	case *ast.DeferStmt:
		if lit, ok := ast.Unparen(n.Call.Fun).(*ast.FuncLit); ok && l.inLoop() {
			l.framed[lit] = true
		}
		l.noRecover(n.Call)
	case *ast.CommClause:
		l.comms[n.Comm] = true
	case *ast.CompositeLit:
		l.literalKeys(n)
	case *ast.MapType:
		if t := l.u.info.TypeOf(n.Key); t != nil {
			if i, ok := t.Underlying().(*types.Interface); ok && !i.Empty() && !l.ofCompiled(t) {
				l.fail(n.Key.Pos(), "the interpreter cannot look up keys of the interface type %s; use map[any]", types.TypeString(t, brief))
			}
		}
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
		if _, ok := ofCells(tv.Type); ok || isSequence(tv.Type) {
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
				if f := l.instantiate(s); f != nil {
					l.replace(c, f)
					return false
				}
				l.selector(s, id, p.Imported())
				return false
			}
		}
	}
	return true
}

// isSequence reports whether a type is iter.Seq or iter.Seq2, which to the interpreter are function types like others.
func isSequence(t types.Type) bool {
	n, ok := t.(*types.Named)
	return ok && n.Obj().Pkg() != nil && n.Obj().Pkg().Path() == "iter"
}

// literalKeys writes the indices in an array's or slice's literal as plain numbers: to the interpreter a conversion is no
// constant.
func (l *lowering) literalKeys(n *ast.CompositeLit) {
	t := l.u.info.TypeOf(n)
	if t == nil {
		return
	}
	switch t.Underlying().(type) {
	case *types.Array, *types.Slice:
	default:
		return
	}
	for _, e := range n.Elts {
		if kv, ok := e.(*ast.KeyValueExpr); ok {
			if v := l.u.info.Types[kv.Key].Value; v != nil {
				kv.Key = number(kv.Key.Pos(), token.INT, constant.ToInt(v).ExactString())
			}
		}
	}
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
		l.fail(s.Pos(), "%s", missing(p, s.Sel.Name))
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
		l.methodValue(c, n)
	case *ast.IndexExpr:
		l.arrayOf(n)
	case *ast.CallExpr:
		l.wrapTyped(n)
		if tv := l.u.info.Types[n.Fun]; tv.IsType() && len(n.Args) == 1 {
			l.convertToAny(n, tv.Type)
			break
		}
		if x := l.builtin(n); x != nil {
			l.replace(c, x)
			break
		}
		l.arguments(n)
		l.methodCall(n)
	case *ast.FuncLit:
		l.zeroResults(n.Type, n.Body)
		l.capture(c, n)
	case *ast.IfStmt:
		l.head(c, n, n.Init)
	case *ast.SwitchStmt:
		fillClauses(n)
		l.switchHead(c, n)
	case *ast.GoStmt:
		c.Replace(l.goStmt(n))
	case *ast.DeferStmt:
		l.deferStmt(c, n)
	case *ast.ForStmt:
		l.forStmt(n, labelOf(c))
		l.head(c, n, n.Init)
	case *ast.RangeStmt:
		if s := l.rangeStmt(n, labelOf(c)); s != nil {
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
		l.assigned(n)
		l.parallel(c, n)
	case *ast.ValueSpec:
		l.declared(n)
	case *ast.ReturnStmt:
		l.returnStmt(n)
	case *ast.LabeledStmt:
		l.label(c, n)
	}
	return true
}

// arrayOf writes the dereference of a pointer to an array in an index: without it the interpreter loses track of an element
// of an element.
func (l *lowering) arrayOf(n *ast.IndexExpr) {
	t := l.u.info.TypeOf(n.X)
	if t == nil {
		return
	}
	if p, ok := t.Underlying().(*types.Pointer); ok {
		star := &ast.StarExpr{Star: n.X.Pos(), X: n.X}
		l.u.info.Types[star] = types.TypeAndValue{Type: p.Elem()}
		n.X = &ast.ParenExpr{Lparen: n.X.Pos(), X: star, Rparen: n.X.End()}
		l.u.info.Types[n.X] = types.TypeAndValue{Type: p.Elem()}
	}
}

// recoverCall refuses to recover in a literal that has a frame of its own: the interpreter looks for the panic in the frame
// where a literal stands.
func (l *lowering) recoverCall(n *ast.CallExpr) {
	id, ok := ast.Unparen(n.Fun).(*ast.Ident)
	if !ok || l.u.info.Uses[id] != types.Universe.Lookup("recover") {
		return
	}
	for i := len(l.nest) - 1; i >= 0; i-- {
		if lit, ok := l.nest[i].(*ast.FuncLit); ok {
			if l.framed[lit] {
				l.fail(n.Pos(), "cells cannot recover in a function literal that is deferred in a loop or kept as a value; defer a literal outside of loops, or a function with a name")
			}
			return
		}
	}
}

// convertToAny makes the conversion of a paired type to any one by a function: by itself it loses the type.
func (l *lowering) convertToAny(n *ast.CallExpr, to types.Type) {
	from := l.u.info.TypeOf(n.Args[0])
	if from != nil && isAny(to) && paired(from) {
		*n = *l.pair(n.Args[0], from).(*ast.CallExpr)
	}
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

func isGeneric(o types.Object) bool {
	switch t := o.Type().(type) {
	case *types.Signature:
		return t.TypeParams().Len() > 0
	case *types.Named:
		return t.TypeParams().Len() > 0
	}
	return false
}
