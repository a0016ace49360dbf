package cell

import (
	"go/ast"
	"go/token"
	"go/types"
	"strconv"

	"golang.org/x/tools/go/ast/astutil"
)

// This file makes calls of ranges over functions. The loop
//
//	for k, v := range f { body }
//
// becomes
//
//	{
//		state := 0
//		f(func(k K, v V) bool {
//			if state != 0 { panic }
//			body
//			return true
//		})
//		if state == 0 { state = ended }
//		if state == 2 { return result }
//		if state == 3 { break outer }
//	}
//
// In the body continue returns true; break, and what leaves more than this loop, sets the state and returns false; what more
// it was to leave is left behind the call. Inner loops come first, so that what they leave behind their calls is lowered
// once more by the loop around them. Deferred calls of the body run at the end of the function around the loop.

// States of a loop over a function; what leaves it in other ways counts on from stateOther.
const (
	stateEnded = -1
	stateBreak = 1
	stateOther = 2
)

// rangeFunc is one such loop.
type rangeFunc struct {
	l       *lowering
	label   string
	state   string          // its variable
	results []types.Type    // of the function around it
	values  []string        // variables of the results, if the body returns some
	exits   []ast.Stmt      // what stands behind the call, by state
	codes   map[string]int  // label and token, or "return" -> state
	inside  map[string]bool // labels of the body
	defers  string          // variable of the deferred calls, if there are some
}

// resultTypes returns those of the function around the node at hand.
func (l *lowering) resultTypes() []types.Type {
	for i := len(l.nest) - 1; i >= 0; i-- {
		lit, ok := l.nest[i].(*ast.FuncLit)
		if !ok {
			continue
		}
		sig, ok := l.u.info.TypeOf(lit).(*types.Signature)
		if !ok {
			return nil
		}
		var list []types.Type
		for v := range sig.Results().Variables() {
			list = append(list, v.Type())
		}
		return list
	}
	return l.results
}

// fieldTypes returns the types of results.
func (l *lowering) fieldTypes(f *ast.FieldList) []types.Type {
	var list []types.Type
	if f != nil {
		for _, field := range f.List {
			for range max(1, len(field.Names)) {
				list = append(list, l.u.info.TypeOf(field.Type))
			}
		}
	}
	return list
}

func (l *lowering) rangeFunc(n *ast.RangeStmt, label string) ast.Stmt {
	pos := n.Pos()
	seq, ok := l.u.info.TypeOf(n.X).Underlying().(*types.Signature)
	if !ok || seq.Params().Len() != 1 {
		return nil
	}
	yield, ok := seq.Params().At(0).Type().Underlying().(*types.Signature)
	if !ok {
		return nil
	}
	r := &rangeFunc{l: l, label: label, state: l.temp(pos).Name, results: l.resultTypes(), codes: map[string]int{}, inside: map[string]bool{}}
	if n.Tok == token.ASSIGN {
		l.rangeAssign(n)
	}
	ast.Inspect(n.Body, func(n ast.Node) bool {
		if s, ok := n.(*ast.LabeledStmt); ok {
			r.inside[s.Label.Name] = true
		}
		_, lit := n.(*ast.FuncLit)
		return !lit
	})
	r.body(n.Body)

	block := &ast.BlockStmt{Lbrace: pos, Rbrace: n.End()}
	l.ranged[block] = true
	add := func(s ...ast.Stmt) { block.List = append(block.List, s...) }
	f := l.keep(&block.List, n.X)
	add(r.set(pos, token.DEFINE, 0))
	for i, name := range r.values {
		if t := l.typeExpr(r.results[i], pos); t != nil {
			add(&ast.DeclStmt{Decl: varDecl(pos, name, t)})
		}
	}
	if r.defers != "" {
		add(&ast.AssignStmt{Lhs: []ast.Expr{r.id(r.defers, pos)}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{l.hook("Deferred", pos)}},
			&ast.DeferStmt{Defer: pos, Call: l.hook("RunDeferred", pos, r.id(r.defers, pos))})
	}
	lit := r.literal(n, yield)
	if lit == nil {
		return block
	}
	add(&ast.ExprStmt{X: &ast.CallExpr{Fun: f, Lparen: n.X.Pos(), Args: []ast.Expr{lit}, Rparen: n.X.End()}})
	add(r.when(pos, 0, r.set(pos, token.ASSIGN, stateEnded)))
	for i, s := range r.exits {
		add(r.when(s.Pos(), stateOther+i, s))
	}
	return block
}

