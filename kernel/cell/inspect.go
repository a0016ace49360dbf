package cell

import (
	"fmt"
	"go/ast"
	"go/doc/comment"
	"go/token"
	"go/types"
	"html"
	"strings"

	"linewright/plotting"
)

// Inspect says what the name at the cursor, which counts code points, is: its declaration and its comment, with detail 1 and
// more also the source of what a cell declared. Between the brackets of a call it is the function's name, and which of its
// parameters the cursor is at is said too. It may be called while a cell runs.
func (in *Interpreter) Inspect(code string, cursor, detail int) (plotting.Bundle, bool) {
	offset := byteOffset(code, cursor)
	in.types.Lock()
	defer in.types.Unlock()
	if end := wordAt(code, offset); end >= 0 {
		if o, owner := in.objectAt(code[:end]); o != nil {
			return in.about(o, owner, "", detail), true
		}
	}
	if end, argument := callee(code[:offset]); end >= 0 {
		if o, owner := in.objectAt(code[:end]); o != nil {
			return in.about(o, owner, parameter(o.Type(), argument), detail), true
		}
	}
	return plotting.Bundle{}, false
}

// parameter says which parameter of a function an argument is for; nothing where there is none.
func parameter(t types.Type, argument int) string {
	if t == nil {
		return ""
	}
	sig, ok := t.Underlying().(*types.Signature)
	if !ok {
		return ""
	}
	n := sig.Params().Len()
	if sig.Variadic() {
		argument = min(argument, n-1)
	}
	if argument >= n {
		return ""
	}
	v := sig.Params().At(argument)
	text := types.TypeString(v.Type(), brief)
	if sig.Variadic() && argument == n-1 {
		text = "..." + strings.TrimPrefix(text, "[]")
	}
	if v.Name() != "" {
		text = v.Name() + " " + text
	}
	return fmt.Sprintf("parameter %d of %d: %s", argument+1, n, text)
}

// wordAt returns the end of the identifier around or before a place, or -1.
func wordAt(code string, offset int) int {
	start, end := identStart(code, offset), identEnd(code, offset)
	if start == end {
		return -1
	}
	return end
}

// callee returns the end of the function's name in whose brackets a text ends, or -1, and the number of the argument there,
// from 0.
func callee(text string) (end, argument int) {
	items := tokens(text)
	depth := 0 // below zero by as many brackets as are open
	for i := len(items) - 1; i > 0; i-- {
		switch items[i].tok {
		case token.RPAREN, token.RBRACE, token.RBRACK:
			depth++
		case token.LBRACE, token.LBRACK:
			depth--
		case token.COMMA:
			if depth == 0 {
				argument++
			}
		case token.LPAREN:
			if depth--; depth < 0 {
				if end := nameBefore(items[:i]); end >= 0 {
					return end, argument
				}
			}
		}
		if depth < 0 { // what is open here is one argument of what is open around it
			depth, argument = 0, 0
		}
	}
	return -1, 0
}

// nameBefore returns the end of the name in which tokens end, type arguments left out, or -1.
func nameBefore(items []item) int {
	last := len(items) - 1
	if last >= 0 && items[last].tok == token.RBRACK {
		for depth := 0; last >= 0; last-- {
			if items[last].tok == token.RBRACK {
				depth++
			} else if items[last].tok == token.LBRACK {
				if depth--; depth == 0 {
					last--
					break
				}
			}
		}
	}
	if last < 0 || items[last].tok != token.IDENT {
		return -1
	}
	return items[last].end
}

// objectAt returns what the identifier at the end of a text stands for, and for a field or method the type that it was
// selected from.
func (in *Interpreter) objectAt(text string) (types.Object, types.Type) {
	name := text[identStart(text, len(text)):]
	if name == "" {
		return nil, nil
	}
	p := in.probe(text)
	var last *ast.Ident
	var from *ast.SelectorExpr
	ast.Inspect(p.root, func(n ast.Node) bool {
		switch n := n.(type) {
		case *ast.SelectorExpr:
			if n.Sel.Name == name && (last == nil || n.Sel.Pos() >= last.Pos()) {
				last, from = n.Sel, n
			}
		case *ast.Ident:
			if n.Name == name && (last == nil || n.Pos() > last.Pos()) {
				last, from = n, nil
			}
		}
		return true
	})
	if last != nil {
		if o := p.object(last); o != nil {
			if from != nil {
				if sel := p.info.Selections[from]; sel != nil {
					return o, sel.Recv()
				}
			}
			return o, nil
		}
	}
	if path := in.packageNamed(p.imports, name); path != "" {
		if pkg, err := in.lib.Import(path); err == nil {
			return types.NewPkgName(token.NoPos, nil, name, pkg), nil
		}
	}
	return types.Universe.Lookup(name), nil
}

