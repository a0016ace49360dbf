package cell

import (
	"embed"
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"go/types"
	"io/fs"
	"path"
	"reflect"
	"strconv"
	"strings"

	"github.com/traefik/yaegi/interp"

	"linewright/kernel/cell/generic/compiled"
)

// The interpreter has no generic code of packages. So that of the standard library is here once more, as Go source of our own
// in folder generic, one package for each of the standard ones: the checker goes by the standard package, and each instance
// that a cell uses is compiled from the source here, as those of the cells' own generic code are. What needs compiled code,
// such as sorting, is in package compiled.

//go:embed generic
var genericSource embed.FS

const compiledPath = "linewright/kernel/cell/generic/compiled"

// compiledSymbols is the symbol table of package compiled.
var compiledSymbols = interp.Exports{compiledPath + "/compiled": {
	"Sort":  reflect.ValueOf(compiled.Sort),
	"Order": reflect.ValueOf(compiled.Order),
	"Pull":  reflect.ValueOf(compiled.Pull),
}}

// sourceCell is the number of the cell in which the sources of packages stand: no trace shows a place in it.
const sourceCell = -1

// genericPackage is the source of a standard package's generic code. Interpreter.types guards it.
type genericPackage struct {
	pkg     *types.Package
	imports map[string]string // name -> path
	decls   map[string]*decl
}

// generic returns the source of a package's generic code, or nil if there is none.
func (in *Interpreter) generic(pkg *types.Package) *genericPackage {
	if pkg == nil || pkg.Path() == "main" {
		return nil
	}
	g, known := in.generics[pkg.Path()]
	if !known {
		if files, err := fs.Glob(genericSource, path.Join("generic", pkg.Path(), "*.go")); err == nil && len(files) > 0 && pkg.Path() != "compiled" {
			g = in.readGeneric(pkg.Path(), files)
		}
		in.generics[pkg.Path()] = g
	}
	return g
}

// readGeneric reads and checks the source of a package. It panics if the source is wrong, which the tests would show.
func (in *Interpreter) readGeneric(path string, files []string) *genericPackage {
	g := &genericPackage{imports: map[string]string{}, decls: map[string]*decl{}}
	fset := token.NewFileSet()
	var list []*ast.File
	for _, name := range files {
		if strings.HasSuffix(name, "_test.go") {
			continue
		}
		text, err := genericSource.ReadFile(name)
		if err != nil {
			panic(err)
		}
		f, err := parser.ParseFile(fset, name, text, parser.SkipObjectResolution)
		if err != nil {
			panic(err)
		}
		list = append(list, f)
		for _, s := range f.Imports {
			of, err := strconv.Unquote(s.Path.Value)
			if err != nil {
				panic(err)
			}
			p, err := in.lib.Import(of)
			if err != nil {
				panic(err)
			}
			if g.imports[p.Name()] = of; s.Name != nil {
				delete(g.imports, p.Name())
				g.imports[s.Name.Name] = of
			}
		}
		for _, d := range f.Decls {
			if fn, ok := d.(*ast.FuncDecl); ok {
				start, end := fset.Position(fn.Pos()), fset.Position(fn.End())
				g.decls[fn.Name.Name] = &decl{cell: sourceCell, line: start.Line, column: start.Column, text: string(text[start.Offset:end.Offset])}
			}
		}
	}
	conf := types.Config{Importer: in.lib, GoVersion: goVersion, IgnoreFuncBodies: true}
	pkg, err := conf.Check(path, fset, list, nil)
	if err != nil {
		panic(err)
	}
	g.pkg = pkg
	return g
}

// compiledPackage is what the checker knows of package compiled.
func compiledPackage() *types.Package {
	pkg := types.NewPackage(compiledPath, "compiled")
	basic := func(name string) types.Type { return types.Universe.Lookup(name).Type() }
	tuple := func(list ...types.Type) *types.Tuple {
		var vars []*types.Var
		for _, t := range list {
			vars = append(vars, types.NewParam(token.NoPos, pkg, "", t))
		}
		return types.NewTuple(vars...)
	}
	fn := func(params, results *types.Tuple) *types.Signature {
		return types.NewSignatureType(nil, nil, nil, params, results, false)
	}
	integer, boolean := basic("int"), basic("bool")
	next := fn(nil, tuple(boolean))
	for name, sig := range map[string]*types.Signature{
		"Sort":  fn(tuple(basic("any")), nil),
		"Order": fn(tuple(integer, boolean, fn(tuple(integer, integer), tuple(integer))), tuple(types.NewSlice(integer))),
		"Pull":  fn(tuple(fn(tuple(next), nil)), tuple(next, fn(nil, nil))),
	} {
		pkg.Scope().Insert(types.NewFunc(token.NoPos, pkg, name, sig))
	}
	pkg.MarkComplete()
	return pkg
}

// genericFunc returns the function that an identifier names, in the source if it is one of a package; nil if it is not
// generic or has no source.
func (in *Interpreter) genericFunc(o types.Object) *types.Func {
	fn, ok := o.(*types.Func)
	if !ok || fn.Pkg() == nil {
		return nil
	}
	if fn.Pkg().Path() == "main" {
		return fn
	}
	g := in.generic(fn.Pkg())
	if g == nil {
		return nil
	}
	fn, _ = g.pkg.Scope().Lookup(fn.Name()).(*types.Func)
	return fn
}

// scope returns a package with the source's own names except some.
func (g *genericPackage) scope(without map[string]bool) *types.Package {
	p := types.NewPackage("main", "main")
	for _, name := range g.pkg.Scope().Names() {
		if !without[name] {
			p.Scope().Insert(g.pkg.Scope().Lookup(name))
		}
	}
	return p
}

// missing says why a name of a package is not available.
func missing(p *types.Package, name string) string {
	if o := p.Scope().Lookup(name); o != nil && isGeneric(o) {
		return fmt.Sprintf("%s.%s is not available: cells can use generic code of their own, and of cmp, errors, iter, maps, math/rand/v2, slices and sync", p.Name(), name)
	}
	return fmt.Sprintf("%s.%s is not available: the interpreter's tables end before it", p.Name(), name)
}
