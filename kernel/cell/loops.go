package cell

import (
	"go/ast"
	"go/constant"
	"go/token"
	"go/types"

	"golang.org/x/tools/go/ast/astutil"
)

// This file gives loops the meaning that they have since Go 1.22: each turn has its own variables, and an integer can be
// ranged over. The interpreter shares one variable among all turns. Variables that no function literal captures and whose
// address is not taken need no copy.

// labelOf returns the label of the statement at hand.
func labelOf(c *astutil.Cursor) string {
	if s, ok := c.Parent().(*ast.LabeledStmt); ok {
		return s.Label.Name
	}
	return ""
}

// escapes returns which of the variables a loop body captures or takes the address of, and which it assigns.
func (l *lowering) escapes(vars map[types.Object]bool, nodes ...ast.Node) (captured, assigned map[types.Object]bool) {
	captured, assigned = map[types.Object]bool{}, map[types.Object]bool{}
	root := func(x ast.Expr) types.Object {
		for {
			switch y := ast.Unparen(x).(type) {
			case *ast.SelectorExpr:
				x = y.X
			case *ast.IndexExpr:
				x = y.X
			case *ast.SliceExpr:
				x = y.X
			case *ast.Ident:
				if o := l.u.info.Uses[y]; vars[o] {
					return o
				}
				return nil
			default:
				return nil
			}
		}
	}
	for _, n := range nodes {
		if n == nil {
			continue
		}
		ast.Inspect(n, func(n ast.Node) bool {
			switch n := n.(type) {
			case *ast.FuncLit:
				ast.Inspect(n, func(n ast.Node) bool {
					if id, ok := n.(*ast.Ident); ok && vars[l.u.info.Uses[id]] {
						captured[l.u.info.Uses[id]] = true
					}
					return true
				})
			case *ast.UnaryExpr:
				if o := root(n.X); n.Op == token.AND && o != nil {
					captured[o], assigned[o] = true, true
				}
			case *ast.SliceExpr: // of an array
				if o := root(n.X); o != nil {
					if _, array := o.Type().Underlying().(*types.Array); array {
						captured[o], assigned[o] = true, true
					}
				}
			case *ast.SelectorExpr:
				if s := l.u.info.Selections[n]; s != nil && s.Kind() == types.MethodVal {
					if _, ptr := s.Obj().(*types.Func).Signature().Recv().Type().(*types.Pointer); ptr {
						if o := root(n.X); o != nil {
							captured[o], assigned[o] = true, true
						}
					}
				}
			case *ast.AssignStmt:
				for _, x := range n.Lhs {
					if o := root(x); o != nil {
						assigned[o] = true
					}
				}
			case *ast.IncDecStmt:
				if o := root(n.X); o != nil {
					assigned[o] = true
				}
			case *ast.RangeStmt:
				for _, x := range []ast.Expr{n.Key, n.Value} {
					if o := root(x); x != nil && o != nil {
						assigned[o] = true
					}
				}
			}
			return true
		})
	}
	return captured, assigned
}