// about describes an object as text and HTML, with a note under its declaration.
func (in *Interpreter) about(o types.Object, owner types.Type, note string, detail int) plotting.Bundle {
	head := in.declaration(o, owner)
	text := in.comment(o, owner)
	source := ""
	if e := in.names[o.Name()]; detail > 0 && e != nil && e.obj == o && e.decl != nil {
		source = e.decl.text
	}
	var plainText, rich strings.Builder
	plainText.WriteString(head)
	fmt.Fprintf(&rich, "<pre>%s</pre>\n", html.EscapeString(head))
	if note != "" {
		plainText.WriteString("\n" + note)
		fmt.Fprintf(&rich, "<p>%s</p>\n", html.EscapeString(note))
	}
	if text != "" {
		doc := new(comment.Parser).Parse(text)
		printer := &comment.Printer{TextWidth: 90, DocLinkURL: func(*comment.DocLink) string { return "" }}
		plainText.WriteString("\n\n" + strings.TrimRight(string(printer.Text(doc)), "\n"))
		rich.Write(printer.HTML(doc))
	}
	if source != "" {
		plainText.WriteString("\n\n" + source)
		fmt.Fprintf(&rich, "<pre>%s</pre>\n", html.EscapeString(source))
	}
	return plotting.Bundle{
		Data:     map[string]any{"text/plain": plainText.String(), "text/html": rich.String()},
		Metadata: map[string]any{},
	}
}

// declaration writes an object as its declaration.
func (in *Interpreter) declaration(o types.Object, owner types.Type) string {
	switch o := o.(type) {
	case *types.PkgName:
		return fmt.Sprintf("package %s // import %q", o.Imported().Name(), o.Imported().Path())
	case *types.TypeName:
		return in.typeDeclaration(o)
	case *types.Const:
		return types.ObjectString(o, brief) + " = " + o.Val().String()
	case *types.Var:
		if o.IsField() && owner != nil {
			return fmt.Sprintf("field %s.%s %s", typeText(owner), o.Name(), types.TypeString(o.Type(), brief))
		}
	}
	return types.ObjectString(o, brief)
}

func typeText(t types.Type) string {
	if p, ok := t.(*types.Pointer); ok {
		t = p.Elem()
	}
	return types.TypeString(t, brief)
}

const longest = 40 // lines of a type's declaration

// typeDeclaration writes a type with its fields and methods, one a line.
func (in *Interpreter) typeDeclaration(o *types.TypeName) string {
	var b strings.Builder
	lines := 0
	line := func(format string, args ...any) {
		if lines++; lines <= longest {
			fmt.Fprintf(&b, format+"\n", args...)
		}
	}
	name := types.TypeString(o.Type(), brief)
	s, ok := o.Type().Underlying().(*types.Struct)
	if !ok {
		line("type %s %s", name, types.TypeString(o.Type().Underlying(), brief))
	} else {
		line("type %s struct {", name)
		for f := range s.Fields() {
			if !visibleMember(f) {
				continue
			}
			note := ""
			if text := in.docOf(o, "."+f.Name()); text != "" {
				note = " // " + strings.SplitN(text, "\n", 2)[0]
			}
			line("\t%s %s%s", f.Name(), types.TypeString(f.Type(), brief), note)
		}
		line("}")
	}
	if named, ok := o.Type().(*types.Named); ok {
		for m := range named.Methods() {
			if visibleMember(m) {
				line("%s", types.ObjectString(m, brief))
			}
		}
	}
	if lines > longest {
		fmt.Fprintf(&b, "... and %d lines more\n", lines-longest)
	}
	return strings.TrimRight(b.String(), "\n")
}

// comment returns an object's doc comment.
func (in *Interpreter) comment(o types.Object, owner types.Type) string {
	if p, ok := o.(*types.PkgName); ok {
		return in.lib.doc(p.Imported().Path(), "")
	}
	if e := in.names[o.Name()]; e != nil && e.obj == o && e.decl != nil {
		return e.decl.doc
	}
	switch x := o.(type) {
	case *types.Func:
		if recv := x.Signature().Recv(); recv != nil {
			if t, ok := typeName(recv.Type()).(*types.TypeName); ok {
				if e := in.names[t.Name()+"."+o.Name()]; e != nil && e.obj == o {
					return e.decl.doc
				}
				return in.docOf(t, "."+o.Name())
			}
			return ""
		}
	case *types.Var:
		if x.IsField() {
			if t, ok := typeName(owner).(*types.TypeName); ok {
				return in.docOf(t, "."+o.Name())
			}
			return ""
		}
	}
	return in.docOf(o, "")
}

func (in *Interpreter) docOf(o types.Object, member string) string {
	if o.Pkg() == nil || o.Pkg().Path() == "main" {
		return ""
	}
	return in.lib.doc(o.Pkg().Path(), o.Name()+member)
}
