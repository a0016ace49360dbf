package cell

import (
	"go/ast"
	"go/types"
)

// show wraps the last expression.
func (l *lowering) show(fn *ast.FuncDecl) {
	s := fn.Body.List[len(fn.Body.List)-1].(*ast.ExprStmt)
	switch t := l.u.info.Types[s.X].Type.(type) {
	case *types.Tuple:
		for v := range t.Variables() {
			l.p.shown = append(l.p.shown, v.Type())
		}
	default:
		l.p.shown = []types.Type{types.Default(t)}
	}
	l.p.printed = l.prints(s.X)
	s.X = l.hook("Show", s.X.Pos(), s.X)
}

// showList shows the values of a last line a, b.
func (l *lowering) showList(fn *ast.FuncDecl) {
	s := fn.Body.List[len(fn.Body.List)-1].(*ast.ExprStmt)
	for _, x := range l.u.src.list.Args {
		l.p.shown = append(l.p.shown, types.Default(l.u.info.TypeOf(x)))
	}
	s.X = l.hook("Show", s.X.Pos(), l.u.src.list.Args...)
}

// prints reports whether a call is one of a function or method of fmt, io, os, bufio or log that returns the count of bytes
// and an error.
func (l *lowering) prints(x ast.Expr) bool {
	call, ok := ast.Unparen(x).(*ast.CallExpr)
	if !ok {
		return false
	}
	t, ok := l.u.info.Types[call].Type.(*types.Tuple)
	if !ok || t.Len() != 2 || !types.Identical(t.At(0).Type(), types.Typ[types.Int]) || !isError(t.At(1).Type()) {
		return false
	}
	var id *ast.Ident
	switch f := ast.Unparen(call.Fun).(type) {
	case *ast.SelectorExpr:
		id = f.Sel
	case *ast.Ident:
		id = f
	default:
		return false
	}
	o := l.u.info.Uses[id]
	if o == nil || o.Pkg() == nil {
		return false
	}
	switch o.Pkg().Path() {
	case "fmt", "io", "os", "bufio", "log":
		return true
	}
	return false
}

func isError(t types.Type) bool { return types.Identical(t, types.Universe.Lookup("error").Type()) }
