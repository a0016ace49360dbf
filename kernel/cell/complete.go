package cell

import (
	"go/ast"
	"go/token"
	"go/types"
	"slices"
	"strings"
	"unicode/utf8"
)

// Completion is what may stand at the cursor.
type Completion struct {
	Start, End int // the part of the code that a match replaces, in code points
	Matches    []string
	Types      []string // beside Matches: "function", "module", "class", "instance", "keyword", "path", "value"
	Signatures []string // beside Matches
}

// candidate is one match before it is sorted: nearer names come first.
type candidate struct {
	name, kind, signature string
	distance              int
}

// Distances of candidates.
const (
	nearField = iota
	nearLocal
	nearCell
	nearPackage
	nearUniverse
	nearKeyword
)

// Complete returns what may stand at the cursor, which counts code points. It may be called while a cell runs.
func (in *Interpreter) Complete(code string, cursor int) Completion {
	offset := byteOffset(code, cursor)
	start := identStart(code, offset)
	var list []candidate
	if from, ok := importPath(code[:offset]); ok {
		start = from
		list = in.pathCandidates()
	} else if from, names := in.knownValues(code[:offset]); names != nil {
		start, list = from, names
	} else if !inComment(code[:offset]) {
		in.types.Lock()
		list = in.candidates(code, start, offset)
		in.types.Unlock()
	}
	c := Completion{Start: utf8.RuneCountInString(code[:start]), End: utf8.RuneCountInString(code[:offset])}
	for _, m := range match(list, code[start:offset]) {
		c.Matches = append(c.Matches, m.name)
		c.Types = append(c.Types, m.kind)
		c.Signatures = append(c.Signatures, m.signature)
	}
	return c
}

// match keeps the candidates that start with prefix; if there are none, those that do so in another case.
func match(list []candidate, prefix string) []candidate {
	keep := func(has func(string) bool) []candidate {
		var out []candidate
		seen := map[string]bool{}
		for _, c := range list {
			if has(c.name) && !seen[c.name] {
				seen[c.name] = true
				out = append(out, c)
			}
		}
		return out
	}
	slices.SortStableFunc(list, func(a, b candidate) int {
		if a.distance != b.distance {
			return a.distance - b.distance
		}
		return strings.Compare(a.name, b.name)
	})
	if out := keep(func(n string) bool { return strings.HasPrefix(n, prefix) }); len(out) > 0 {
		return out
	}
	low := strings.ToLower(prefix)
	return keep(func(n string) bool { return strings.HasPrefix(strings.ToLower(n), low) })
}

// importPath reports whether a text ends inside the string of an import declaration, and where that starts.
func importPath(text string) (start int, ok bool) {
	quote := strings.LastIndexAny(text, "\"`")
	if quote < 0 || strings.ContainsAny(text[quote+1:], "\n) ") {
		return 0, false
	}
	chunks := split(text[:quote])
	if len(chunks) == 0 || chunks[len(chunks)-1].kind != token.IMPORT {
		return 0, false
	}
	if strings.Count(text[chunks[len(chunks)-1].start:quote], `"`)%2 == 1 {
		return 0, false // behind a path
	}
	return quote + 1, true
}

func (in *Interpreter) pathCandidates() []candidate {
	var list []candidate
	for name := range in.lib.own {
		list = append(list, candidate{name: name, kind: "path", distance: nearPackage})
	}
	for _, p := range in.lib.paths {
		list = append(list, candidate{name: p, kind: "path", distance: nearUniverse})
	}
	return list
}

