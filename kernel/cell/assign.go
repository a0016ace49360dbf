package cell

import (
	"go/ast"
	"go/token"
	"go/types"

	"golang.org/x/tools/go/ast/astutil"
)

// This file lowers assignments of several values and deferred calls: the interpreter assigns one after the other, so that
// later values see earlier targets, and reads the arguments of a deferred call when it is made.

// keep puts a value into a variable of its own, in statements that are added to list. Constants, nil, types, function
// literals and the names of functions stay as they are.
func (l *lowering) keep(list *[]ast.Stmt, x ast.Expr) ast.Expr {
	tv := l.u.info.Types[x]
	switch y := ast.Unparen(x).(type) {
	case *ast.BasicLit, *ast.FuncLit:
		return x
	case *ast.Ident:
		if _, ok := l.u.info.Uses[y].(*types.Func); ok || l.made(y) || y.Name == "nil" || y.Name == "true" || y.Name == "false" {
			return x
		}
	}
	if tv.Value != nil || tv.IsNil() || tv.IsType() || tv.IsBuiltin() {
		return x
	}
	id := l.temp(x.Pos())
	*list = append(*list, &ast.AssignStmt{Lhs: []ast.Expr{id}, TokPos: x.Pos(), Tok: token.DEFINE, Rhs: []ast.Expr{x}})
	return &ast.Ident{Name: id.Name, NamePos: x.Pos()}
}

// parallel turns a, b = x, y into t, u := x, y; a = t; b = u, with the operands of targets evaluated first.
func (l *lowering) parallel(c *astutil.Cursor, s *ast.AssignStmt) bool {
	if len(s.Lhs) < 2 || len(s.Lhs) != len(s.Rhs) || s.Tok != token.ASSIGN && s.Tok != token.DEFINE {
		return false
	}
	if s.Tok == token.DEFINE && l.allNew(s) {
		return false // new variables cannot be seen on the right
	}
	var list []ast.Stmt
	for i, x := range s.Lhs {
		s.Lhs[i] = l.target(&list, x)
	}
	for i, x := range s.Rhs {
		s.Rhs[i] = l.keep(&list, x)
	}
	if s.Tok == token.DEFINE {
		list = append(list, s)
		l.replaceInList(c, list)
		return true
	}
	for i := range s.Lhs {
		list = append(list, &ast.AssignStmt{Lhs: s.Lhs[i : i+1], TokPos: s.TokPos, Tok: token.ASSIGN, Rhs: s.Rhs[i : i+1]})
	}
	if c.Index() >= 0 {
		l.replaceInList(c, list)
	} else {
		l.extract(c, s, list)
	}
	return true
}

// extract puts statements where only one may stand: in the head of an if or a for, as a call of a function literal.
func (l *lowering) extract(c *astutil.Cursor, s *ast.AssignStmt, list []ast.Stmt) {
	pos := s.Pos()
	lit := &ast.FuncLit{
		Type: &ast.FuncType{Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos}},
		Body: &ast.BlockStmt{Lbrace: pos, List: list, Rbrace: s.End()},
	}
	call := &ast.CallExpr{Fun: lit, Lparen: pos, Rparen: pos}
	l.synthetic[call] = true
	c.Replace(&ast.ExprStmt{X: call})
}

// replaceInList replaces a statement of a list by several.
func (l *lowering) replaceInList(c *astutil.Cursor, list []ast.Stmt) {
	if c.Index() < 0 {
		return // the head of a statement: its DEFINE stays as it is
	}
	for _, s := range list[:len(list)-1] {
		c.InsertBefore(s)
	}
	c.Replace(list[len(list)-1])
}

// allNew reports whether a := declares all its variables.
func (l *lowering) allNew(s *ast.AssignStmt) bool {
	for _, x := range s.Lhs {
		id, ok := x.(*ast.Ident)
		if !ok || id.Name != "_" && l.u.info.Defs[id] == nil {
			return false
		}
	}
	return true
}