// forStmt gives each turn of a loop its own variables where that can be told:
//
//	for i := 0; i < n; i++ { ... }
//
// becomes, where the body captures i,
//
//	for t := 0; t < n; t++ { i := t; ...; t = i }
//
// with t = i also before every continue, and only if the body assigns i.
func (l *lowering) forStmt(n *ast.ForStmt, label string) {
	init, ok := n.Init.(*ast.AssignStmt)
	if !ok || init.Tok != token.DEFINE {
		return
	}
	vars := map[types.Object]bool{}
	for _, x := range init.Lhs {
		if id, ok := x.(*ast.Ident); ok && l.u.info.Defs[id] != nil {
			vars[l.u.info.Defs[id]] = true
		}
	}
	captured, assigned := l.escapes(vars, n.Body)
	pos := n.Body.Lbrace
	var copies, back []ast.Stmt
	for _, x := range init.Lhs {
		id, ok := x.(*ast.Ident)
		if !ok || !captured[l.u.info.Defs[id]] {
			continue
		}
		o, name, t := l.u.info.Defs[id], id.Name, l.temp(id.Pos()).Name
		for _, part := range []ast.Node{n.Init, n.Cond, n.Post} {
			if part == nil {
				continue
			}
			ast.Inspect(part, func(n ast.Node) bool {
				if id, ok := n.(*ast.Ident); ok && (l.u.info.Defs[id] == o || l.u.info.Uses[id] == o) {
					id.Name = t
				}
				return true
			})
		}
		copies = append(copies, assign(pos, token.DEFINE, name, t))
		if assigned[o] {
			back = append(back, assign(pos, token.ASSIGN, t, name))
		}
	}
	if len(back) > 0 {
		copyBack(n.Body, label, back)
		n.Body.List = append(n.Body.List, back...)
	}
	n.Body.List = append(copies, n.Body.List...)
}

func assign(pos token.Pos, tok token.Token, to, from string) ast.Stmt {
	return &ast.AssignStmt{
		Lhs: []ast.Expr{&ast.Ident{Name: to, NamePos: pos}}, TokPos: pos, Tok: tok,
		Rhs: []ast.Expr{&ast.Ident{Name: from, NamePos: pos}},
	}
}

// copyBack puts the statements before every continue of a loop.
func copyBack(body *ast.BlockStmt, label string, back []ast.Stmt) {
	depth := 0
	astutil.Apply(body, func(c *astutil.Cursor) bool {
		switch n := c.Node().(type) {
		case *ast.FuncLit:
			return false
		case *ast.ForStmt, *ast.RangeStmt:
			depth++
		case *ast.BranchStmt:
			if n.Tok == token.CONTINUE && (n.Label == nil && depth == 0 || n.Label != nil && n.Label.Name == label) {
				c.Replace(&ast.BlockStmt{Lbrace: n.Pos(), List: append(append([]ast.Stmt{}, back...), n), Rbrace: n.End()})
				return false
			}
		}
		return true
	}, func(c *astutil.Cursor) bool {
		switch c.Node().(type) {
		case *ast.ForStmt, *ast.RangeStmt:
			depth--
		}
		return true
	})
}

// rangeStmt gives each turn its own variables, and turns a range over an integer into a counting loop, and one over a function
// into a call, which it returns.
func (l *lowering) rangeStmt(n *ast.RangeStmt, label string) ast.Stmt {
	t := l.u.info.TypeOf(n.X)
	switch u := t.Underlying().(type) {
	case *types.Basic:
		if u.Info()&types.IsInteger != 0 {
			return l.rangeInt(n, t)
		}
		return l.rangeString(n)
	case *types.Signature:
		return l.rangeFunc(n, label)
	case *types.Pointer:
		// The interpreter takes the wrong type for the elements of a pointer's array.
		n.X = &ast.SliceExpr{X: n.X, Lbrack: n.X.End(), Rbrack: n.X.End()}
	}
	if n.Tok == token.ASSIGN {
		l.rangeAssign(n)
	}
	if n.Tok == token.DEFINE {
		l.copyCaptured(n)
	}
	return nil
}

// copyCaptured gives each turn of a range its own copies of the variables that its body captures.
func (l *lowering) copyCaptured(n *ast.RangeStmt) {
	vars := map[types.Object]bool{}
	for _, x := range []ast.Expr{n.Key, n.Value} {
		if id, ok := x.(*ast.Ident); ok && l.u.info.Defs[id] != nil {
			vars[l.u.info.Defs[id]] = true
		}
	}
	captured, _ := l.escapes(vars, n.Body)
	var copies []ast.Stmt
	for _, x := range []ast.Expr{n.Key, n.Value} {
		id, ok := x.(*ast.Ident)
		if !ok || !captured[l.u.info.Defs[id]] {
			continue
		}
		name := id.Name
		id.Name = l.temp(id.Pos()).Name
		copies = append(copies, assign(n.Body.Lbrace, token.DEFINE, name, id.Name))
	}
	n.Body.List = append(copies, n.Body.List...)
}

