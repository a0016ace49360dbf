// Package godoc reads the doc comments of a package from its source.
package godoc

import (
	"fmt"
	"go/ast"
	"go/build"
	"go/doc"
	"go/parser"
	"go/token"
	"path/filepath"
	"slices"
	"strings"
)

// Table maps the exported names of a package to their doc comments: "Name", "Type.Method", "Type.Field", and "" for the
// package itself. Names without a comment are absent.
type Table map[string]string

// Read returns the table of the package whose files lie in dir.
func Read(dir, path string, files []string) (Table, error) {
	fset := token.NewFileSet()
	var parsed []*ast.File
	for _, name := range files {
		f, err := parser.ParseFile(fset, filepath.Join(dir, name), nil, parser.ParseComments)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", path, err)
		}
		parsed = append(parsed, f)
	}
	if len(parsed) == 0 {
		return Table{}, nil
	}
	p, err := doc.NewFromFiles(fset, parsed, path)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	t := Table{}
	// The package comment of the standard library can be a manual; its first paragraphs are what inspection shows.
	t.add("", head(p.Doc, 1200))
	t.values(p.Consts)
	t.values(p.Vars)
	t.funcs("", p.Funcs)
	for _, typ := range p.Types {
		t.add(typ.Name, typ.Doc)
		t.values(typ.Consts)
		t.values(typ.Vars)
		t.funcs("", typ.Funcs)
		t.funcs(typ.Name+".", typ.Methods)
		t.fields(typ)
	}
	return t, nil
}

func (t Table) add(name, text string) {
	if text = strings.TrimSpace(text); text != "" {
		t[name] = text
	}
}

func (t Table) funcs(prefix string, funcs []*doc.Func) {
	for _, f := range funcs {
		t.add(prefix+f.Name, f.Doc)
	}
}

func (t Table) values(values []*doc.Value) {
	for _, v := range values {
		for _, spec := range v.Decl.Specs {
			spec := spec.(*ast.ValueSpec)
			text := spec.Doc.Text() + spec.Comment.Text()
			if text == "" {
				text = v.Doc
			}
			for _, n := range spec.Names {
				if n.IsExported() {
					t.add(n.Name, text)
				}
			}
		}
	}
}

func (t Table) fields(typ *doc.Type) {
	for _, spec := range typ.Decl.Specs {
		spec := spec.(*ast.TypeSpec)
		var list *ast.FieldList
		switch u := spec.Type.(type) {
		case *ast.StructType:
			list = u.Fields
		case *ast.InterfaceType:
			list = u.Methods
		default:
			continue
		}
		for _, f := range list.List {
			for _, n := range f.Names {
				if n.IsExported() {
					t.add(spec.Name.Name+"."+n.Name, f.Doc.Text()+f.Comment.Text())
				}
			}
		}
	}
}

// head returns the paragraphs of text that fit into n bytes, at least one.
func head(text string, n int) string {
	paragraphs := strings.Split(strings.TrimSpace(text), "\n\n")
	out := paragraphs[0]
	for _, p := range paragraphs[1:] {
		if len(out)+len(p) > n {
			break
		}
		out += "\n\n" + p
	}
	return out
}

// Files returns the names of a folder's Go files that are no tests and build here.
func Files(dir string) ([]string, error) {
	p, err := build.ImportDir(dir, 0)
	if err != nil {
		return nil, err
	}
	return p.GoFiles, nil
}

// Exported returns the exported package-level names that the files declare, sorted.
func Exported(dir string, files []string) ([]string, error) {
	fset := token.NewFileSet()
	seen := map[string]bool{}
	for _, name := range files {
		f, err := parser.ParseFile(fset, filepath.Join(dir, name), nil, parser.SkipObjectResolution)
		if err != nil {
			return nil, err
		}
		for _, d := range f.Decls {
			switch d := d.(type) {
			case *ast.FuncDecl:
				seen[d.Name.Name] = seen[d.Name.Name] || d.Recv == nil
			case *ast.GenDecl:
				for _, s := range d.Specs {
					switch s := s.(type) {
					case *ast.TypeSpec:
						seen[s.Name.Name] = true
					case *ast.ValueSpec:
						for _, id := range s.Names {
							seen[id.Name] = true
						}
					}
				}
			}
		}
	}
	var names []string
	for n, ok := range seen {
		if ok && ast.IsExported(n) {
			names = append(names, n)
		}
	}
	slices.Sort(names)
	return names, nil
}