// knownValues returns the values of a string argument, in which a text ends, and where it starts: the names that a function
// ByName takes are what function Names of its package lists.
func (in *Interpreter) knownValues(text string) (start int, list []candidate) {
	line := text[strings.LastIndexByte(text, '\n')+1:]
	quote := strings.LastIndexByte(line, '"')
	if quote < 0 || strings.Count(line[:quote], `"`)%2 == 1 {
		return 0, nil
	}
	start = len(text) - len(line) + quote + 1
	end, argument := callee(text[:start-1])
	if end < 0 || argument > 0 || !strings.HasSuffix(text[:end], "ByName") {
		return 0, nil
	}
	in.types.Lock()
	defer in.types.Unlock()
	fn, _ := in.objectAt(text[:end])
	if fn == nil || fn.Pkg() == nil {
		return 0, nil
	}
	names, ok := in.vm.symbol(fn.Pkg().Path(), "Names").(func() []string)
	if !ok {
		return 0, nil
	}
	for _, n := range names() {
		list = append(list, candidate{name: n, kind: "value"})
	}
	return start, list
}

// inComment reports whether a text ends in a comment or a string, where there is nothing to complete.
func inComment(text string) bool {
	line := text[strings.LastIndexByte(text, '\n')+1:]
	if strings.Contains(line, "//") && strings.Count(line[:strings.Index(line, "//")], `"`)%2 == 0 {
		return true
	}
	if status, _ := open(text); status == "incomplete" && strings.Count(text, "`")%2 == 1 {
		return true
	}
	quotes := 0
	for i := 0; i < len(line); i++ {
		switch line[i] {
		case '\\':
			i++
		case '"':
			quotes++
		}
	}
	return quotes%2 == 1
}

// candidates finds what may stand at the cursor, whose word starts at start.
func (in *Interpreter) candidates(code string, start, offset int) []candidate {
	p := in.probe(code[:start] + cursorName)
	var list []candidate
	var found bool
	ast.Inspect(p.root, func(n ast.Node) bool {
		switch n := n.(type) {
		case *ast.SelectorExpr:
			if n.Sel.Name == cursorName {
				found = true
				list = p.members(n.X)
			}
		case *ast.CompositeLit:
			given := map[string]bool{}
			at := false
			for _, e := range n.Elts {
				if kv, ok := e.(*ast.KeyValueExpr); ok {
					e = kv.Key
				}
				if id, ok := e.(*ast.Ident); ok {
					given[id.Name] = true
					at = at || id.Name == cursorName
				}
			}
			if at {
				list = append(list, slices.DeleteFunc(keys(p.info.TypeOf(n)), func(c candidate) bool { return given[c.name] })...)
			}
		}
		return true
	})
	if found {
		return list
	}
	return append(list, p.visible()...)
}

// members returns the names of a package, or the fields and methods of an expression.
func (p *probe) members(x ast.Expr) []candidate {
	if id, ok := x.(*ast.Ident); ok {
		if pkg, ok := p.object(id).(*types.PkgName); ok {
			return p.packageMembers(pkg.Imported())
		}
	}
	tv, ok := p.info.Types[x]
	if !ok || tv.Type == nil {
		return nil
	}
	return fieldsAndMethods(tv.Type, tv.IsType())
}

func (p *probe) packageMembers(pkg *types.Package) []candidate {
	var list []candidate
	for _, name := range pkg.Scope().Names() {
		o := pkg.Scope().Lookup(name)
		if !o.Exported() || pkg.Path() == pagePath && (name == "Host" || name == "Attach") {
			continue
		}
		if _, constant := o.(*types.Const); !constant && !p.in.vm.has(pkg.Path(), name) && p.in.genericFunc(o) == nil {
			continue
		}
		list = append(list, describe(o, nearField))
	}
	return list
}

// fieldsAndMethods returns what a selector of a value of type t can name; of a type only its methods.
func fieldsAndMethods(t types.Type, onlyMethods bool) []candidate {
	var list []candidate
	if _, ptr := t.Underlying().(*types.Pointer); !ptr && !types.IsInterface(t) {
		t = types.NewPointer(t) // as if addressable
	}
	for sel := range types.NewMethodSet(t).Methods() {
		if visibleMember(sel.Obj()) {
			list = append(list, describe(sel.Obj(), nearField))
		}
	}
	if !onlyMethods {
		list = append(list, fieldsOf(t)...)
	}
	return list
}