// rangeString ranges over a string's code points as a slice: the interpreter takes each byte that is no UTF-8 for three.
func (l *lowering) rangeString(n *ast.RangeStmt) ast.Stmt {
	if n.Tok == token.ASSIGN {
		l.rangeAssign(n)
	}
	pos := n.Pos()
	text := l.temp(pos)
	again := func() ast.Expr { return &ast.Ident{Name: text.Name, NamePos: pos} }
	block := &ast.BlockStmt{Lbrace: pos, Rbrace: n.End(), List: []ast.Stmt{
		&ast.AssignStmt{Lhs: []ast.Expr{text}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{
			&ast.CallExpr{Fun: &ast.Ident{Name: "string", NamePos: pos}, Lparen: pos, Args: []ast.Expr{n.X}, Rparen: pos},
		}},
	}}
	if id, ok := n.Key.(*ast.Ident); ok && id.Name != "_" {
		starts, at := l.temp(pos), l.temp(pos)
		block.List = append(block.List, &ast.AssignStmt{Lhs: []ast.Expr{starts}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{l.hook("Starts", pos, again())}})
		n.Body.List = append([]ast.Stmt{&ast.AssignStmt{Lhs: []ast.Expr{id}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{
			&ast.IndexExpr{X: &ast.Ident{Name: starts.Name, NamePos: pos}, Lbrack: pos, Index: &ast.Ident{Name: at.Name, NamePos: pos}, Rbrack: pos},
		}}}, n.Body.List...)
		n.Key = at
	}
	n.X = l.hook("Runes", pos, again())
	if n.Tok == token.DEFINE {
		l.copyCaptured(n)
	}
	block.List = append(block.List, n)
	l.hoisted[block] = true
	return block
}

// starts returns where the code points of a string start.
func starts(s string) []int {
	list := make([]int, 0, len(s))
	for i := range s {
		list = append(list, i)
	}
	return list
}

// rangeAssign makes a range that assigns to variables, which the interpreter forgets to do, one that declares some.
func (l *lowering) rangeAssign(n *ast.RangeStmt) {
	pos := n.Pos()
	n.Tok = token.DEFINE
	as := &ast.AssignStmt{TokPos: pos, Tok: token.ASSIGN}
	for _, x := range []*ast.Expr{&n.Key, &n.Value} {
		if id, ok := (*x).(*ast.Ident); *x == nil || ok && id.Name == "_" {
			continue
		}
		t := l.temp(pos)
		as.Lhs, as.Rhs = append(as.Lhs, *x), append(as.Rhs, &ast.Ident{Name: t.Name, NamePos: pos})
		*x = t
	}
	if len(as.Lhs) == 0 {
		n.Key, n.Value, n.Tok = nil, nil, token.ILLEGAL
		return
	}
	n.Body.List = append([]ast.Stmt{as}, n.Body.List...)
}

func (l *lowering) rangeInt(n *ast.RangeStmt, t types.Type) ast.Stmt {
	pos := n.Pos()
	if b, ok := t.(*types.Basic); ok && b.Info()&types.IsUntyped != 0 {
		t = types.Default(t)
	}
	counter, limit := l.temp(pos).Name, l.temp(pos).Name
	id := func(name string) *ast.Ident { return &ast.Ident{Name: name, NamePos: pos} }
	body := n.Body
	if key, ok := n.Key.(*ast.Ident); n.Key != nil && (!ok || key.Name != "_") {
		body.List = append([]ast.Stmt{&ast.AssignStmt{Lhs: []ast.Expr{n.Key}, TokPos: pos, Tok: n.Tok, Rhs: []ast.Expr{id(counter)}}}, body.List...)
	}
	return &ast.ForStmt{
		For: pos,
		Init: &ast.AssignStmt{
			Lhs: []ast.Expr{id(counter), id(limit)}, TokPos: pos, Tok: token.DEFINE,
			Rhs: []ast.Expr{l.constant(t, constant.MakeInt64(0), id("0")), n.X},
		},
		Cond: &ast.BinaryExpr{X: id(counter), OpPos: pos, Op: token.LSS, Y: id(limit)},
		Post: &ast.IncDecStmt{X: id(counter), TokPos: pos, Tok: token.INC},
		Body: body,
	}
}

