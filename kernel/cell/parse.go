package cell

import (
	"errors"
	"fmt"
	"go/ast"
	"go/parser"
	"go/scanner"
	"go/token"
	"slices"
	"strings"
)

// source is a parsed cell.
type source struct {
	n     int
	text  string
	decls []*decl
	fn    *ast.FuncDecl // the statements, as the body of a function
	list  *ast.CallExpr // a last line of several values, as a call of a function that takes them
}

// decl is one top-level declaration with all that is needed to compile it again.
type decl struct {
	cell, line, column int // where its text starts
	text               string
	node               ast.Decl
	signature          string // of a method
	doc                string // the comment above it
}

// yaegi scopes imports by the base name of the file, so all cells have the same one.
const fileBase = "_.go"

// file gives the interpreter's file name of a cell.
func file(n int) string { return fmt.Sprintf("cell[%d]/%s", n, fileBase) }

// parse parses a cell. Its positions, looked up in fset, are those of the cell.
func parse(fset *token.FileSet, n int, text string) (*source, error) {
	src := &source{n: n, text: text}
	if err := surplus(n, text); err != nil {
		return nil, err
	}
	var errs scanner.ErrorList
	statements := []byte(text)
	chunks := split(text)
	for i, c := range chunks {
		if c.kind == token.PACKAGE {
			line, column := place(text, c.start)
			return nil, scanner.ErrorList{{Pos: token.Position{Filename: file(n), Line: line, Column: column}, Msg: "a cell has no package clause"}}
		}
		if c.kind == token.ILLEGAL {
			if i == len(chunks)-1 && src.values(fset, c) {
				blank(statements[c.start:c.end])
			}
			continue
		}
		blank(statements[c.start:c.end])
		line, column := place(text, c.start)
		d := &decl{cell: n, line: line, column: column, text: strings.TrimRight(text[c.start:c.end], " \t\r\n;")}
		d.doc = above(text[:c.start])
		if err := d.parse(fset); err != nil {
			errs = add(errs, err)
			continue
		}
		src.decls = append(src.decls, d)
	}
	header := fmt.Sprintf("package main; func %sbody() {/*line %s:1:1*/", kernel, fileBase)
	f, err := parser.ParseFile(fset, file(n), header+string(statements)+"\n}", parser.SkipObjectResolution)
	if err != nil {
		errs = add(errs, err)
	}
	if len(errs) > 0 {
		return nil, inside(errs, n, text)
	}
	src.fn = f.Decls[0].(*ast.FuncDecl)
	if src.list != nil {
		src.fn.Body.List = append(src.fn.Body.List, &ast.ExprStmt{X: src.list})
	}
	return src, nil
}

// values parses a last line "a, b", which is no Go but says what it means: show both.
func (s *source) values(fset *token.FileSet, c chunk) bool {
	piece := s.text[c.start:c.end]
	depth, commas, end := 0, 0, 0
	for _, it := range tokens(piece) {
		if it.tok != token.SEMICOLON {
			end = it.end // before a comment
		}
		switch it.tok {
		case token.LPAREN, token.LBRACE, token.LBRACK:
			depth++
		case token.RPAREN, token.RBRACE, token.RBRACK:
			depth--
		case token.COMMA:
			if depth == 0 {
				commas++
			}
		case token.ASSIGN, token.DEFINE, token.SEMICOLON:
			if depth == 0 && it.lit != "\n" {
				return false
			}
		}
	}
	if commas == 0 || strings.HasSuffix(piece[:end], ",") {
		return false
	}
	line, column := place(s.text, c.start)
	header := fmt.Sprintf("package main; var _ = %s(/*line %s:%d:%d*/", valuesName, fileBase, line, column)
	f, err := parser.ParseFile(fset, file(s.n), header+piece[:end]+")", parser.SkipObjectResolution)
	if err != nil {
		return false
	}
	s.list, _ = f.Decls[0].(*ast.GenDecl).Specs[0].(*ast.ValueSpec).Values[0].(*ast.CallExpr)
	return s.list != nil && !s.list.Ellipsis.IsValid()
}

// inside keeps the errors in the cell's text. What the parser says at or behind its end, of brackets that are ours, means that
// the end came too early, and matters only if nothing else is wrong.
func inside(errs scanner.ErrorList, n int, text string) error {
	errs.Sort()
	line, column := place(text, len(strings.TrimRight(text, " \t\r\n")))
	kept := slices.DeleteFunc(slices.Clone(errs), func(e *scanner.Error) bool {
		return e.Pos.Line > line || e.Pos.Line == line && e.Pos.Column >= column
	})
	if len(kept) > 0 {
		return kept
	}
	msg, rest, _ := strings.Cut(errs[0].Msg, ", found ")
	if rest != "" {
		msg += ", found the end of the cell"
	}
	return scanner.ErrorList{{Pos: token.Position{Filename: file(n), Line: line, Column: column}, Msg: msg}}
}

