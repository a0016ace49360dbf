package cell

import (
	"fmt"
	"go/ast"
	"go/token"
	"go/types"

	"golang.org/x/tools/go/ast/astutil"
)

// A method T.M of a cell becomes a function, which the interpreter calls five times as fast, a variable that holds it, and
// a method that calls the variable, for interfaces and method values. So a method that is defined again reaches every
// value of its type: yaegi itself ignores the second definition.

// method returns the function of a method, and declares the variable and the method that calls it if they are new.
func (l *lowering) method(d *ast.FuncDecl, fn *types.Func) *ast.FuncDecl {
	f := asFunction(d, l.p.slots[fn])
	variable, ok := l.in.methods[fn]
	if !ok {
		if t := l.typeExpr(methodFunc(fn), d.Pos()); t != nil {
			variable = l.in.gens.fresh(kernel + "m")
			l.p.methods[fn] = variable
			l.p.vars = append(l.p.vars, varDecl(d.Pos(), variable, t))
			l.p.funcs = append(l.p.funcs, l.trampoline(d, fn, variable))
		}
	}
	l.sets = append(l.sets, [2]string{variable, f.Name.Name})
	return f
}

// methodFunc is a method's type as that of a function with the receiver first.
func methodFunc(fn *types.Func) *types.Signature {
	sig := fn.Signature()
	params := []*types.Var{types.NewParam(token.NoPos, nil, "", sig.Recv().Type())}
	for v := range sig.Params().Variables() {
		params = append(params, v)
	}
	return types.NewSignatureType(nil, nil, nil, types.NewTuple(params...), sig.Results(), sig.Variadic())
}

// trampoline is the method that calls the variable. All of it stands at the word func, which lies in no function's place.
func (l *lowering) trampoline(d *ast.FuncDecl, fn *types.Func, variable string) ast.Decl {
	pos := d.Pos()
	sig := fn.Signature()
	id := func(name string) *ast.Ident { return &ast.Ident{Name: name, NamePos: pos} }
	arg := func(i int) *ast.Ident { return id(fmt.Sprintf("%sa%d", kernel, i)) }
	call := &ast.CallExpr{Fun: id(variable), Lparen: pos, Args: []ast.Expr{arg(0)}, Rparen: pos}
	t, ok := l.typeExpr(sig, pos).(*ast.FuncType)
	if !ok {
		return &ast.FuncDecl{}
	}
	for i, f := range t.Params.List {
		f.Names = []*ast.Ident{arg(i + 1)}
		call.Args = append(call.Args, arg(i+1))
	}
	if sig.Variadic() {
		call.Ellipsis = pos
	}
	var body ast.Stmt = &ast.ExprStmt{X: call}
	if sig.Results().Len() > 0 {
		body = &ast.ReturnStmt{Return: pos, Results: []ast.Expr{call}}
	}
	return &ast.FuncDecl{
		Recv: &ast.FieldList{Opening: pos, List: []*ast.Field{{Names: []*ast.Ident{arg(0)}, Type: l.typeExpr(sig.Recv().Type(), pos)}}, Closing: pos},
		Name: id(fn.Name()), Type: t, Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{body}, Rbrace: pos},
	}
}

// setup makes the function that fills the methods' variables.
func (l *lowering) setup(pos token.Pos) {
	if len(l.sets) == 0 {
		return
	}
	l.p.setup = kernel + "set"
	body := &ast.BlockStmt{Lbrace: pos, Rbrace: pos}
	for _, s := range l.sets {
		body.List = append(body.List, &ast.AssignStmt{
			Lhs: []ast.Expr{&ast.Ident{Name: s[0], NamePos: pos}}, TokPos: pos, Tok: token.ASSIGN,
			Rhs: []ast.Expr{&ast.Ident{Name: s[1], NamePos: pos}},
		})
	}
	l.p.funcs = append(l.p.funcs, &ast.FuncDecl{
		Name: &ast.Ident{Name: l.p.setup, NamePos: pos},
		Type: &ast.FuncType{Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos}}, Body: body,
	})
}

// methodCall turns x.M(...) into a call of the method's function.
func (l *lowering) methodCall(call *ast.CallExpr) {
	s, ok := ast.Unparen(call.Fun).(*ast.SelectorExpr)
	if !ok {
		return
	}
	sel := l.u.info.Selections[s]
	if sel == nil || sel.Kind() != types.MethodVal {
		return
	}
	fn, ok := sel.Obj().(*types.Func)
	if !ok || types.IsInterface(fn.Signature().Recv().Type()) || l.methodSlot(fn) == "" {
		return
	}
	if len(call.Args) == 1 {
		if t, ok := l.u.info.TypeOf(call.Args[0]).(*types.Tuple); ok && t.Len() > 0 {
			return // f(g()) with several values of g takes no receiver beside them
		}
	}
	pos := s.Sel.Pos()
	recv := l.receiver(s.X, sel, fn)
	call.Fun = &ast.Ident{Name: l.methodSlot(fn), NamePos: pos}
	call.Args = append([]ast.Expr{recv}, call.Args...)
}

