package cell

import (
	"fmt"
	"go/ast"
	"go/constant"
	"go/types"
	"math"
	"strings"
	"unicode/utf8"
)

// This file adds to the checker's findings what may have been meant.

// hint returns a finding's message with what may have been meant by a name that is not there.
func (in *Interpreter) hint(u *unit, p *types.Package, decls []ast.Decl, e types.Error) string {
	msg := lastLine.Replace(e.Msg)
	if name, ok := strings.CutPrefix(msg, "undefined: "); ok {
		name, _, _ = strings.Cut(name, " (but have ")
		if base, member, ok := strings.Cut(name, "."); ok {
			return in.undefinedMember(u, msg, base, member)
		}
		if in.packageNamed(u.imports, name) != "" {
			return fmt.Sprintf("use of package %s without selector", name)
		}
		if path := in.lib.named(name); path != "" {
			return fmt.Sprintf("%s; add import %q", msg, path)
		}
		var names []string
		for scope := p.Scope().Innermost(e.Pos); scope != nil; scope = scope.Parent() {
			names = append(names, scope.Names()...)
		}
		names = append(names, p.Scope().Names()...)
		names = append(names, types.Universe.Names()...)
		for _, imports := range []map[string]string{u.imports, in.imports, in.preloaded} {
			names = append(names, sorted(imports)...)
		}
		return meant(msg, "", name, names)
	}
	if strings.Contains(msg, " has no field or method ") && !strings.Contains(msg, ", but does have ") {
		for _, d := range decls {
			ast.Inspect(d, func(n ast.Node) bool {
				s, ok := n.(*ast.SelectorExpr)
				if !ok || s.Sel.Pos() != e.Pos {
					return true
				}
				var names []string
				if t := u.info.TypeOf(s.X); t != nil {
					for _, c := range fieldsAndMethods(t, u.info.Types[s.X].IsType()) {
						names = append(names, c.name)
					}
				}
				msg = meant(msg, types.ExprString(s.X)+".", s.Sel.Name, names)
				return false
			})
		}
	}
	return msg
}

// lastLine takes the function out that a last line of several values is to the checker.
var lastLine = strings.NewReplacer(" in argument to "+valuesName, "", "in call to "+valuesName+", ", "", " (declared at -)", "")

func (in *Interpreter) undefinedMember(u *unit, msg, base, member string) string {
	pkg, err := in.lib.Import(in.packageNamed(u.imports, base))
	if err != nil {
		return msg
	}
	var names []string
	for _, name := range pkg.Scope().Names() {
		if pkg.Scope().Lookup(name).Exported() {
			names = append(names, name)
		}
	}
	msg, _, _ = strings.Cut(msg, " (but have ")
	return meant(msg, base+".", member, names)
}

// meant adds the nearest of some names to a message, if one is near.
func meant(msg, qualifier, name string, names []string) string {
	best, least := "", 1+utf8.RuneCountInString(name)/3
	for _, n := range names {
		if strings.Contains(n, mark) || n == "_" || n == name {
			continue
		}
		d := distance(strings.ToLower(name), strings.ToLower(n))
		better := best == "" && utf8.RuneCountInString(name) > 1 || strings.HasPrefix(n, name) && len(n) > len(best)
		if d < least || d == least && better {
			best, least = n, d
		}
	}
	if best == "" {
		return msg
	}
	return msg + "; did you mean " + qualifier + best + "?"
}

// distance counts the letters that are put in, left out, replaced or exchanged with their neighbour between two words
// (Damerau, Comm. ACM 7, 1964, in the restricted form).
func distance(a, b string) int {
	x, y := []rune(a), []rune(b)
	rows := make([][]int, len(x)+1)
	for i := range rows {
		rows[i] = make([]int, len(y)+1)
		rows[i][0] = i
		for j := 1; j <= len(y); j++ {
			if i == 0 {
				rows[0][j] = j
				continue
			}
			cost := 1
			if x[i-1] == y[j-1] {
				cost = 0
			}
			rows[i][j] = min(rows[i-1][j]+1, rows[i][j-1]+1, rows[i-1][j-1]+cost)
			if i > 1 && j > 1 && x[i-1] == y[j-2] && x[i-2] == y[j-1] {
				rows[i][j] = min(rows[i][j], rows[i-2][j-2]+1)
			}
		}
	}
	return rows[len(x)][len(y)]
}

// overflow refuses a last expression that is a constant too large for the type that its value would have.
func (in *Interpreter) overflow(x ast.Expr, tv types.TypeAndValue) error {
	b, ok := tv.Type.Underlying().(*types.Basic)
	if !ok || tv.Value == nil || b.Info()&types.IsUntyped == 0 {
		return nil
	}
	fits := true
	switch b.Kind() {
	case types.UntypedInt:
		_, fits = constant.Int64Val(constant.ToInt(tv.Value))
	case types.UntypedRune:
		v, exact := constant.Int64Val(constant.ToInt(tv.Value))
		fits = exact && v >= math.MinInt32 && v <= math.MaxInt32
	case types.UntypedFloat:
		v, _ := constant.Float64Val(tv.Value)
		fits = !math.IsInf(v, 0)
	}
	if fits {
		return nil
	}
	return in.problems([]problem{{x.Pos(), fmt.Sprintf("cannot use %s (%s constant %s) as %s value (overflows)",
		types.ExprString(x), b, tv.Value, types.Default(b))}})
}

// goWords replaces what reflect says, on which the interpreter is built, by what Go says.
var goWords = strings.NewReplacer(
	"reflect: slice index out of range", "index out of range",
	"reflect: array index out of range", "index out of range",
	"reflect: string index out of range", "index out of range",
	"reflect.Value.Slice: slice index out of bounds", "slice bounds out of range",
	"reflect.Value.Slice: string slice index out of bounds", "slice bounds out of range",
	"reflect.Value.Slice3: slice index out of bounds", "slice bounds out of range",
)
