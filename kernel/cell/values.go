package cell

import (
	"go/ast"
	"go/constant"
	"go/token"
	"go/types"
	"strconv"
	"strings"
)

// This file makes trees of what the checker knows: types, constants, zero values.

// constant returns an expression with a constant's value and type; old itself where that is right already; nil where the
// constant is not of a basic type (in a generic function, say). Folding keeps the interpreter's own constant arithmetic,
// which is not Go's, out of the way.
func (l *lowering) constant(t types.Type, v constant.Value, old ast.Expr) ast.Expr {
	b, ok := t.Underlying().(*types.Basic)
	if !ok {
		return nil
	}
	pos := old.Pos()
	if b.Info()&types.IsUntyped != 0 {
		b = types.Default(b).(*types.Basic)
		if b.Kind() == types.Int && v.Kind() == constant.Int {
			if _, exact := constant.Int64Val(v); !exact {
				if _, exact := constant.Uint64Val(v); !exact {
					return nil // too large for any integer: only ever part of a larger constant
				}
			}
		}
		t = b
	}
	var lit ast.Expr
	info := b.Info()
	switch {
	case info&types.IsBoolean != 0:
		lit = &ast.Ident{Name: strconv.FormatBool(constant.BoolVal(v)), NamePos: pos}
	case info&types.IsString != 0:
		if x, ok := old.(*ast.BasicLit); ok && t == types.Typ[types.String] {
			return x
		}
		lit = &ast.BasicLit{Kind: token.STRING, ValuePos: pos, Value: strconv.Quote(constant.StringVal(v))}
	case info&types.IsInteger != 0:
		if x, ok := old.(*ast.BasicLit); ok && x.Kind == token.INT && t == types.Typ[types.Int] {
			return x
		}
		lit = number(pos, token.INT, constant.ToInt(v).ExactString())
	case info&types.IsFloat != 0:
		lit = float(pos, v, b.Kind() == types.Float32)
	case info&types.IsComplex != 0:
		f32 := b.Kind() == types.Complex64
		// A call of compiled code: the interpreter's own complex constants are wrong in some places.
		lit = l.hook("Complex", pos, float(pos, constant.Real(v), f32), float(pos, constant.Imag(v), f32))
		if b.Kind() == types.UntypedComplex {
			t = types.Typ[types.Complex128]
		}
	default:
		return nil
	}
	switch t {
	case types.Typ[types.Int], types.Typ[types.Float64], types.Typ[types.String], types.Typ[types.Bool], types.Typ[types.Complex128]:
		return lit
	}
	name := l.typeExpr(t, pos)
	if name == nil {
		return nil
	}
	return &ast.CallExpr{Fun: name, Lparen: pos, Args: []ast.Expr{lit}, Rparen: pos}
}

func number(pos token.Pos, kind token.Token, text string) ast.Expr {
	if abs, ok := strings.CutPrefix(text, "-"); ok {
		return &ast.ParenExpr{Lparen: pos, Rparen: pos, X: &ast.UnaryExpr{Op: token.SUB, OpPos: pos, X: &ast.BasicLit{Kind: kind, ValuePos: pos, Value: abs}}}
	}
	return &ast.BasicLit{Kind: kind, ValuePos: pos, Value: text}
}

func float(pos token.Pos, v constant.Value, single bool) ast.Expr {
	v = constant.ToFloat(v)
	bits := 64
	f, _ := constant.Float64Val(v)
	if single {
		f32, _ := constant.Float32Val(v)
		f, bits = float64(f32), 32
	}
	text := strconv.FormatFloat(f, 'g', -1, bits)
	if !strings.ContainsAny(text, ".e") {
		text += ".0"
	}
	return number(pos, token.FLOAT, text)
}

// zero returns an expression for a type's zero value.
func (l *lowering) zero(t types.Type, pos token.Pos) ast.Expr {
	switch u := t.Underlying().(type) {
	case *types.Basic:
		var v constant.Value
		switch {
		case u.Info()&types.IsBoolean != 0:
			v = constant.MakeBool(false)
		case u.Info()&types.IsString != 0:
			v = constant.MakeString("")
		case u.Kind() == types.UnsafePointer:
			return &ast.Ident{Name: "nil", NamePos: pos}
		default:
			v = constant.MakeInt64(0)
		}
		return l.constant(t, v, &ast.Ident{NamePos: pos})
	case *types.Struct, *types.Array:
		return &ast.CompositeLit{Type: l.typeExpr(t, pos), Lbrace: pos, Rbrace: pos}
	}
	return &ast.Ident{Name: "nil", NamePos: pos}
}

