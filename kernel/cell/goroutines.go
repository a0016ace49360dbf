package cell

import (
	"fmt"
	"go/ast"
	"go/token"
	"go/types"
	"strings"
	"sync"
	"sync/atomic"
)

// goroutines are those that cells have started with a go statement, and the cells' own main ones. Each belongs to the run
// that started it: what it prints goes there.
type goroutines struct {
	others atomic.Int64 // beside the running cell's own
	mu     sync.Mutex
	of     map[uint64]*run
}

// here returns the run that the calling goroutine belongs to; the running cell for goroutines of compiled code.
func (in *Interpreter) here() *run {
	if in.goroutines.others.Load() > 0 {
		g := goroutine()
		in.goroutines.mu.Lock()
		defer in.goroutines.mu.Unlock()
		if r := in.goroutines.of[g]; r != nil {
			return r
		}
	}
	return in.current.Load()
}

// enter makes the calling goroutine one of r; the result undoes it.
func (g *goroutines) enter(r *run) (leave func()) {
	id := goroutine()
	g.mu.Lock()
	defer g.mu.Unlock()
	g.of[id] = r
	return func() {
		g.mu.Lock()
		defer g.mu.Unlock()
		delete(g.of, id)
	}
}

// runs returns the runs that have goroutines.
func (g *goroutines) runs() []*run {
	g.mu.Lock()
	defer g.mu.Unlock()
	seen := map[*run]bool{}
	var list []*run
	for _, r := range g.of {
		if !seen[r] {
			seen[r] = true
			list = append(list, r)
		}
	}
	return list
}

// start is the go statement of cells. A panic there must not end the kernel; it belongs to no cell that runs, so it is
// reported and fails none.
func (in *Interpreter) start(f func()) {
	r := in.here()
	in.goroutines.others.Add(1)
	go func() {
		defer in.goroutines.others.Add(-1)
		defer in.goroutines.enter(r)()
		defer func() {
			if v := recover(); v != nil {
				e := in.panicError(v)
				r.out.Stream("stderr", []byte("goroutine: "+strings.Join(e.Trace, "\n")+"\n"))
			}
		}()
		f()
	}()
}

// goStmt evaluates the function and the arguments now and hands the call to start.
func (l *lowering) goStmt(g *ast.GoStmt) ast.Stmt {
	pos := g.Pos()
	call := g.Call
	block := &ast.BlockStmt{Lbrace: pos, Rbrace: pos}
	switch f := ast.Unparen(call.Fun).(type) {
	case *ast.FuncLit:
	case *ast.SelectorExpr:
		l.keepReceiver(&block.List, call, f)
	default:
		if tv := l.u.info.Types[call.Fun]; tv.IsValue() {
			call.Fun = l.keep(&block.List, call.Fun)
		}
	}
	if len(call.Args) == 1 {
		if t, ok := l.u.info.TypeOf(call.Args[0]).(*types.Tuple); ok {
			as := &ast.AssignStmt{TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{call.Args[0]}}
			call.Args = nil
			for range t.Len() {
				id := l.temp(pos)
				as.Lhs = append(as.Lhs, id)
				call.Args = append(call.Args, &ast.Ident{Name: id.Name, NamePos: pos})
			}
			block.List = append(block.List, as)
		}
	}
	for i, a := range call.Args {
		call.Args[i] = l.keep(&block.List, a)
	}
	lit := &ast.FuncLit{
		Type: &ast.FuncType{Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos}},
		Body: &ast.BlockStmt{Lbrace: pos, List: []ast.Stmt{&ast.ExprStmt{X: call}}, Rbrace: call.End()},
	}
	if f, ok := call.Fun.(*ast.FuncLit); ok && len(call.Args) == 0 && f.Type.Results == nil {
		lit = f
	}
	f := l.temp(pos)
	block.List = append(block.List,
		&ast.AssignStmt{Lhs: []ast.Expr{f}, TokPos: pos, Tok: token.DEFINE, Rhs: []ast.Expr{l.ownFrame(lit)}},
		&ast.ExprStmt{X: l.hook("Go", pos, &ast.Ident{Name: f.Name, NamePos: pos})})
	return block
}

// temp makes a variable that no cell can name.
func (l *lowering) temp(pos token.Pos) *ast.Ident {
	l.temps++
	return &ast.Ident{Name: fmt.Sprintf("%st%d", kernel, l.temps), NamePos: pos}
}

func (l *lowering) made(id *ast.Ident) bool { return strings.HasPrefix(id.Name, kernel+"t") }