// literal is the function that the loop's body becomes.
func (r *rangeFunc) literal(n *ast.RangeStmt, yield *types.Signature) ast.Expr {
	pos := n.Body.Lbrace
	params := &ast.FieldList{Opening: pos, Closing: pos}
	for i := range yield.Params().Len() {
		t := r.l.typeExpr(yield.Params().At(i).Type(), pos)
		if t == nil {
			return nil
		}
		name := "_"
		if id, ok := []ast.Expr{n.Key, n.Value}[i].(*ast.Ident); ok {
			name = id.Name
		}
		params.List = append(params.List, &ast.Field{Names: []*ast.Ident{r.id(name, pos)}, Type: t})
	}
	late := r.unless(pos, &ast.ExprStmt{X: r.l.hook("LoopEnded", pos)})
	body := append([]ast.Stmt{late}, n.Body.List...)
	body = append(body, r.result(n.Body.Rbrace, "true"))
	return r.l.ownFrame(&ast.FuncLit{
		Type: &ast.FuncType{
			Func: pos, Params: params,
			Results: &ast.FieldList{Opening: pos, List: []*ast.Field{{Type: r.id("bool", pos)}}, Closing: pos},
		},
		Body: &ast.BlockStmt{Lbrace: pos, List: body, Rbrace: n.Body.Rbrace},
	})
}

func (r *rangeFunc) id(name string, pos token.Pos) *ast.Ident {
	return &ast.Ident{Name: name, NamePos: pos}
}

func (r *rangeFunc) set(pos token.Pos, tok token.Token, state int) ast.Stmt {
	return &ast.AssignStmt{Lhs: []ast.Expr{r.id(r.state, pos)}, TokPos: pos, Tok: tok, Rhs: []ast.Expr{number(pos, token.INT, strconv.Itoa(state))}}
}

func (r *rangeFunc) when(pos token.Pos, state int, s ast.Stmt) ast.Stmt {
	return &ast.IfStmt{
		If: pos, Cond: &ast.BinaryExpr{X: r.id(r.state, pos), OpPos: pos, Op: token.EQL, Y: number(pos, token.INT, strconv.Itoa(state))},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{s}, Rbrace: pos},
	}
}

func (r *rangeFunc) unless(pos token.Pos, s ast.Stmt) ast.Stmt {
	return &ast.IfStmt{
		If: pos, Cond: &ast.BinaryExpr{X: r.id(r.state, pos), OpPos: pos, Op: token.NEQ, Y: number(pos, token.INT, "0")},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{s}, Rbrace: pos},
	}
}

func (r *rangeFunc) result(pos token.Pos, value string) ast.Stmt {
	return &ast.ReturnStmt{Return: pos, Results: []ast.Expr{r.id(value, pos)}}
}

// leave ends the loop in a state.
func (r *rangeFunc) leave(pos token.Pos, state int, before ...ast.Stmt) ast.Stmt {
	list := append(before, r.set(pos, token.ASSIGN, state), r.result(pos, "false"))
	return &ast.BlockStmt{Lbrace: pos, List: list, Rbrace: pos}
}

// exit returns the state that makes the statement run behind the call.
func (r *rangeFunc) exit(key string, s ast.Stmt) int {
	if code, ok := r.codes[key]; ok {
		return code
	}
	code := stateOther + len(r.exits)
	r.codes[key] = code
	r.exits = append(r.exits, s)
	return code
}

// body replaces what leaves the loop.
func (r *rangeFunc) body(body *ast.BlockStmt) {
	loops, breakable := 0, 0 // around the node at hand, within the body
	enter := func(n ast.Node, by int) {
		switch n.(type) {
		case *ast.ForStmt, *ast.RangeStmt:
			loops += by
			breakable += by
		case *ast.SwitchStmt, *ast.TypeSwitchStmt, *ast.SelectStmt:
			breakable += by
		}
	}
	astutil.Apply(body, func(c *astutil.Cursor) bool {
		enter(c.Node(), 1)
		switch n := c.Node().(type) {
		case *ast.FuncLit:
			return false
		case *ast.BranchStmt:
			if s := r.branch(n, loops, breakable); s != nil {
				c.Replace(s)
			}
			return false
		case *ast.ReturnStmt:
			c.Replace(r.returnStmt(n))
			return false
		case *ast.DeferStmt:
			c.Replace(r.deferStmt(n))
			return false
		}
		return true
	}, func(c *astutil.Cursor) bool {
		enter(c.Node(), -1)
		return true
	})
}

