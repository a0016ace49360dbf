package cell

import (
	"go/ast"
	"go/token"
	"go/types"
	"slices"

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
func (l *lowering) parallel(c *astutil.Cursor, s *ast.AssignStmt) {
	l.nameBlank(s)
	if len(s.Rhs) == 1 && s.Tok == token.ASSIGN {
		l.several(c, s)
		return
	}
	if len(s.Lhs) < 2 || len(s.Lhs) != len(s.Rhs) || s.Tok != token.ASSIGN && s.Tok != token.DEFINE {
		return
	}
	if s.Tok == token.DEFINE && l.allNew(s) && !l.callsIn(s.Rhs) || s.Tok == token.DEFINE && c.Index() < 0 {
		return // new variables cannot be seen on the right; of heads, head takes care
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
		return
	}
	for i := range s.Lhs {
		list = append(list, &ast.AssignStmt{Lhs: s.Lhs[i : i+1], TokPos: s.TokPos, Tok: token.ASSIGN, Rhs: s.Rhs[i : i+1]})
	}
	if c.Index() >= 0 {
		l.replaceInList(c, list)
	} else {
		l.extract(c, s, list)
	}
}

// nameBlank names the value that _, ok := <-c throws away: the interpreter would put it into ok.
func (l *lowering) nameBlank(s *ast.AssignStmt) {
	if len(s.Lhs) != 2 || len(s.Rhs) != 1 || l.comms[s] {
		return
	}
	if other, ok := s.Lhs[1].(*ast.Ident); ok && other.Name == "_" {
		return
	}
	id, blank := s.Lhs[0].(*ast.Ident)
	u, receive := ast.Unparen(s.Rhs[0]).(*ast.UnaryExpr)
	if blank && id.Name == "_" && receive && u.Op == token.ARROW {
		s.Lhs[0] = l.temp(id.Pos())
	}
}

// several gives the values of one expression to targets by way of variables: if there are several and not all are plain
// variables, and if it is a call of a cell's function, which would write its results where the targets are while it runs.
func (l *lowering) several(c *astutil.Cursor, s *ast.AssignStmt) {
	elements := slices.ContainsFunc(s.Lhs, func(x ast.Expr) bool { _, ok := x.(*ast.Ident); return !ok })
	unnamed := slices.ContainsFunc(s.Lhs, func(x ast.Expr) bool { id, ok := x.(*ast.Ident); return ok && l.made(id) })
	if !(len(s.Lhs) > 1 && (elements || unnamed)) && !l.callsCell(s.Rhs[0]) {
		return
	}
	var list, after []ast.Stmt
	for i, x := range s.Lhs {
		if id, ok := x.(*ast.Ident); ok && (id.Name == "_" || l.made(id)) {
			continue
		}
		x = l.target(&list, x)
		t := l.temp(x.Pos())
		s.Lhs[i] = t
		after = append(after, &ast.AssignStmt{Lhs: []ast.Expr{x}, TokPos: s.TokPos, Tok: token.ASSIGN, Rhs: []ast.Expr{&ast.Ident{Name: t.Name, NamePos: x.Pos()}}})
	}
	if len(after) == 0 {
		return
	}
	s.Tok = token.DEFINE
	list = append(append(list, s), after...)
	if c.Index() >= 0 {
		l.replaceInList(c, list)
	} else {
		l.extract(c, s, list)
	}
}

// callsCell reports whether an expression is a call of a function that is, or may be, one of the cells.
func (l *lowering) callsCell(x ast.Expr) bool {
	call, ok := ast.Unparen(x).(*ast.CallExpr)
	if !ok || l.synthetic[call] {
		return false
	}
	if tv := l.u.info.Types[call.Fun]; tv.IsType() || tv.IsBuiltin() {
		return false
	}
	if s, ok := ast.Unparen(call.Fun).(*ast.SelectorExpr); ok {
		if fn, ok := l.u.info.Uses[s.Sel].(*types.Func); ok && fn.Pkg() != nil && fn.Pkg().Path() != "main" {
			return false
		}
	}
	return true
}

// callsIn reports whether there is a call in a list of expressions.
func (l *lowering) callsIn(list []ast.Expr) bool {
	found := false
	for _, x := range list {
		ast.Inspect(x, func(n ast.Node) bool {
			_, call := n.(*ast.CallExpr)
			found = found || call
			_, lit := n.(*ast.FuncLit)
			return !lit
		})
	}
	return found
}

// head evaluates the values of v, w := f(), g() in the head of an if or for before the statement, which becomes a
// block: the interpreter loses the results of calls there.
func (l *lowering) head(c *astutil.Cursor, s ast.Stmt, init ast.Stmt) {
	a, ok := init.(*ast.AssignStmt)
	if !ok || a.Tok != token.DEFINE || len(a.Lhs) < 2 || len(a.Lhs) != len(a.Rhs) || !l.callsIn(a.Rhs) {
		return
	}
	block := &ast.BlockStmt{Lbrace: s.Pos(), Rbrace: s.End()}
	for i, x := range a.Rhs {
		a.Rhs[i] = l.keep(&block.List, x)
	}
	block.List = append(block.List, s)
	l.hoisted[block] = true
	c.Replace(block)
}

// switchHead puts what a switch declares before it, both into a block: the interpreter loses the value that is switched on.
func (l *lowering) switchHead(c *astutil.Cursor, n *ast.SwitchStmt) {
	if n.Init == nil {
		return
	}
	block := &ast.BlockStmt{Lbrace: n.Pos(), Rbrace: n.End()}
	if a, ok := n.Init.(*ast.AssignStmt); ok && a.Tok == token.DEFINE && len(a.Lhs) > 1 && len(a.Lhs) == len(a.Rhs) {
		for i, x := range a.Rhs {
			a.Rhs[i] = l.keep(&block.List, x)
		}
	}
	block.List = append(block.List, n.Init, n)
	n.Init = nil
	l.hoisted[block] = true
	c.Replace(block)
}

// zeroResults sets a function's named results to zero where it starts: the interpreter leaves in them what the variable held
// that the result is assigned to.
func (l *lowering) zeroResults(t *ast.FuncType, body *ast.BlockStmt) {
	nameParams(t)
	if t.Results == nil || body == nil {
		return
	}
	var list []ast.Stmt
	for _, f := range t.Results.List {
		for _, id := range f.Names {
			o := l.u.info.Defs[id]
			if o == nil || id.Name == "_" {
				continue
			}
			zero := l.zero(o.Type(), body.Lbrace)
			if x, ok := zero.(*ast.CompositeLit); ok {
				// Of a literal the interpreter would make another variable than the result.
				t := l.temp(body.Lbrace)
				list = append(list, &ast.DeclStmt{Decl: varDecl(body.Lbrace, t.Name, x.Type)})
				zero = &ast.Ident{Name: t.Name, NamePos: body.Lbrace}
			}
			list = append(list, &ast.AssignStmt{
				Lhs: []ast.Expr{&ast.Ident{Name: id.Name, NamePos: body.Lbrace}}, TokPos: body.Lbrace, Tok: token.ASSIGN, Rhs: []ast.Expr{zero},
			})
		}
	}
	body.List = append(list, body.List...)
}

// nameParams names the parameters that have no name: the interpreter takes several of them for one.
func nameParams(t *ast.FuncType) {
	for _, f := range t.Params.List {
		if len(f.Names) == 0 {
			f.Names = []*ast.Ident{{Name: "_", NamePos: f.Pos()}}
		}
	}
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

// receive makes a function literal's call of a receive whose value is used: the interpreter loses it inside an expression,
// and a variable that has received can never be assigned again.
func (l *lowering) receive(c *astutil.Cursor, n *ast.UnaryExpr) {
	if n.Op != token.ARROW {
		return
	}
	switch p := c.Parent().(type) {
	case *ast.ExprStmt, *ast.CommClause:
		return
	case *ast.AssignStmt:
		if l.comms[p] || len(p.Lhs) == 2 && len(p.Rhs) == 1 {
			return
		}
	case *ast.ParenExpr:
		return // in the head of a case; elsewhere the parser's users seldom write it
	}
	t := l.u.info.TypeOf(n)
	if _, two := t.(*types.Tuple); t == nil || two {
		return
	}
	l.replace(c, l.evaluated(n.Pos(), t, n))
}

// evaluated is a call of a function literal that evaluates x in a statement of its own.
func (l *lowering) evaluated(pos token.Pos, t types.Type, x ast.Expr) ast.Expr {
	id := l.temp(pos)
	typ := l.typeExpr(t, pos)
	if typ == nil {
		return x
	}
	call := &ast.CallExpr{Fun: &ast.FuncLit{
		Type: &ast.FuncType{
			Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos},
			Results: &ast.FieldList{Opening: pos, List: []*ast.Field{{Type: typ}}, Closing: pos},
		},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{
			&ast.AssignStmt{Lhs: []ast.Expr{id}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{x}},
			&ast.ReturnStmt{Return: pos, Results: []ast.Expr{&ast.Ident{Name: id.Name, NamePos: pos}}},
		}, Rbrace: pos},
	}, Lparen: pos, Rparen: pos}
	l.synthetic[call] = true
	return call
}

