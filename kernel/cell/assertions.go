package cell

import (
	"go/ast"
	"go/token"
	"go/types"
	"strconv"

	"golang.org/x/tools/go/ast/astutil"
)

// This file lowers type switches and assertions to interface types: the interpreter compares types in a switch by their
// text, so that no compiled error is an error to it, and panics when nil is asserted to be an interface.

// typeSwitch turns
//
//	switch v := x.(type) { case A: ...; case B, nil: ...; default: ... }
//
// into
//
//	{
//		t := x
//		n := 0
//		if t is an A { n = 1 } else if t is a B { n = 2 } else if t == nil { n = 2 }
//		switch n { case 1: v := t.(A); ...; case 2: v := t; ...; default: v := t; ... }
//	}
func (l *lowering) typeSwitch(s *ast.TypeSwitchStmt) ast.Stmt {
	pos := s.Pos()
	id := func(name string) *ast.Ident { return &ast.Ident{Name: name, NamePos: pos} }
	var x *ast.TypeAssertExpr
	symbol := ""
	switch a := s.Assign.(type) {
	case *ast.ExprStmt:
		x, _ = ast.Unparen(a.X).(*ast.TypeAssertExpr)
	case *ast.AssignStmt:
		x, _ = ast.Unparen(a.Rhs[0]).(*ast.TypeAssertExpr)
		symbol = a.Lhs[0].(*ast.Ident).Name
	}
	if types.Universe.Lookup(symbol) != nil {
		symbol += mark + "0" // as rename does
	}
	value, number := l.temp(pos).Name, l.temp(pos).Name
	block := &ast.BlockStmt{Lbrace: pos, Rbrace: s.End()}
	l.hoisted[block] = true
	if s.Init != nil {
		block.List = append(block.List, s.Init)
	}
	block.List = append(block.List,
		&ast.AssignStmt{Lhs: []ast.Expr{id(value)}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{x.X}},
		&ast.AssignStmt{Lhs: []ast.Expr{id(number)}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{&ast.BasicLit{Kind: token.INT, ValuePos: pos, Value: "0"}}},
	)
	var tests, tail *ast.IfStmt
	add := func(t *ast.IfStmt) {
		if tests == nil {
			tests = t
		} else {
			tail.Else = t
		}
		tail = t
	}
	cases := &ast.SwitchStmt{Switch: pos, Tag: id(number), Body: &ast.BlockStmt{Lbrace: s.Body.Lbrace, Rbrace: s.Body.Rbrace}}
	for i, c := range s.Body.List {
		clause := c.(*ast.CaseClause)
		lit := &ast.BasicLit{Kind: token.INT, ValuePos: clause.Pos(), Value: strconv.Itoa(i + 1)}
		set := &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{&ast.AssignStmt{Lhs: []ast.Expr{id(number)}, TokPos: pos, Tok: token.ASSIGN, Rhs: []ast.Expr{lit}}}, Rbrace: pos}
		var bound ast.Expr = id(value)
		for _, t := range clause.List {
			if tv := l.u.info.Types[t]; tv.IsNil() {
				add(&ast.IfStmt{If: pos, Cond: &ast.BinaryExpr{X: id(value), OpPos: pos, Op: token.EQL, Y: id("nil")}, Body: set})
				continue
			}
			add(&ast.IfStmt{If: pos, Cond: l.is(pos, value, t), Body: set})
			if len(clause.List) == 1 {
				bound = &ast.TypeAssertExpr{X: id(value), Lparen: pos, Type: t, Rparen: pos}
			}
		}
		body := clause.Body
		if symbol != "" && symbol != "_" && uses(body, symbol) {
			body = append([]ast.Stmt{&ast.AssignStmt{Lhs: []ast.Expr{id(symbol)}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{bound}}}, body...)
		}
		lowered := &ast.CaseClause{Case: clause.Case, Colon: clause.Colon, Body: body}
		if clause.List != nil {
			lowered.List = []ast.Expr{lit}
		}
		cases.Body.List = append(cases.Body.List, lowered)
	}
	if tests != nil {
		block.List = append(block.List, tests)
	}
	block.List = append(block.List, cases)
	return block
}

