package cell

import (
	"fmt"
	"go/ast"
	"go/token"
	"go/types"
	"reflect"
	"strconv"
	"strings"

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
			add(&ast.IfStmt{If: pos, Cond: l.is(pos, value, l.u.info.TypeOf(x.X), t), Body: set})
			if len(clause.List) == 1 {
				bound = &ast.TypeAssertExpr{X: id(value), Lparen: pos, Type: t, Rparen: pos}
				if to := l.u.info.TypeOf(t); to != nil && (types.IsInterface(to) || l.confusable(to)) {
					bound = &ast.CallExpr{Fun: l.assertion(pos, t, l.u.info.TypeOf(x.X), to, false), Lparen: pos, Args: []ast.Expr{id(value)}, Rparen: pos}
				}
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
func (l *lowering) is(pos token.Pos, value string, from types.Type, t ast.Expr) ast.Expr {
	id := func(name string) *ast.Ident { return &ast.Ident{Name: name, NamePos: pos} }
	if l.impossible(from, l.u.info.TypeOf(t)) {
		return id("false")
	}
	ok := l.temp(pos).Name
	var test ast.Expr = &ast.TypeAssertExpr{X: id(value), Lparen: pos, Type: t, Rparen: pos}
	if to := l.u.info.TypeOf(t); to != nil && (types.IsInterface(to) || l.confusable(to)) {
		test = &ast.CallExpr{Fun: l.assertion(pos, t, from, to, true), Lparen: pos, Args: []ast.Expr{id(value)}, Rparen: pos}
	}
	lit := &ast.FuncLit{
		Type: &ast.FuncType{
			Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos},
			Results: &ast.FieldList{Opening: pos, List: []*ast.Field{{Type: id("bool")}}, Closing: pos},
		},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{
			&ast.AssignStmt{Lhs: []ast.Expr{id("_"), id(ok)}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{test}},
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

// assert turns an assertion to an interface type, or to a paired one, into a call of a function literal: with two results
// if it is the right side of v, ok := x.(I), and else with one, which panics. The interpreter panics when nil is asserted
// to be an interface, and cannot find the methods of a cell's value in an any, so the literal asks for each type of the
// cells that has them:
//
//	func(e any) (I, bool) {
//		if e == nil { return nil, false }
//		if c, ok := e.(T); ok { return c, true }
//		v, ok := e.(I)
//		return v, ok
//	}(x)
func (l *lowering) assert(c *astutil.Cursor, x *ast.TypeAssertExpr) {
	if x.Type == nil {
		return // the head of a type switch
	}
	to := l.u.info.TypeOf(x.Type)
	from := l.u.info.TypeOf(x.X)
	if to == nil || !types.IsInterface(to) && !l.confusable(to) && !l.impossible(from, to) {
		return
	}
	two := false
	if a, ok := c.Parent().(*ast.AssignStmt); ok {
		two = len(a.Lhs) == 2 && len(a.Rhs) == 1
	}
	if from == nil {
		from = types.NewInterfaceType(nil, nil)
	}
	if l.impossible(from, to) {
		from = nil
	}
	call := &ast.CallExpr{Fun: l.assertion(x.Pos(), x.Type, from, to, two), Lparen: x.Pos(), Args: []ast.Expr{x.X}, Rparen: x.End()}
	l.replace(c, call)
}

// assertion is the literal of assert.
func (l *lowering) assertion(pos token.Pos, typ ast.Expr, from, to types.Type, two bool) *ast.FuncLit {
	id := func(name string) *ast.Ident { return &ast.Ident{Name: name, NamePos: pos} }
	e, v, ok := l.temp(pos).Name, l.temp(pos).Name, l.temp(pos).Name
	found := func(x ast.Expr) []ast.Stmt {
		r := &ast.ReturnStmt{Return: pos, Results: []ast.Expr{x}}
		if two {
			r.Results = append(r.Results, id("true"))
		}
		return []ast.Stmt{r}
	}
	// try is: if v, ok := e.(t); ok { return v, true }
	try := func(t ast.Expr) ast.Stmt {
		return &ast.IfStmt{
			If: pos, Init: &ast.AssignStmt{Lhs: []ast.Expr{id(v), id(ok)}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{&ast.TypeAssertExpr{X: id(e), Lparen: pos, Type: t, Rparen: pos}}},
			Cond: id(ok), Body: &ast.BlockStmt{Lbrace: pos, List: found(id(v)), Rbrace: pos},
		}
	}
	inside := &ast.BlockStmt{Lbrace: pos, Rbrace: pos}
	if from == nil {
		// impossible: nothing to ask for
	} else if isAny(from) {
		candidates := l.implementers(to)
		if !types.IsInterface(to) {
			candidates = []types.Type{to}
		}
		for _, t := range candidates {
			if x := l.typeExpr(t, pos); x != nil {
				number := &ast.BasicLit{Kind: token.INT, ValuePos: pos, Value: strconv.Itoa(l.in.typeID(t))}
				inside.List = append(inside.List, &ast.IfStmt{
					If: pos, Cond: l.hook("Holds", pos, number, id(e)),
					Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{try(x)}, Rbrace: pos},
				})
			}
		}
		if l.ofCompiled(to) {
			inside.List = append(inside.List, try(typ))
		}
		from = nil // an any is the parameter
	} else {
		inside.List = append(inside.List, try(typ))
	}
	if i, ok := to.Underlying().(*types.Interface); ok && !l.ofCompiled(to) {
		inside.List = append(inside.List, &ast.ExprStmt{X: l.hook("Refuse", pos, quoted(pos, types.TypeString(to, brief)), quoted(pos, methodNames(i)), id(e))})
	}
	body := &ast.BlockStmt{Lbrace: pos, Rbrace: pos, List: []ast.Stmt{
		&ast.IfStmt{If: pos, Cond: &ast.BinaryExpr{X: id(e), OpPos: pos, Op: token.NEQ, Y: id("nil")}, Body: inside},
	}}
	results := []*ast.Field{{Type: typ}}
	if two {
		results = append(results, &ast.Field{Type: id("bool")})
		body.List = append(body.List, &ast.ReturnStmt{Return: pos, Results: []ast.Expr{l.zero(to, pos), id("false")}})
	} else {
		text := quoted(pos, types.TypeString(to, brief))
		body.List = append(body.List,
			&ast.ExprStmt{X: l.hook("NotA", pos, text, id(e))},
			&ast.ReturnStmt{Return: pos, Results: []ast.Expr{l.zero(to, pos)}})
	}
	var param ast.Expr = id("any")
	if from != nil {
		if t := l.typeExpr(from, pos); t != nil {
			param = t
		}
	}
	return &ast.FuncLit{
		Type: &ast.FuncType{
			Func: pos, Params: &ast.FieldList{Opening: pos, List: []*ast.Field{{Names: []*ast.Ident{id(e)}, Type: param}}, Closing: pos},
			Results: &ast.FieldList{Opening: pos, List: results, Closing: pos},
		},
		Body: body,
	}
}

func quoted(pos token.Pos, s string) ast.Expr {
	return &ast.BasicLit{Kind: token.STRING, ValuePos: pos, Value: strconv.Quote(s)}
}

func methodNames(i *types.Interface) string {
	var names []string
	for m := range i.Methods() {
		names = append(names, m.Name())
	}
	return strings.Join(names, " ")
}

// refuse stops an assertion of a compiled value to an interface that a cell declares, if it should succeed: the interpreter
// would say no.
func refuse(to, methods string, v any) {
	t := reflect.TypeOf(v)
	named := t
	if t.Kind() == reflect.Pointer {
		named = t.Elem()
	}
	if named.PkgPath() == "" || strings.HasPrefix(named.PkgPath(), "github.com/traefik/yaegi") {
		return // a cell's value, whose type was asked for
	}
	for _, m := range strings.Fields(methods) {
		if _, ok := t.MethodByName(m); !ok {
			return
		}
	}
	panic(fmt.Errorf("cells cannot assert a %s to their own interface %s; assert it to its type, or to an interface of a package", t, to))
}

// impossible reports whether no value of an interface can be of a type, as happens in instances of generic code; the
// interpreter, like the language elsewhere, refuses to compile the question.
func (l *lowering) impossible(from, to types.Type) bool {
	if from == nil || to == nil || types.IsInterface(to) {
		return false
	}
	i, ok := from.Underlying().(*types.Interface)
	return ok && !types.AssertableTo(i, to)
}

// confusable reports whether an assertion to a type must look at the pair: to a paired one, and to a type that has the same
// underlying type as one.
func (l *lowering) confusable(t types.Type) bool {
	if paired(t) {
		return true
	}
	same := func(o types.Object) bool {
		n, ok := o.(*types.TypeName)
		return ok && paired(n.Type()) && types.Identical(n.Type().Underlying(), t.Underlying())
	}
	for _, e := range l.in.names {
		if same(e.obj) {
			return true
		}
	}
	for _, o := range l.u.objects {
		if same(o) {
			return true
		}
	}
	return false
}

// ofCompiled reports whether an interface is one of a compiled package, which compiled values in an any can have.
func (l *lowering) ofCompiled(t types.Type) bool {
	n, ok := types.Unalias(t).(*types.Named)
	return ok && (n.Obj().Pkg() == nil || n.Obj().Pkg().Path() != "main")
}

// implementers returns the cells' types that implement an interface: T if its values do, else *T.
func (l *lowering) implementers(t types.Type) []types.Type {
	i, ok := t.Underlying().(*types.Interface)
	if !ok || i.Empty() {
		return nil
	}
	objects := map[string]types.Object{}
	for name, e := range l.in.names {
		objects[name] = e.obj
	}
	for name, o := range l.u.objects {
		objects[name] = o
	}
	var candidates, found []types.Type
	for _, name := range sorted(objects) {
		o, ok := objects[name].(*types.TypeName)
		if !ok || o.IsAlias() || types.IsInterface(o.Type()) {
			continue
		}
		if n, ok := o.Type().(*types.Named); ok && n.TypeParams().Len() == 0 {
			candidates = append(candidates, n)
		}
		for _, table := range []map[types.Object][]*instance{l.in.instances, l.p.instances} {
			for _, inst := range table[o] {
				candidates = append(candidates, inst.typ)
			}
		}
	}
	for _, c := range candidates {
		if types.Implements(c, i) {
			found = append(found, c)
		}
		if p := types.NewPointer(c); types.Implements(p, i) {
			found = append(found, p)
		}
	}
	return found
}

// notA is the panic of a failed assertion.
func notA(to string, v any) {
	if v == nil {
		panic(fault{"interface conversion: interface is nil, not " + to})
	}
	panic(fault{fmt.Sprintf("interface conversion: %s is not %s: missing method", reflect.TypeOf(v), to)})
}

// equality compares interface values by what is in them; the interpreter compares its own wrappings.
func (l *lowering) equality(c *astutil.Cursor, x *ast.BinaryExpr) {
	if x.Op != token.EQL && x.Op != token.NEQ {
		return
	}
	wrapped := false
	for _, y := range []ast.Expr{x.X, x.Y} {
		tv := l.u.info.Types[y]
		if tv.IsNil() || tv.Type == nil {
			return
		}
		wrapped = wrapped || types.IsInterface(tv.Type)
	}
	if !wrapped {
		return
	}
	var y ast.Expr = l.hook("Equal", x.Pos(), x.X, x.Y)
	if x.Op == token.NEQ {
		y = &ast.UnaryExpr{OpPos: x.Pos(), Op: token.NOT, X: y}
	}
	l.replace(c, y)
}

// equal is == of two interface values.
func (in *Interpreter) equal(x, y any) bool {
	a, b := in.bare(x), in.bare(y)
	if !a.v.IsValid() || !b.v.IsValid() {
		return !a.v.IsValid() && !b.v.IsValid()
	}
	if a.v.Type() != b.v.Type() || a.t != nil && b.t != nil && !types.Identical(a.t, b.t) {
		return false
	}
	if !a.v.Comparable() {
		panic(fault{"comparing uncomparable type " + a.typeName()})
	}
	return a.v.Equal(b.v)
}

// bare takes a value out of all that the interpreter has wrapped it in.
func (in *Interpreter) bare(x any) *shown {
	s := &shown{in: in, v: reflect.ValueOf(x)}
	if err, ok := x.(error); ok {
		if v := in.inside(err); v.IsValid() {
			s.v = v
		}
	}
	s.resolve()
	return s
}
