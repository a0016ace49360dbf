package cell

import (
	"go/ast"
	"go/token"
	"strconv"
)

// guard lets the cell's function end where it wakes up after an interrupt that could not reach it: before each of its
// statements and in each turn of its loops it asks whether its run is still the current one.
func (l *lowering) guard(body *ast.BlockStmt) {
	var list []ast.Stmt
	for i, s := range body.List {
		if i > 0 {
			list = append(list, l.stillMine(s.Pos()))
		}
		list = append(list, s)
	}
	body.List = list
	ast.Inspect(body, func(n ast.Node) bool {
		var loop *ast.BlockStmt
		switch n := n.(type) {
		case *ast.FuncLit:
			return false
		case *ast.ForStmt:
			loop = n.Body
		case *ast.RangeStmt:
			loop = n.Body
		default:
			return true
		}
		if calls(loop) {
			loop.List = append([]ast.Stmt{l.stillMine(loop.Lbrace)}, loop.List...)
		}
		return true
	})
}

// calls reports whether a loop calls anything: one that does not cannot wait in compiled code.
func calls(body *ast.BlockStmt) bool {
	found := false
	ast.Inspect(body, func(n ast.Node) bool {
		_, call := n.(*ast.CallExpr)
		found = found || call
		return !found
	})
	return found
}

func (l *lowering) stillMine(pos token.Pos) ast.Stmt {
	return &ast.IfStmt{
		If: pos,
		Cond: &ast.BinaryExpr{
			X: &ast.Ident{Name: kernel + "run", NamePos: pos}, OpPos: pos, Op: token.NEQ,
			Y: &ast.BasicLit{Kind: token.INT, ValuePos: pos, Value: strconv.Itoa(l.p.serial)},
		},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{&ast.ExprStmt{X: l.hook("Leave", pos)}}, Rbrace: pos},
	}
}