// target evaluates the operands of an assignment's target.
func (l *lowering) target(list *[]ast.Stmt, x ast.Expr) ast.Expr {
	switch y := ast.Unparen(x).(type) {
	case *ast.IndexExpr:
		switch t := l.u.info.TypeOf(y.X); t.Underlying().(type) {
		case *types.Slice, *types.Map, *types.Pointer:
			y.X = l.keep(list, y.X)
		default:
			y.X = l.target(list, y.X)
		}
		y.Index = l.keep(list, y.Index)
		return y
	case *ast.SelectorExpr:
		if sel := l.u.info.Selections[y]; sel != nil {
			if _, ptr := l.u.info.TypeOf(y.X).Underlying().(*types.Pointer); ptr {
				y.X = l.keep(list, y.X)
			} else {
				y.X = l.target(list, y.X)
			}
		}
		return y
	case *ast.StarExpr:
		y.X = l.keep(list, y.X)
		return y
	}
	return x
}

// deferStmt evaluates the function and the arguments of a deferred call now.
func (l *lowering) deferStmt(c *astutil.Cursor, n *ast.DeferStmt) {
	var list []ast.Stmt
	call := n.Call
	if l.synthetic[call] || l.u.info.Types[call.Fun].IsBuiltin() && len(call.Args) == 0 {
		return
	}
	switch f := ast.Unparen(call.Fun).(type) {
	case *ast.FuncLit:
		if l.inLoop() {
			id := l.temp(n.Pos())
			list = append(list, &ast.AssignStmt{Lhs: []ast.Expr{id}, TokPos: n.Pos(), Tok: token.DEFINE, Rhs: []ast.Expr{l.ownFrame(f)}})
			call.Fun = &ast.Ident{Name: id.Name, NamePos: n.Pos()}
		}
	case *ast.SelectorExpr:
		l.keepReceiver(&list, call, f)
	default:
		call.Fun = l.keep(&list, call.Fun)
	}
	for i, a := range call.Args {
		if t, ok := l.u.info.TypeOf(a).(*types.Tuple); ok && t.Len() > 1 {
			return // defer f(g()) with several values
		}
		call.Args[i] = l.keep(&list, a)
	}
	if len(list) > 0 {
		c.Replace(&ast.BlockStmt{Lbrace: n.Pos(), List: append(list, n), Rbrace: n.End()})
	}
}

// keepReceiver evaluates the receiver of a method call, or the function in a field.
func (l *lowering) keepReceiver(list *[]ast.Stmt, call *ast.CallExpr, f *ast.SelectorExpr) {
	sel := l.u.info.Selections[f]
	if sel == nil {
		return // a function of a package
	}
	if sel.Kind() != types.MethodVal {
		call.Fun = l.keep(list, f)
		return
	}
	pos := f.Pos()
	if _, ptr := sel.Recv().Underlying().(*types.Pointer); !ptr && l.u.info.Types[f.X].Addressable() {
		id := l.temp(pos)
		*list = append(*list, &ast.AssignStmt{Lhs: []ast.Expr{id}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{&ast.UnaryExpr{OpPos: pos, Op: token.AND, X: f.X}}})
		f.X = &ast.Ident{Name: id.Name, NamePos: pos}
		return
	}
	f.X = l.keep(list, f.X)
}

// returnStmt receives before it returns: the interpreter cannot do both at once.
func (l *lowering) returnStmt(c *astutil.Cursor, n *ast.ReturnStmt) {
	receives := false
	for _, x := range n.Results {
		u, ok := ast.Unparen(x).(*ast.UnaryExpr)
		receives = receives || ok && u.Op == token.ARROW
	}
	if !receives || c.Index() < 0 {
		return
	}
	var list []ast.Stmt
	for i, x := range n.Results {
		n.Results[i] = l.keep(&list, x)
	}
	l.replaceInList(c, append(list, n))
}
