package cell

import (
	"fmt"
	"go/ast"
	"go/token"
	"go/types"
	"strconv"
	"sync"
)

// The interpreter's own trace of a panic names the right functions and the wrong lines. So each function of a cell keeps
// the place of its current statement in a variable of the interpreter, its mark, set before every statement that can
// panic (10 ns each). After a panic the marks of the functions on the trace say where each of them was.
//
// Marks are plain integers that goroutines may write at the same time; the worst is a wrong line in the trace of a function
// that runs in several goroutines at once.

// place64 packs a position into a mark: 23 bits of the cell's number, 22 of the line, 18 of the column.
func place64(n, line, column int) int {
	return n<<40 | min(line, 1<<22-1)<<18 | min(column, 1<<18-1)
}

func unplace(mark int) (n, line, column int) {
	return mark >> 40, mark >> 18 & (1<<22 - 1), mark & (1<<18 - 1)
}

// function is one function, method or literal of a compiled cell, or the cell itself.
type function struct {
	name       string // "f", "T.M", "func" of a literal, "" of the cell
	start, end int    // packed places
	mark       string // the interpreter's variable
}

// tracks knows the functions of the session. It is used by panicking goroutines while another cell may be compiled.
type tracks struct {
	mu    sync.Mutex
	cells map[int][]*function // inner ones first
	marks map[string]*int     // variable -> its place in memory
}

// find returns the innermost function around a place.
func (t *tracks) find(at int) *function {
	n, _, _ := unplace(at)
	t.mu.Lock()
	defer t.mu.Unlock()
	for _, f := range t.cells[n] {
		if f.start <= at && at <= f.end {
			return f
		}
	}
	return nil
}

// where returns the place of a function's current statement, or 0.
func (t *tracks) where(f *function) int {
	t.mu.Lock()
	defer t.mu.Unlock()
	if p := t.marks[f.mark]; p != nil && f.start <= *p && *p <= f.end {
		return *p
	}
	return 0
}

func (t *tracks) add(n int, list []*function) {
	t.mu.Lock()
	defer t.mu.Unlock()
	t.cells[n] = append(list, t.cells[n]...)
}

// marking puts marks into one lowered declaration or the cell's statements.
type marking struct {
	l     *lowering
	stack []*function
}

func (l *lowering) at(pos token.Pos) int {
	p := l.in.fset.Position(pos)
	return place64(cellOf(p.Filename), p.Line, p.Column)
}

// cellOf returns the number in a file name made by file.
func cellOf(name string) int {
	var n int
	if _, err := fmt.Sscanf(name, "cell[%d]", &n); err != nil {
		return -1
	}
	return n
}

// function puts marks into a function's body. variable names its mark.
func (m *marking) function(name, variable string, from, to token.Pos, body *ast.BlockStmt) {
	f := &function{name: name, start: m.l.at(from), end: m.l.at(to), mark: variable}
	if f.name == "" { // the cell: all that is in no function
		n, _, _ := unplace(f.start)
		f.start, f.end = place64(n, 0, 0), place64(n, 1<<22-1, 1<<18-1)
	}
	m.stack = append(m.stack, f)
	m.block(&body.List, true)
	m.stack = m.stack[:len(m.stack)-1]
	m.l.p.functions = append(m.l.p.functions, f)
}

func (m *marking) block(list *[]ast.Stmt, always bool) {
	var out []ast.Stmt
	for i, s := range *list {
		if pos := m.risk(s); pos.IsValid() || always && i == 0 {
			if !pos.IsValid() {
				pos = s.Pos()
			}
			out = append(out, m.mark(pos, s.Pos()))
		}
		m.inside(s)
		out = append(out, s)
	}
	*list = out
}

// mark is the statement that sets the current function's mark to the place of at.
func (m *marking) mark(at, pos token.Pos) ast.Stmt {
	f := m.stack[len(m.stack)-1]
	m.l.p.marks[f.mark] = true
	return &ast.AssignStmt{
		Lhs: []ast.Expr{&ast.Ident{Name: f.mark, NamePos: pos}}, TokPos: pos, Tok: token.ASSIGN,
		Rhs: []ast.Expr{&ast.BasicLit{Kind: token.INT, ValuePos: pos, Value: strconv.Itoa(m.l.at(at))}},
	}
}

// inside marks the blocks and function literals of a statement.
func (m *marking) inside(n ast.Node) {
	ast.Inspect(n, func(n ast.Node) bool {
		switch n := n.(type) {
		case *ast.BlockStmt:
			m.block(&n.List, false)
			return false
		case *ast.CaseClause:
			for _, x := range n.List {
				m.inside(x)
			}
			m.block(&n.Body, false)
			return false
		case *ast.CommClause:
			m.block(&n.Body, false)
			return false
		case *ast.FuncLit:
			// Literals share marks by number: a place that lies in another literal is not believed.
			m.l.literals++
			m.function("func", fmt.Sprintf("%sat%d", kernel, m.l.literals), n.Pos(), n.End(), n.Body)
			return false
		}
		return true
	})
}

// risk returns where a statement can panic: the place of the only such expression, or of the statement if there are
// several; none if it cannot. What stands in its blocks has marks of its own.
func (m *marking) risk(s ast.Stmt) token.Pos {
	count, only := 0, token.NoPos
	found := func(pos token.Pos) {
		count++
		only = pos
	}
	info := m.l.u.info
	ast.Inspect(s, func(n ast.Node) bool {
		switch n := n.(type) {
		case *ast.BlockStmt, *ast.FuncLit, *ast.CaseClause, *ast.CommClause:
			return false
		case *ast.CallExpr:
			if !m.l.synthetic[n] {
				found(n.Pos())
			}
		case *ast.IndexExpr:
			found(n.Lbrack)
		case *ast.SliceExpr:
			found(n.Lbrack)
		case *ast.StarExpr:
			if tv, ok := info.Types[n]; ok && tv.IsValue() {
				found(n.Pos())
			}
		case *ast.SelectorExpr:
			if sel := info.Selections[n]; sel != nil {
				if _, ptr := sel.Recv().Underlying().(*types.Pointer); ptr && sel.Kind() == types.FieldVal {
					found(n.Sel.Pos())
				}
			}
		case *ast.TypeAssertExpr:
			found(n.Pos())
		case *ast.BinaryExpr:
			if n.Op == token.QUO || n.Op == token.REM {
				if t := info.TypeOf(n); t != nil {
					if b, ok := t.Underlying().(*types.Basic); ok && b.Info()&types.IsInteger != 0 {
						found(n.OpPos)
					}
				}
			}
		case *ast.SendStmt, *ast.GoStmt, *ast.DeferStmt:
			found(n.Pos())
		case *ast.AssignStmt:
			if n.Tok == token.QUO_ASSIGN || n.Tok == token.REM_ASSIGN {
				found(n.Pos())
			}
		}
		return true
	})
	if count == 1 {
		return only
	}
	if count > 1 {
		return s.Pos()
	}
	return token.NoPos
}