// methodExpr turns T.M, not called, into the method's function.
func (l *lowering) methodExpr(c *astutil.Cursor, s *ast.SelectorExpr) {
	sel := l.u.info.Selections[s]
	if sel == nil || sel.Kind() != types.MethodExpr {
		return
	}
	fn, ok := sel.Obj().(*types.Func)
	if !ok {
		return
	}
	slot := ""
	if !types.IsInterface(fn.Signature().Recv().Type()) {
		slot = l.methodSlot(fn)
	}
	if slot != "" && len(sel.Index()) == 1 && types.Identical(sel.Recv(), fn.Signature().Recv().Type()) {
		l.replace(c, &ast.Ident{Name: slot, NamePos: s.Pos()})
		return
	}
	// A method of a compiled type or an interface, a promoted one, or a pointer's with a value receiver:
	// func(r R, ...) { return r.M(...) }
	pos := s.Pos()
	sig, ok := sel.Type().(*types.Signature)
	if !ok {
		return
	}
	t, ok := l.typeExpr(sig, pos).(*ast.FuncType)
	if !ok {
		return
	}
	call := &ast.CallExpr{Lparen: pos, Rparen: pos}
	for i, f := range t.Params.List {
		name := fmt.Sprintf("%sa%d", kernel, i)
		f.Names = []*ast.Ident{{Name: name, NamePos: pos}}
		call.Args = append(call.Args, &ast.Ident{Name: name, NamePos: pos})
	}
	if sig.Variadic() {
		call.Ellipsis = pos
	}
	if slot != "" {
		call.Fun, call.Args[0] = &ast.Ident{Name: slot, NamePos: pos}, l.receiver(call.Args[0], sel, fn)
	} else {
		call.Fun, call.Args = &ast.SelectorExpr{X: call.Args[0], Sel: &ast.Ident{Name: fn.Name(), NamePos: pos}}, call.Args[1:]
	}
	var body ast.Stmt = &ast.ExprStmt{X: call}
	if sig.Results().Len() > 0 {
		body = &ast.ReturnStmt{Return: pos, Results: []ast.Expr{call}}
	}
	l.replace(c, &ast.FuncLit{Type: t, Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{body}, Rbrace: pos}})
}

// methodValue turns x.M, not called, into func(r T) func(...) { return func(...) { return M(r, ...) } }(x): the receiver is
// that of now, which the interpreter forgets.
func (l *lowering) methodValue(c *astutil.Cursor, s *ast.SelectorExpr) {
	sel := l.u.info.Selections[s]
	if sel == nil || sel.Kind() != types.MethodVal || l.called[s] {
		return
	}
	fn, ok := sel.Obj().(*types.Func)
	if !ok || types.IsInterface(fn.Signature().Recv().Type()) || l.methodSlot(fn) == "" {
		return
	}
	pos := s.Pos()
	t, ok := l.typeExpr(sel.Type(), pos).(*ast.FuncType)
	recv := l.typeExpr(fn.Signature().Recv().Type(), pos)
	if !ok || recv == nil {
		return
	}
	id := func(i int) *ast.Ident { return &ast.Ident{Name: fmt.Sprintf("%sa%d", kernel, i), NamePos: pos} }
	call := &ast.CallExpr{Fun: &ast.Ident{Name: l.methodSlot(fn), NamePos: pos}, Lparen: pos, Args: []ast.Expr{id(0)}, Rparen: pos}
	for i, f := range t.Params.List {
		f.Names = []*ast.Ident{id(i + 1)}
		call.Args = append(call.Args, id(i+1))
	}
	if fn.Signature().Variadic() {
		call.Ellipsis = pos
	}
	var body ast.Stmt = &ast.ExprStmt{X: call}
	if t.Results != nil {
		body = &ast.ReturnStmt{Return: pos, Results: []ast.Expr{call}}
	}
	inner := &ast.FuncLit{Type: t, Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{body}, Rbrace: pos}}
	outer := &ast.FuncLit{
		Type: &ast.FuncType{
			Func: pos, Params: &ast.FieldList{Opening: pos, List: []*ast.Field{{Names: []*ast.Ident{id(0)}, Type: recv}}, Closing: pos},
			Results: &ast.FieldList{Opening: pos, List: []*ast.Field{{Type: l.typeExpr(sel.Type(), pos)}}, Closing: pos},
		},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{&ast.ReturnStmt{Return: pos, Results: []ast.Expr{inner}}}, Rbrace: pos},
	}
	made := &ast.CallExpr{Fun: outer, Lparen: pos, Args: []ast.Expr{l.receiver(s.X, sel, fn)}, Rparen: pos}
	l.synthetic[made] = true
	l.replace(c, made)
}

// receiver is the receiver that a method's function takes, from the operand of a selector.
func (l *lowering) receiver(x ast.Expr, sel *types.Selection, fn *types.Func) ast.Expr {
	pos := x.Pos()
	recv, t := l.path(x, sel.Recv(), sel.Index()[:len(sel.Index())-1])
	_, isPtr := types.Unalias(t).(*types.Pointer)
	_, wantPtr := fn.Signature().Recv().Type().(*types.Pointer)
	switch {
	case isPtr && !wantPtr:
		return &ast.StarExpr{Star: pos, X: recv}
	case !isPtr && wantPtr:
		return &ast.UnaryExpr{OpPos: pos, Op: token.AND, X: recv}
	}
	return recv
}

// path follows embedded fields.
func (l *lowering) path(x ast.Expr, t types.Type, index []int) (ast.Expr, types.Type) {
	for _, i := range index {
		u := t.Underlying()
		if p, ok := u.(*types.Pointer); ok {
			u = p.Elem().Underlying()
		}
		f := u.(*types.Struct).Field(i)
		name := f.Name()
		if f.Embedded() {
			if s := l.typeSlot(f.Type()); s != "" {
				name = s
			}
		}
		x = &ast.SelectorExpr{X: x, Sel: &ast.Ident{Name: name, NamePos: x.End()}}
		t = f.Type()
	}
	return x, t
}