// is is an expression for whether a variable holds a type.
func (l *lowering) is(pos token.Pos, value string, t ast.Expr) ast.Expr {
	id := func(name string) *ast.Ident { return &ast.Ident{Name: name, NamePos: pos} }
	ok := l.temp(pos).Name
	lit := &ast.FuncLit{
		Type: &ast.FuncType{
			Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos},
			Results: &ast.FieldList{Opening: pos, List: []*ast.Field{{Type: id("bool")}}, Closing: pos},
		},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{
			&ast.AssignStmt{Lhs: []ast.Expr{id("_"), id(ok)}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{&ast.TypeAssertExpr{X: id(value), Lparen: pos, Type: t, Rparen: pos}}},
			&ast.ReturnStmt{Return: pos, Results: []ast.Expr{id(ok)}},
		}, Rbrace: pos},
	}
	call := &ast.CallExpr{Fun: lit, Lparen: pos, Rparen: pos}
	l.synthetic[call] = true
	return &ast.BinaryExpr{
		X:     &ast.BinaryExpr{X: id(value), OpPos: pos, Op: token.NEQ, Y: id("nil")},
		OpPos: pos, Op: token.LAND, Y: call,
	}
}

// uses reports whether statements mention a name.
func uses(list []ast.Stmt, name string) bool {
	for _, s := range list {
		if mentions(s)[name] {
			return true
		}
	}
	return false
}

// assertedInterface returns the assertion if a statement is v, ok := x.(I) with an interface I.
func (l *lowering) assertedInterface(s ast.Stmt) (*ast.AssignStmt, *ast.TypeAssertExpr) {
	a, ok := s.(*ast.AssignStmt)
	if !ok || len(a.Lhs) != 2 || len(a.Rhs) != 1 {
		return nil, nil
	}
	x, ok := ast.Unparen(a.Rhs[0]).(*ast.TypeAssertExpr)
	if !ok || x.Type == nil {
		return nil, nil
	}
	if t := l.u.info.TypeOf(x.Type); t == nil || !types.IsInterface(t) {
		return nil, nil
	}
	return a, x
}

// guarded returns statements that do an assertion to an interface only if there is something to assert, and changes the
// statement itself to take what they found.
func (l *lowering) guarded(a *ast.AssignStmt, x *ast.TypeAssertExpr) []ast.Stmt {
	pos := a.Pos()
	id := func(name string) *ast.Ident { return &ast.Ident{Name: name, NamePos: pos} }
	from, value, ok := l.temp(pos).Name, l.temp(pos).Name, l.temp(pos).Name
	local := func(name string, t ast.Expr) ast.Stmt { return &ast.DeclStmt{Decl: varDecl(pos, name, t)} }
	a.Rhs = []ast.Expr{id(value), id(ok)}
	return []ast.Stmt{
		&ast.AssignStmt{Lhs: []ast.Expr{id(from)}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{x.X}},
		local(value, x.Type), local(ok, id("bool")),
		&ast.IfStmt{
			If: pos, Cond: &ast.BinaryExpr{X: id(from), OpPos: pos, Op: token.NEQ, Y: id("nil")},
			Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{&ast.AssignStmt{
				Lhs: []ast.Expr{id(value), id(ok)}, TokPos: pos, Tok: token.ASSIGN,
				Rhs: []ast.Expr{&ast.TypeAssertExpr{X: id(from), Lparen: pos, Type: x.Type, Rparen: pos}},
			}}, Rbrace: pos},
		},
	}
}

// assertion guards an assertion that stands in a list of statements.
func (l *lowering) assertion(c *astutil.Cursor, s *ast.AssignStmt) {
	if a, x := l.assertedInterface(s); a != nil && c.Index() >= 0 {
		for _, g := range l.guarded(a, x) {
			c.InsertBefore(g)
		}
	}
}

// ifAssertion guards an assertion in the head of an if, which becomes a block.
func (l *lowering) ifAssertion(c *astutil.Cursor, s *ast.IfStmt) {
	a, x := l.assertedInterface(s.Init)
	if a == nil {
		return
	}
	block := &ast.BlockStmt{Lbrace: s.Pos(), List: l.guarded(a, x), Rbrace: s.End()}
	block.List = append(block.List, s)
	l.hoisted[block] = true
	c.Replace(block)
}