func (r *rangeFunc) branch(n *ast.BranchStmt, loops, breakable int) ast.Stmt {
	pos := n.Pos()
	own := n.Label != nil && n.Label.Name == r.label
	if n.Label != nil && !own && r.inside[n.Label.Name] {
		return nil
	}
	switch n.Tok {
	case token.BREAK:
		if own || n.Label == nil && breakable == 0 {
			return r.leave(pos, stateBreak)
		}
	case token.CONTINUE:
		if own || n.Label == nil && loops == 0 {
			return r.result(pos, "true")
		}
	case token.GOTO:
		r.l.fail(pos, "cells cannot leave a loop over a function by goto")
		return nil
	}
	if n.Label == nil {
		return nil
	}
	return r.leave(pos, r.exit(n.Tok.String()+" "+n.Label.Name, n))
}

func (r *rangeFunc) returnStmt(n *ast.ReturnStmt) ast.Stmt {
	pos := n.Pos()
	if len(n.Results) == 0 {
		return r.leave(pos, r.exit("return", &ast.ReturnStmt{Return: pos}))
	}
	if r.values == nil {
		for range r.results {
			r.values = append(r.values, r.l.temp(pos).Name)
		}
	}
	as := &ast.AssignStmt{TokPos: pos, Tok: token.ASSIGN, Rhs: n.Results}
	back := &ast.ReturnStmt{Return: pos}
	var list []ast.Stmt
	if len(n.Results) == len(r.values) {
		for i, name := range r.values {
			list = append(list, &ast.AssignStmt{Lhs: []ast.Expr{r.id(name, pos)}, TokPos: pos, Tok: token.ASSIGN, Rhs: n.Results[i : i+1]})
		}
	} else {
		for _, name := range r.values {
			as.Lhs = append(as.Lhs, r.id(name, pos))
		}
		list = append(list, as)
	}
	for _, name := range r.values {
		back.Results = append(back.Results, r.id(name, pos))
	}
	return r.leave(pos, r.exit("return values", back), list...)
}

// deferStmt puts a call, whose function and arguments have been evaluated (see lowering.deferStmt), aside until the function
// around the loop ends.
func (r *rangeFunc) deferStmt(n *ast.DeferStmt) ast.Stmt {
	pos := n.Pos()
	if r.defers == "" {
		r.defers = r.l.temp(pos).Name
	}
	for _, a := range n.Call.Args {
		if t, ok := r.l.u.info.TypeOf(a).(*types.Tuple); ok && t.Len() > 1 {
			r.l.fail(pos, "cells cannot defer a call with the results of another in a loop over a function; keep them in variables")
		}
	}
	lit := &ast.FuncLit{
		Type: &ast.FuncType{Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos}},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{&ast.ExprStmt{X: n.Call}}, Rbrace: n.End()},
	}
	return &ast.ExprStmt{X: r.l.hook("Defer", pos, r.id(r.defers, pos), r.l.ownFrame(lit))}
}

// noRecover refuses to recover in what a loop over a function defers: the frames there are not those of Go.
func (l *lowering) noRecover(call *ast.CallExpr) {
	for i := len(l.nest) - 1; i >= 0; i-- {
		n, ok := l.nest[i].(*ast.RangeStmt)
		if !ok {
			if _, lit := l.nest[i].(*ast.FuncLit); lit {
				return
			}
			continue
		}
		if _, ok := l.u.info.TypeOf(n.X).Underlying().(*types.Signature); ok && l.recovers(call) {
			l.fail(call.Pos(), "cells cannot recover in a call that a loop over a function defers; defer it before the loop")
			return
		}
	}
}

// recovers reports whether there is a call of recover in a call, or in the function of the cells that it calls.
func (l *lowering) recovers(call *ast.CallExpr) bool {
	if id, ok := call.Fun.(*ast.Ident); ok {
		o := l.u.info.Uses[id]
		if o == nil {
			return false
		}
		if o == types.Universe.Lookup("recover") {
			return true
		}
		d := l.u.texts[o.Name()]
		if e := l.in.names[o.Name()]; d == nil && e != nil && e.obj == o {
			d = e.decl
		}
		_, fn := o.(*types.Func)
		return fn && d != nil && mentions(d.node)["recover"]
	}
	_, lit := call.Fun.(*ast.FuncLit)
	return lit && mentions(call.Fun)["recover"]
}

// deferred are the calls that the bodies of a loop over a function defer.
type deferred struct{ calls []func() }

// runDeferred runs them, the last one first; a panic does not keep the others from running.
func runDeferred(d *deferred) {
	last := len(d.calls) - 1
	if last < 0 {
		return
	}
	f := d.calls[last]
	d.calls = d.calls[:last]
	defer runDeferred(d)
	f()
}

// loopEnded is the panic of a function that calls the body of a loop that has ended.
func loopEnded() {
	panic(fault{"range function continued iteration after function for loop body returned false"})
}