// commClause receives into a variable of its own in a select, and assigns that.
func (l *lowering) commClause(n *ast.CommClause) {
	a, ok := n.Comm.(*ast.AssignStmt)
	if !ok {
		return
	}
	a.Rhs[0] = ast.Unparen(a.Rhs[0])
	if a.Tok != token.ASSIGN {
		return
	}
	as := &ast.AssignStmt{TokPos: a.TokPos, Tok: token.ASSIGN}
	for i, x := range a.Lhs {
		if id, ok := x.(*ast.Ident); ok && id.Name == "_" {
			continue
		}
		t := l.temp(x.Pos())
		as.Lhs, as.Rhs = append(as.Lhs, x), append(as.Rhs, &ast.Ident{Name: t.Name, NamePos: x.Pos()})
		a.Lhs[i] = t
	}
	if len(as.Lhs) == 0 {
		n.Comm = &ast.ExprStmt{X: a.Rhs[0]}
		return
	}
	a.Tok = token.DEFINE
	n.Body = append([]ast.Stmt{as}, n.Body...)
}

// newValue is new(x) with a value x.
func (l *lowering) newValue(n *ast.CallExpr) ast.Expr {
	pos := n.Pos()
	p, ok := l.u.info.TypeOf(n).(*types.Pointer)
	if !ok {
		return nil
	}
	typ, id := l.typeExpr(p.Elem(), pos), l.temp(pos)
	if typ == nil {
		return nil
	}
	call := &ast.CallExpr{Fun: &ast.FuncLit{
		Type: &ast.FuncType{
			Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos},
			Results: &ast.FieldList{Opening: pos, List: []*ast.Field{{Type: &ast.StarExpr{Star: pos, X: typ}}}, Closing: pos},
		},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{
			&ast.DeclStmt{Decl: &ast.GenDecl{Tok: token.VAR, TokPos: pos, Specs: []ast.Spec{&ast.ValueSpec{Names: []*ast.Ident{id}, Type: typ, Values: n.Args}}}},
			&ast.ReturnStmt{Return: pos, Results: []ast.Expr{&ast.UnaryExpr{OpPos: pos, Op: token.AND, X: &ast.Ident{Name: id.Name, NamePos: pos}}}},
		}, Rbrace: pos},
	}, Lparen: pos, Rparen: pos}
	l.synthetic[call] = true
	return call
}