// keys returns the fields that a literal of a struct type can give.
func keys(t types.Type) []candidate {
	if t == nil {
		return nil
	}
	if ptr, ok := t.Underlying().(*types.Pointer); ok { // an element of a literal of pointers
		t = ptr.Elem()
	}
	var list []candidate
	if s, ok := t.Underlying().(*types.Struct); ok {
		for f := range s.Fields() {
			if visibleMember(f) {
				list = append(list, describe(f, nearField))
			}
		}
	}
	return list
}

// fieldsOf returns the fields of a struct or of what points to one, embedded ones too.
func fieldsOf(t types.Type) []candidate {
	var list []candidate
	seen := map[types.Type]bool{}
	var walk func(t types.Type, depth int)
	walk = func(t types.Type, depth int) {
		if t == nil || seen[t] || depth > 5 {
			return
		}
		seen[t] = true
		if ptr, ok := t.Underlying().(*types.Pointer); ok {
			t = ptr.Elem()
		}
		s, ok := t.Underlying().(*types.Struct)
		if !ok {
			return
		}
		for f := range s.Fields() {
			if visibleMember(f) {
				list = append(list, describe(f, nearField))
			}
			if f.Embedded() {
				walk(f.Type(), depth+1)
			}
		}
	}
	walk(t, 0)
	return list
}

// visibleMember reports whether a cell may name a field or method.
func visibleMember(o types.Object) bool {
	return o.Exported() || o.Pkg() != nil && o.Pkg().Path() == "main"
}

// visible returns the names that are in scope at the cursor.
func (p *probe) visible() []candidate {
	var list []candidate
	var at token.Pos
	ast.Inspect(p.root, func(n ast.Node) bool {
		if id, ok := n.(*ast.Ident); ok && id.Name == cursorName {
			at = id.Pos()
		}
		return true
	})
	for _, scope := range p.info.Scopes {
		if !at.IsValid() || at < scope.Pos() || at > scope.End() {
			continue
		}
		for _, name := range scope.Names() {
			if o := scope.Lookup(name); !strings.Contains(name, mark) && o.Pos() < at {
				if _, pkg := o.(*types.PkgName); !pkg {
					list = append(list, describe(o, nearLocal))
				}
			}
		}
	}
	for _, name := range p.pkg.Scope().Names() {
		if !strings.Contains(name, mark) {
			list = append(list, describe(p.pkg.Scope().Lookup(name), nearCell))
		}
	}
	for _, imports := range []map[string]string{p.imports, p.in.imports, p.in.preloaded} {
		for name, path := range imports {
			list = append(list, candidate{name, "module", "import " + path, nearPackage})
		}
	}
	for _, name := range types.Universe.Names() {
		list = append(list, describe(types.Universe.Lookup(name), nearUniverse))
	}
	for t := token.BREAK; t <= token.VAR; t++ {
		list = append(list, candidate{t.String(), "keyword", "", nearKeyword})
	}
	return list
}

// describe makes a candidate of an object.
func describe(o types.Object, distance int) candidate {
	c := candidate{name: o.Name(), distance: distance}
	switch o := o.(type) {
	case *types.Func:
		c.kind = "function"
		c.signature = strings.TrimPrefix(types.TypeString(o.Type(), brief), "func")
	case *types.Builtin:
		c.kind = "function"
	case *types.TypeName:
		c.kind = "class"
		c.signature = kindWord(o.Type())
	case *types.PkgName:
		c.kind = "module"
	default:
		c.kind = "instance"
		if o.Type() != nil {
			c.signature = types.TypeString(o.Type(), brief)
		}
	}
	return c
}

func kindWord(t types.Type) string {
	switch t.Underlying().(type) {
	case *types.Struct:
		return "struct"
	case *types.Interface:
		return "interface"
	}
	return types.TypeString(t.Underlying(), brief)
}
