package cell

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/scanner"
	"go/token"
	"go/types"
	"strings"
	"unicode"
	"unicode/utf8"
)

// A probe is what the checker makes of a cell up to the cursor, however broken it is: completion and inspection ask it.
// Statements before the cursor's own that do not parse are left out.
type probe struct {
	in      *Interpreter
	pkg     *types.Package
	info    *types.Info
	imports map[string]string
	root    *ast.File
	fset    *token.FileSet
}

// cursorName stands at the cursor where a name is being typed.
const cursorName = kernel + "cursor"

// probe checks text, which ends at the cursor. Interpreter.types must be held.
func (in *Interpreter) probe(text string) *probe {
	p := &probe{in: in, info: newInfo(), imports: map[string]string{}, fset: token.NewFileSet()}
	brackets := closers(text)
	var best *ast.File
	var bestErrors int
	// What may be missing after the cursor, beside brackets: a block, a colon, a value.
	for _, more := range []string{"", " {}", ":", ": 0", " int", " := 0"} {
		f, errs := p.parse(text + more + brackets)
		if f != nil && (best == nil || errs < bestErrors) {
			best, bestErrors = f, errs
		}
		if best != nil && bestErrors == 0 {
			break
		}
	}
	p.root = best
	if best == nil {
		p.root = &ast.File{Name: ast.NewIdent("main")}
	}
	p.check()
	return p
}

// parse parses the chunks of a text into one file, and counts the errors of the last one.
func (p *probe) parse(text string) (*ast.File, int) {
	chunks := split(text)
	statements := []byte(text)
	var decls []ast.Decl
	errors := 0
	for i, c := range chunks {
		last := i == len(chunks)-1
		piece := text[c.start:c.end]
		switch c.kind {
		case token.ILLEGAL:
			if _, err := parser.ParseFile(token.NewFileSet(), "", "package p; func _() {"+piece+"\n}", parser.SkipObjectResolution); err != nil {
				if !last {
					blank(statements[c.start:c.end])
				} else {
					errors = countErrors(err)
				}
			}
		default:
			blank(statements[c.start:c.end])
			f, err := parser.ParseFile(p.fset, "", "package p; "+piece, parser.SkipObjectResolution|parser.AllErrors)
			if f != nil && (err == nil || last) {
				decls = append(decls, f.Decls...)
			}
			if last && err != nil {
				errors = countErrors(err)
			}
		}
	}
	f, _ := parser.ParseFile(p.fset, "", "package p; func "+kernel+"body() {"+string(statements)+"\n}", parser.SkipObjectResolution|parser.AllErrors)
	if f == nil {
		return nil, 0
	}
	f.Decls = append(decls, f.Decls...)
	return f, errors
}

func countErrors(err error) int {
	if list, ok := err.(scanner.ErrorList); ok {
		return len(list)
	}
	return 1
}

// check type-checks what was parsed; errors are expected.
func (p *probe) check() {
	own := map[string]bool{}
	var decls []ast.Decl
	for _, d := range p.root.Decls {
		if g, ok := d.(*ast.GenDecl); ok && g.Tok == token.IMPORT {
			for _, s := range g.Specs {
				s := s.(*ast.ImportSpec)
				path := p.in.lib.resolve(strings.Trim(s.Path.Value, "\"`"))
				pkg, err := p.in.lib.Import(path)
				if err != nil {
					continue
				}
				name := pkg.Name()
				if s.Name != nil {
					name = s.Name.Name
				}
				p.imports[name] = path
			}
			continue
		}
		if f, ok := d.(*ast.FuncDecl); ok && f.Recv != nil {
			if name, generic := receiver(f); !generic && p.in.isType(name) && !declares(p.root, name) {
				d = asFunction(f, fmt.Sprintf("%sf%s%d", kernel, mark, len(decls)))
			}
		}
		for _, n := range declared(d) {
			own[n] = true
		}
		decls = append(decls, d)
	}
	p.pkg = p.in.scope(own, p.imports)
	u := &unit{imports: p.imports}
	f := &ast.File{Name: ast.NewIdent("main"), Package: p.root.Package, Decls: append(p.in.importDecls(u, p.pkg, decls), decls...)}
	conf := types.Config{Importer: p.in.lib, GoVersion: goVersion, Error: func(error) {}}
	// The text is unfinished, so it has errors; what could be found out stands in info.
	_ = types.NewChecker(&conf, p.fset, p.pkg, p.info).Files([]*ast.File{f})
	p.root = f
}

func declares(f *ast.File, name string) bool {
	for _, d := range f.Decls {
		if g, ok := d.(*ast.GenDecl); ok && g.Tok == token.TYPE {
			for _, n := range declared(g) {
				if n == name {
					return true
				}
			}
		}
	}
	return false
}

func (in *Interpreter) isType(name string) bool {
	e := in.names[name]
	if e == nil {
		return false
	}
	_, ok := e.obj.(*types.TypeName)
	return ok
}

// closers returns the brackets that close what is open at the end of a text.
func closers(text string) string {
	var stack []byte
	for _, it := range tokens(text) {
		switch it.tok {
		case token.LPAREN:
			stack = append(stack, ')')
		case token.LBRACE:
			stack = append(stack, '}')
		case token.LBRACK:
			stack = append(stack, ']')
		case token.RPAREN, token.RBRACE, token.RBRACK:
			if len(stack) > 0 {
				stack = stack[:len(stack)-1]
			}
		}
	}
	var b strings.Builder
	for i := len(stack) - 1; i >= 0; i-- {
		if stack[i] == '}' {
			b.WriteByte('\n')
		}
		b.WriteByte(stack[i])
	}
	return b.String()
}

// object returns what an identifier stands for.
func (p *probe) object(id *ast.Ident) types.Object {
	if o := p.info.Uses[id]; o != nil {
		return o
	}
	return p.info.Defs[id]
}

// byteOffset turns a cursor in code points, clamped to the code, into one in bytes.
func byteOffset(code string, cursor int) int {
	offset := 0
	for ; cursor > 0 && offset < len(code); cursor-- {
		_, n := utf8.DecodeRuneInString(code[offset:])
		offset += n
	}
	return offset
}

// identStart returns where the identifier starts that ends at offset.
func identStart(code string, offset int) int {
	for offset > 0 {
		r, n := utf8.DecodeLastRuneInString(code[:offset])
		if r != '_' && !unicode.IsLetter(r) && !unicode.IsDigit(r) {
			break
		}
		offset -= n
	}
	return offset
}

// identEnd returns where the identifier ends that starts at or before offset.
func identEnd(code string, offset int) int {
	for offset < len(code) {
		r, n := utf8.DecodeRuneInString(code[offset:])
		if r != '_' && !unicode.IsLetter(r) && !unicode.IsDigit(r) {
			break
		}
		offset += n
	}
	return offset
}
