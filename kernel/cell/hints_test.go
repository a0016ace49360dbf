package cell

import "testing"

func TestHints(t *testing.T) {
	tests := []struct{ name, code, want string }{
		{"the end of the cell", "x := 3\ny := x +", "cell[1]:2:9: expected operand, found the end of the cell"},
		{"the end before empty lines", "x := 3\ny := x +\n\n", "cell[1]:2:9: expected operand, found the end of the cell"},
		{"the end of a declaration", "func f() {\n\tx := 1", "cell[1]:2:8: expected '}', found the end of the cell"},
		{"the end of a type", "type T struct", "cell[1]:1:14: expected '{', found the end of the cell"},
		{"an open bracket", "x := (3", "cell[1]:1:8: expected ')', found the end of the cell"},
		{"the end of an import", "import", "cell[1]:1:7: missing import path"},
		{"a bracket too many", "x := 3\n}", "cell[1]:2:1: unexpected }: it closes nothing"},
		{"a constant too large", "const c = 1 << 70\nc", "cell[1]:2:1: cannot use c (untyped int constant 1180591620717411303424) as int value (overflows)"},
		{"a list with one", "1 << 70, 1", "cannot use 1 << 70 (untyped int constant 1180591620717411303424) as int value (overflows)"},
		{"a name of a package", "linecode.HDB", "undefined: linecode.HDB; did you mean linecode.HDB3?"},
		{"in another case", "fmt.println(1)", "undefined: fmt.println; did you mean fmt.Println?"},
		{"a field", "var s struct{ Rate float64 }\ns.Rat", "(type struct{Rate float64} has no field or method Rat); did you mean s.Rate?"},
		{"a method", "type T int\nfunc (T) Level() {}\nT(1).Levl()", "did you mean T(1).Level?"},
		{"a variable", "level := 3\nlevl + 1", "undefined: levl; did you mean level?"},
		{"a local variable", "func f(volts int) int { return vlots }", "undefined: vlots; did you mean volts?"},
		{"nothing near", "qqqq", "cell[1]:1:1: undefined: qqqq\n    qqqq"},
		{"a package", "strings.ToUpper(\"a\")", `undefined: strings; add import "strings"`},
		{"a package alone", "linecode", "cell[1]:1:1: use of package linecode without selector"},
		{"an imported package alone", "import \"strings\"\nx := strings", "cell[1]:2:6: use of package strings without selector"},
		{"panics of a callback", "linecode.New(linecode.Spec{Name: \"a\", Bits: 1, Start: 0, Step: func(any, uint) (any, []float64) { var q []float64; return 0, q[:3] }})", "Step panicked in state 0 on word 0: slice bounds out of range"},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) { start(t).is(tt.code, "error: "+tt.want) })
	}
}