// surplus finds a closing bracket that closes nothing.
func surplus(n int, text string) error {
	depth := 0
	for _, it := range tokens(text) {
		switch it.tok {
		case token.LPAREN, token.LBRACE, token.LBRACK:
			depth++
		case token.RPAREN, token.RBRACE, token.RBRACK:
			if depth--; depth < 0 {
				line, column := place(text, it.start)
				return scanner.ErrorList{{Pos: token.Position{Filename: file(n), Line: line, Column: column}, Msg: "unexpected " + it.tok.String() + ": it closes nothing"}}
			}
		}
	}
	return nil
}

// parse parses the declaration's text, anew each time, since the lowering changes the tree.
func (d *decl) parse(fset *token.FileSet) error {
	header := fmt.Sprintf("package main;/*line %s:%d:%d*/", fileBase, d.line, d.column)
	f, err := parser.ParseFile(fset, file(d.cell), header+d.text+"\n", parser.SkipObjectResolution)
	if err != nil {
		return err
	}
	if len(f.Decls) != 1 {
		return fmt.Errorf("%d declarations where one was cut out: %q", len(f.Decls), d.text)
	}
	d.node = f.Decls[0]
	if f, ok := d.node.(*ast.FuncDecl); ok {
		d.signature = signature(f)
	}
	return nil
}

// above returns the text of the line comments that stand directly before a declaration.
func above(text string) string {
	lines := strings.Split(text, "\n")
	var doc []string
	for i := len(lines) - 2; i >= 0; i-- {
		line, ok := strings.CutPrefix(strings.TrimSpace(lines[i]), "//")
		if !ok {
			break
		}
		doc = append(doc, strings.TrimPrefix(line, " "))
	}
	slices.Reverse(doc)
	return strings.Join(doc, "\n")
}

func add(list scanner.ErrorList, err error) scanner.ErrorList {
	var more scanner.ErrorList
	if errors.As(err, &more) {
		return append(list, more...)
	}
	return append(list, &scanner.Error{Msg: err.Error()})
}

// blank overwrites all but line ends with spaces.
func blank(b []byte) {
	for i := range b {
		if b[i] != '\n' {
			b[i] = ' '
		}
	}
}

// place returns line and column, both from 1 and the column in bytes, of an offset.
func place(text string, offset int) (line, column int) {
	before := text[:offset]
	return strings.Count(before, "\n") + 1, offset - strings.LastIndexByte(before, '\n')
}

// receiver returns the name of a method's receiver type and whether it is generic.
func receiver(f *ast.FuncDecl) (name string, generic bool) {
	if f.Recv == nil || len(f.Recv.List) == 0 {
		return "", false
	}
	t := ast.Unparen(f.Recv.List[0].Type)
	if s, ok := t.(*ast.StarExpr); ok {
		t = ast.Unparen(s.X)
	}
	switch x := t.(type) {
	case *ast.Ident:
		return x.Name, false
	case *ast.IndexExpr:
		t, generic = x.X, true
	case *ast.IndexListExpr:
		t, generic = x.X, true
	}
	if id, ok := t.(*ast.Ident); ok {
		return id.Name, generic
	}
	return "", generic
}

// declared returns the package-level names that a declaration introduces; a method introduces none.
func declared(d ast.Decl) []string {
	var names []string
	switch d := d.(type) {
	case *ast.FuncDecl:
		if d.Recv == nil {
			names = append(names, d.Name.Name)
		}
	case *ast.GenDecl:
		for _, s := range d.Specs {
			switch s := s.(type) {
			case *ast.TypeSpec:
				names = append(names, s.Name.Name)
			case *ast.ValueSpec:
				for _, id := range s.Names {
					names = append(names, id.Name)
				}
			}
		}
	}
	return slices.DeleteFunc(names, func(n string) bool { return n == "_" })
}

// variables returns the names that a cell's own statements declare, in source order.
func (s *source) variables() []*ast.Ident {
	var ids []*ast.Ident
	for _, st := range s.fn.Body.List {
		for l, ok := st.(*ast.LabeledStmt); ok; l, ok = st.(*ast.LabeledStmt) {
			st = l.Stmt
		}
		switch st := st.(type) {
		case *ast.AssignStmt:
			if st.Tok != token.DEFINE {
				continue
			}
			for _, l := range st.Lhs {
				if id, ok := l.(*ast.Ident); ok && id.Name != "_" {
					ids = append(ids, id)
				}
			}
		case *ast.DeclStmt:
			if g, ok := st.Decl.(*ast.GenDecl); ok && g.Tok == token.VAR {
				for _, sp := range g.Specs {
					for _, id := range sp.(*ast.ValueSpec).Names {
						if id.Name != "_" {
							ids = append(ids, id)
						}
					}
				}
			}
		}
	}
	return ids
}

// mentions returns the names of all identifiers below a node.
func mentions(n ast.Node) map[string]bool {
	names := map[string]bool{}
	ast.Inspect(n, func(n ast.Node) bool {
		if id, ok := n.(*ast.Ident); ok {
			names[id.Name] = true
		}
		return true
	})
	return names
}