// typeExpr returns the expression of a type in the interpreter's names, or reports that it has no name and returns nil.
func (l *lowering) typeExpr(t types.Type, pos token.Pos) ast.Expr {
	id := func(name string) *ast.Ident { return &ast.Ident{Name: name, NamePos: pos} }
	switch t := t.(type) {
	case *types.Basic:
		if t.Kind() == types.UnsafePointer {
			break
		}
		return id(types.Default(t).(*types.Basic).Name())
	case *types.Alias:
		if types.Universe.Lookup(t.Obj().Name()) == t.Obj() {
			return id(t.Obj().Name())
		}
		return l.typeExpr(types.Unalias(t), pos)
	case *types.Pointer:
		if x := l.typeExpr(t.Elem(), pos); x != nil {
			return &ast.StarExpr{Star: pos, X: x}
		}
		return nil
	case *types.Slice:
		if x := l.typeExpr(t.Elem(), pos); x != nil {
			return &ast.ArrayType{Lbrack: pos, Elt: x}
		}
		return nil
	case *types.Array:
		if x := l.typeExpr(t.Elem(), pos); x != nil {
			return &ast.ArrayType{Lbrack: pos, Len: number(pos, token.INT, strconv.FormatInt(t.Len(), 10)), Elt: x}
		}
		return nil
	case *types.Map:
		k, v := l.typeExpr(t.Key(), pos), l.typeExpr(t.Elem(), pos)
		if k == nil || v == nil {
			return nil
		}
		return &ast.MapType{Map: pos, Key: k, Value: v}
	case *types.Chan:
		x := l.typeExpr(t.Elem(), pos)
		if x == nil {
			return nil
		}
		dir := map[types.ChanDir]ast.ChanDir{types.SendRecv: ast.SEND | ast.RECV, types.SendOnly: ast.SEND, types.RecvOnly: ast.RECV}[t.Dir()]
		return &ast.ChanType{Begin: pos, Dir: dir, Value: x}
	case *types.Signature:
		return l.funcType(t, pos)
	case *types.Struct:
		s := &ast.StructType{Struct: pos, Fields: &ast.FieldList{Opening: pos, Closing: pos}}
		for i := range t.NumFields() {
			x := l.typeExpr(t.Field(i).Type(), pos)
			if x == nil {
				return nil
			}
			f := &ast.Field{Type: x}
			if !t.Field(i).Embedded() {
				f.Names = []*ast.Ident{id(t.Field(i).Name())}
			}
			if tag := t.Tag(i); tag != "" {
				f.Tag = &ast.BasicLit{Kind: token.STRING, ValuePos: pos, Value: strconv.Quote(tag)}
			}
			s.Fields.List = append(s.Fields.List, f)
		}
		return s
	case *types.Interface:
		s := &ast.InterfaceType{Interface: pos, Methods: &ast.FieldList{Opening: pos, Closing: pos}}
		for m := range t.Methods() {
			ft := l.funcType(m.Signature(), pos)
			if ft == nil {
				return nil
			}
			s.Methods.List = append(s.Methods.List, &ast.Field{Names: []*ast.Ident{id(m.Name())}, Type: ft})
		}
		return s
	case *types.TypeParam:
		return id(t.Obj().Name())
	case *types.Named:
		return l.namedType(t, pos)
	}
	l.fail(pos, "a variable of type %s cannot be kept in a cell", types.TypeString(t, brief))
	return nil
}

func (l *lowering) namedType(t *types.Named, pos token.Pos) ast.Expr {
	o := t.Obj()
	var x ast.Expr
	if isSequence(t) {
		return l.typeExpr(t.Underlying(), pos)
	}
	if _, ok := ofCells(t); ok {
		return &ast.Ident{Name: l.typeInstance(t, pos).slot, NamePos: pos}
	}
	switch {
	case o.Pkg() == nil: // error, comparable
		x = &ast.Ident{Name: o.Name(), NamePos: pos}
	case l.slot(o) != "":
		x = &ast.Ident{Name: l.slot(o), NamePos: pos}
	case o.Pkg().Path() == "main" && o.Parent() != nil && l.funcBody != nil && o.Parent() != o.Pkg().Scope():
		x = &ast.Ident{Name: o.Name(), NamePos: pos}
	case o.Pkg().Path() == "main":
		l.fail(pos, "%s is declared inside a function or block; declare it at the top level of a cell to keep its values", o.Name())
		return nil
	case !o.Exported():
		l.fail(pos, "a value of the unexported type %s cannot be kept in a variable of a cell", types.TypeString(t, brief))
		return nil
	default:
		if !l.in.vm.has(o.Pkg().Path(), o.Name()) {
			l.fail(pos, "the interpreter has no %s", types.TypeString(t, brief))
			return nil
		}
		x = &ast.SelectorExpr{X: &ast.Ident{Name: l.alias(o.Pkg()), NamePos: pos}, Sel: &ast.Ident{Name: o.Name(), NamePos: pos}}
	}
	if t.TypeArgs().Len() > 0 {
		l.fail(pos, "cells cannot use the generic type %s of a compiled package", types.TypeString(t, brief))
		return nil
	}
	return x
}

func (l *lowering) funcType(t *types.Signature, pos token.Pos) ast.Expr {
	f := &ast.FuncType{Func: pos, Params: &ast.FieldList{Opening: pos, Closing: pos}}
	for i := range t.Params().Len() {
		v := t.Params().At(i)
		var x ast.Expr
		if t.Variadic() && i == t.Params().Len()-1 {
			if s, ok := v.Type().(*types.Slice); ok {
				if x = l.typeExpr(s.Elem(), pos); x != nil {
					x = &ast.Ellipsis{Ellipsis: pos, Elt: x}
				}
			}
		} else {
			x = l.typeExpr(v.Type(), pos)
		}
		if x == nil {
			return nil
		}
		f.Params.List = append(f.Params.List, &ast.Field{Type: x})
	}
	if t.Results().Len() > 0 {
		f.Results = &ast.FieldList{Opening: pos, Closing: pos}
		for v := range t.Results().Variables() {
			x := l.typeExpr(v.Type(), pos)
			if x == nil {
				return nil
			}
			f.Results.List = append(f.Results.List, &ast.Field{Type: x})
		}
	}
	return f
}

// brief qualifies types for messages: by package name, the cells' own by nothing.
func brief(p *types.Package) string {
	if p.Path() == "main" {
		return ""
	}
	return p.Name()
}
