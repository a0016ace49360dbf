package cell

import (
	"go/ast"
	"go/token"
	"go/types"
	"strconv"
)

// This file lowers what a cell puts into interfaces: an operation there stores its result where the interface lies, which
// fails or stops the cell without a word, and a value of a paired type (see paired) loses its type.

// findReturns notes what a function's returns give their values to.
func (l *lowering) findReturns(t *ast.FuncType, body *ast.BlockStmt) {
	results := l.fieldTypes(t.Results)
	if results == nil || body == nil {
		return
	}
	ast.Inspect(body, func(n ast.Node) bool {
		if r, ok := n.(*ast.ReturnStmt); ok && len(r.Results) == len(results) {
			l.returns[r] = results
		}
		_, lit := n.(*ast.FuncLit)
		return !lit
	})
}

// returnStmt lowers the values of a return.
func (l *lowering) returnStmt(n *ast.ReturnStmt) {
	for i, to := range l.returns[n] {
		n.Results[i] = l.into(n.Results[i], to)
	}
}

// assigned lowers the values of an assignment.
func (l *lowering) assigned(n *ast.AssignStmt) {
	if len(n.Lhs) != len(n.Rhs) {
		return
	}
	for i, x := range n.Lhs {
		n.Rhs[i] = l.into(n.Rhs[i], l.u.info.TypeOf(x))
	}
}

// declared lowers the values of a declaration of variables.
func (l *lowering) declared(n *ast.ValueSpec) {
	if len(n.Names) != len(n.Values) {
		return
	}
	for i, id := range n.Names {
		n.Values[i] = l.into(n.Values[i], l.u.info.TypeOf(id))
	}
}

// arguments lowers the arguments of a call of a cell's function: of a struct with methods the interpreter would make a
// pair there, and nowhere else, so that it would not equal itself.
func (l *lowering) arguments(n *ast.CallExpr) {
	sig, ok := l.u.info.TypeOf(n.Fun).(*types.Signature)
	if !ok || n.Ellipsis.IsValid() || !l.callsCell(n) {
		return
	}
	for i, x := range n.Args {
		last := sig.Params().Len() - 1
		if last < 0 {
			return
		}
		to := sig.Params().At(min(i, last)).Type()
		if sig.Variadic() && i >= last {
			to = to.(*types.Slice).Elem()
		}
		from := l.u.info.TypeOf(x)
		if from == nil || !isAny(to) {
			continue
		}
		_, isStruct := from.Underlying().(*types.Struct)
		switch {
		case paired(from):
			n.Args[i] = l.pair(x, from)
		case isStruct && types.NewMethodSet(from).Len() > 0 && !l.ofCompiled(from):
			n.Args[i] = l.hook("Bare", x.Pos(), x)
		}
	}
}

// bare gives a value to an any as it is.
func bare(v any) any { return v }

func isAny(t types.Type) bool {
	i, ok := t.Underlying().(*types.Interface)
	return ok && i.Empty()
}

// into makes x arrive in a variable or result of type to, if that is an interface: as the argument of a function that takes
// an any, or by way of a variable of its own.
func (l *lowering) into(x ast.Expr, to types.Type) ast.Expr {
	from := l.u.info.TypeOf(x)
	if to == nil || from == nil || !types.IsInterface(to) || types.IsInterface(from) || l.u.info.Types[x].IsNil() {
		return x
	}
	operation := false
	switch y := ast.Unparen(x).(type) {
	case *ast.UnaryExpr:
		operation = y.Op != token.AND && y.Op != token.ARROW
	case *ast.BinaryExpr:
		operation = true
	}
	switch {
	case isAny(to) && paired(from):
		return l.pair(x, from)
	case isAny(to) && operation:
		return l.asAny(x)
	case operation:
		return l.evaluated(x.Pos(), from, x)
	}
	return x
}

// asAny passes x through a function that takes and gives an any.
func (l *lowering) asAny(x ast.Expr) ast.Expr {
	if _, ok := x.(*ast.CallExpr); ok {
		// In parentheses, since the interpreter passes on the results of a call as they are.
		x = &ast.ParenExpr{Lparen: x.Pos(), X: x, Rparen: x.End()}
	}
	call := &ast.CallExpr{Fun: &ast.Ident{Name: asAny, NamePos: x.Pos()}, Lparen: x.Pos(), Args: []ast.Expr{x}, Rparen: x.Pos()}
	l.synthetic[call] = true
	return call
}

// pair makes the pair of a value of a paired type.
func (l *lowering) pair(x ast.Expr, t types.Type) ast.Expr {
	id := &ast.BasicLit{Kind: token.INT, ValuePos: x.Pos(), Value: strconv.Itoa(l.in.typeID(t))}
	// In parentheses, since the interpreter takes the values out of pairs that a call gives straight to compiled code.
	return l.hook("Pair", x.Pos(), id, &ast.ParenExpr{Lparen: x.Pos(), X: l.asAny(x), Rparen: x.End()})
}

// pairKey tells pairs apart.
type pairKey struct {
	id    int // of the type
	value any
}

// mostPairs is the number of pairs that are kept.
const mostPairs = 1 << 20

// pairOf returns the one pair of a type and a value: the interpreter makes each anew, so that equal ones are not the same to
// compiled code, for instance as keys of its maps.
func (in *Interpreter) pairOf(id int, v any) any {
	value := in.bare(v).v
	if !value.IsValid() || !value.Comparable() {
		return v
	}
	key := pairKey{id, value.Interface()}
	in.types.Lock()
	defer in.types.Unlock()
	if p, ok := in.pairs[key]; ok {
		return p
	}
	if in.pairs == nil || len(in.pairs) >= mostPairs {
		in.pairs = map[pairKey]any{}
	}
	in.pairs[key] = v
	return v
}