// capture gives a function literal a frame of its own where the interpreter needs one to be right: in loops, since it hands
// literals to compiled code with the variables of the last turn, and in functions that defer, since a closure that is called
// while its frame runs its deferred calls waits for itself for ever.
func (l *lowering) capture(c *astutil.Cursor, n *ast.FuncLit) {
	defers := l.defers()
	if !l.inLoop() && !defers {
		return
	}
	switch c.Parent().(type) {
	case *ast.CallExpr:
		if c.Name() != "Args" {
			return // called at once, deferred, or started as a goroutine
		}
	case *ast.KeyValueExpr, *ast.CompositeLit:
	default:
		if !defers {
			return
		}
	}
	l.replace(c, l.ownFrame(n))
}

// defers reports whether the function around the node at hand defers calls.
func (l *lowering) defers() bool {
	body := l.funcBody
	for i := len(l.nest) - 1; i >= 0; i-- {
		if lit, ok := l.nest[i].(*ast.FuncLit); ok {
			body = lit.Body
			break
		}
	}
	found := false
	ast.Inspect(body, func(n ast.Node) bool {
		switch n.(type) {
		case *ast.FuncLit:
			return false
		case *ast.DeferStmt:
			found = true
		}
		return !found
	})
	return found
}

// ownFrame returns an expression that makes the literal in a frame of its own.
func (l *lowering) ownFrame(n *ast.FuncLit) ast.Expr {
	pos := n.Pos()
	f := l.temp(pos)
	outer := &ast.FuncLit{
		Type: &ast.FuncType{
			Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos},
			Results: &ast.FieldList{Opening: pos, List: []*ast.Field{{Type: n.Type}}, Closing: pos},
		},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{
			&ast.AssignStmt{Lhs: []ast.Expr{f}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{n}},
			&ast.ReturnStmt{Return: pos, Results: []ast.Expr{&ast.Ident{Name: f.Name, NamePos: pos}}},
		}, Rbrace: n.End()},
	}
	call := &ast.CallExpr{Fun: outer, Lparen: pos, Rparen: pos}
	l.synthetic[call] = true
	return call
}

// fillClauses puts a statement into empty clauses of a switch: the interpreter cannot fall through into an empty one.
func fillClauses(s *ast.SwitchStmt) {
	for _, c := range s.Body.List {
		if c, ok := c.(*ast.CaseClause); ok && len(c.Body) == 0 {
			pos := c.Colon
			c.Body = []ast.Stmt{&ast.AssignStmt{
				Lhs: []ast.Expr{&ast.Ident{Name: "_", NamePos: pos}}, TokPos: pos, Tok: token.ASSIGN, Rhs: []ast.Expr{number(pos, token.INT, "0")},
			}}
		}
	}
}

// label moves the label of a statement that became a block to the statement in it that break means.
func (l *lowering) label(c *astutil.Cursor, n *ast.LabeledStmt) {
	block, ok := n.Stmt.(*ast.BlockStmt)
	if ok && l.ranged[block] {
		c.Replace(block) // nothing refers to it any more
		return
	}
	if !ok || !l.hoisted[block] {
		return
	}
	last := len(block.List) - 1
	n.Stmt = block.List[last]
	block.List[last] = n
	c.Replace(block)
}
