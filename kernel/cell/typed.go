package cell

import (
	"go/ast"
	"go/constant"
	"go/token"
	"go/types"
	"slices"
	"strconv"
	"strings"
)

// findTyped finds the arguments of fmt's functions and their like whose static type must go with them, since they have
// methods or fields that compiled code cannot see.
func (l *lowering) findTyped(call *ast.CallExpr) {
	if call.Ellipsis.IsValid() {
		return
	}
	if id, ok := ast.Unparen(call.Fun).(*ast.Ident); ok && l.u.info.Uses[id] == types.Universe.Lookup("panic") && len(call.Args) == 1 {
		if t := l.u.info.TypeOf(call.Args[0]); t != nil && !types.IsInterface(t) && needsType(t, nil) && types.Implements(t, errorType) {
			l.typed[call] = map[int]types.Type{0: nil}
		}
		return
	}
	s, ok := ast.Unparen(call.Fun).(*ast.SelectorExpr)
	if !ok {
		return
	}
	fn, ok := l.u.info.Uses[s.Sel].(*types.Func)
	if !ok || fn.Pkg() == nil {
		return
	}
	switch fn.Pkg().Path() {
	case "fmt", "log", pagePath:
	default:
		return
	}
	sig := fn.Signature()
	for i, a := range call.Args {
		param := sig.Params().At(min(i, sig.Params().Len()-1)).Type()
		if sl, ok := param.(*types.Slice); ok && sig.Variadic() && i >= sig.Params().Len()-1 {
			param = sl.Elem()
		}
		if !isAny(param) {
			continue
		}
		t := l.u.info.TypeOf(a)
		if _, tuple := t.(*types.Tuple); t == nil || tuple || !needsType(t, nil) {
			continue
		}
		if fn.Name() == "Errorf" && types.Implements(t, errorType) {
			// %w needs the error itself.
			if types.IsInterface(t) {
				continue
			}
			t = nil
		}
		if l.typed[call] == nil {
			l.typed[call] = map[int]types.Type{}
		}
		l.typed[call][i] = t
	}
	l.typeVerbs(call, sig)
}

// typeVerbs turns %T for an argument of a cell's type into %v of the type's name: fmt asks reflect for %T and nobody else.
func (l *lowering) typeVerbs(call *ast.CallExpr, sig *types.Signature) {
	at := sig.Params().Len() - 2
	if !sig.Variadic() || at < 0 || at >= len(call.Args) || len(l.typed[call]) == 0 {
		return
	}
	tv := l.u.info.Types[call.Args[at]]
	if tv.Value == nil || tv.Value.Kind() != constant.String {
		return
	}
	format := []byte(constant.StringVal(tv.Value))
	changed := false
	arg := at + 1
	for i := 0; i < len(format); i++ {
		if format[i] != '%' {
			continue
		}
		for i++; i < len(format) && strings.IndexByte("+-# 0123456789.", format[i]) >= 0; i++ {
		}
		if i == len(format) || format[i] == '*' || format[i] == '[' {
			break // arguments out of order: leave them
		}
		if format[i] == '%' {
			continue
		}
		if format[i] == 'T' && l.typed[call][arg] != nil {
			format[i] = 'v'
			l.nameArgs[call] = append(l.nameArgs[call], arg)
			changed = true
		}
		arg++
	}
	if changed {
		call.Args[at] = &ast.BasicLit{Kind: token.STRING, ValuePos: call.Args[at].Pos(), Value: strconv.Quote(string(format))}
	}
}

var errorType = types.Universe.Lookup("error").Type().Underlying().(*types.Interface)

const pagePath = "linewright/builtins/page"

// wrapTyped wraps those arguments.
func (l *lowering) wrapTyped(call *ast.CallExpr) {
	for i, t := range l.typed[call] {
		a := call.Args[i]
		if t == nil {
			// A cell's error type in a panic, where a recovered value is an error, or in an Errorf.
			call.Args[i] = &ast.CallExpr{Fun: &ast.Ident{Name: asError, NamePos: a.Pos()}, Lparen: a.Pos(), Args: []ast.Expr{a}, Rparen: a.Pos()}
			continue
		}
		hook := "Typed"
		if slices.Contains(l.nameArgs[call], i) {
			hook = "TypeName"
		}
		id := &ast.BasicLit{Kind: token.INT, ValuePos: a.Pos(), Value: strconv.Itoa(l.in.typeID(t))}
		call.Args[i] = l.hook(hook, a.Pos(), id, a)
	}
}

// typeID returns the place of a type in the table of types.
func (in *Interpreter) typeID(t types.Type) int {
	if id, ok := in.typeIDs.At(t).(int); ok {
		return id
	}
	in.typeTable = append(in.typeTable, t)
	in.typeIDs.Set(t, len(in.typeTable)-1)
	return len(in.typeTable) - 1
}

// needsType reports whether a value of static type t can hold anything of a cell's types, so that only t says how it
// prints.
func needsType(t types.Type, seen map[types.Type]bool) bool {
	if seen[t] {
		return false
	}
	if seen == nil {
		seen = map[types.Type]bool{}
	}
	seen[t] = true
	switch t := t.(type) {
	case *types.Alias:
		return needsType(types.Unalias(t), seen)
	case *types.Named:
		if t.Obj().Pkg() == nil {
			return true // error
		}
		if t.Obj().Pkg().Path() == "main" {
			return true
		}
		_, in := t.Underlying().(*types.Interface)
		return in
	case *types.Struct, *types.Interface:
		return true
	case *types.Map:
		return needsType(t.Key(), seen) || needsType(t.Elem(), seen)
	case interface{ Elem() types.Type }:
		return needsType(t.Elem(), seen)
	}
	return false
}
