package cell

import (
	"slices"
	"strings"
	"testing"
)

// What the interpreter gets wrong in function bodies, most of it silently, and the lowering puts right. The expected values
// are those of the language.
func TestLowering(t *testing.T) {
	tests := []struct {
		name  string
		cells []string // code, want
	}{
		{"a named result starts at zero", []string{
			"func acc(n int) (s int) { for i := range n { s += i }; return }\ntot := acc(3)\ntot = acc(4)\ntot", "6",
			"type q struct{ a, b int }\nfunc mk() (r q) { r.a = 1; return }\nv := q{5, 6}\nv = mk()\nv", "{1 0}",
			"x := 7\nfunc reads() (r int) { r = 1; return x + r }\nx = reads()\nx", "8",
		}},
		{"parallel assignment", []string{
			"i, a := 1, []int{1, 2, 3}\ni, a[i] = 0, 9\nfmt.Println(i, a)", "0 [1 9 3]\n",
			"a[0], a[2] = a[2], a[0]\na", "[3 9 1]", "func at(k int) int { return a[k] }\na[1], a[0] = at(0), at(1)\na", "[9 3 1]",
			"b, c := at(0), []int{7}\nfmt.Println(b, c)", "9 [7]\n", "if v, w := at(0), []int{1}; v > len(w) { fmt.Print(v, w) }", "9 [1]",
			"for i, j := 0, 4; i < j; i, j = i+1, j-1 { fmt.Print(i, j, \" \") }", "0 4 1 3 ",
			"func two() (int, int) { return 1, 8 }\ni, a[i] = two()\nfmt.Println(i, a)", "1 [8 3 1]\n",
		}},
		{"receive", []string{
			"q := make(chan int, 2)\nq <- 1; q <- 2\nv := <-q\nv = 5\nv += <-q\nv", "7",
			"func f(q chan int) int { q <- 3; v := <-q; v++; return v }\nf(q)", "4",

			"c := make(chan int, 9)\nfor k := range 9 { c <- k }\ns := make([]int, 2)\ns[1] = <-c + 10\ns[0] = <-c\nfmt.Println(s, 2*<-c, -<-c)", "[1 10] 4 -3\n",
			"type named chan int\nfunc (n named) next() int { return <-n }\nnamed(c).next()", "4",
			"ok := false\ns[1], ok = <-c\nfmt.Println(s, ok)", "[1 5] true\n", "select {\ncase s[0] = <-c:\n}\ns[0]", "6",
		}},
		{"range that assigns", []string{"var i int\nvar r rune\nfor i, r = range \"aé\" {\n}\nfmt.Println(i, string(r))", "1 é\n"}},
		{"arguments of a deferred call", []string{
			"func f() { x := 1; defer fmt.Println(\"deferred\", x); x = 2; fmt.Println(x) }\nf()", "2\ndeferred 1\n",
			"func g() { for i := range 3 { defer fmt.Print(i) } }\ng()", "210",
		}},
		{"a deferred call of a closure of the same function", []string{"func f() (n int) { inc := func() { n++ }; defer func() { inc(); fmt.Println(n) }(); return 4 }\nf()", "5\n5"}},
		{"literals handed to compiled code in a loop", []string{
			"import \"strings\"\nvar fs []func(rune) rune\nkeep := func(f func(rune) rune) { fs = append(fs, f) }\nfor i := range 3 { x := rune(i); keep(func(r rune) rune { return r + x }) }\nstrings.Map(fs[0], \"a\") + strings.Map(fs[2], \"a\")", "ac",
		}},
		{"type switches on interfaces", []string{
			"type T int\nfunc (t T) String() string { return fmt.Sprint(\"T\", int(t)) }\ntype named interface{ String() string }", "",
			"func kind(v any) string {\n\tswitch x := v.(type) {\n\tcase nil:\n\t\treturn \"nil\"\n\tcase error:\n\t\treturn \"error \" + x.Error()\n\tcase named:\n\t\treturn \"named \" + x.String()\n\tcase int, string:\n\t\treturn fmt.Sprint(\"plain \", x)\n\tcase []int:\n\t\treturn fmt.Sprint(len(x))\n\t}\n\treturn \"other\"\n}", "",
			"fmt.Println(kind(nil), kind(fmt.Errorf(\"e\")), kind(T(3)), kind(4), kind([]int{1}), kind(2.5))", "nil error e named T3 plain 4 1 other\n",
			"loop:\nfor {\n\tswitch any(1).(type) {\n\tcase int:\n\t\tbreak loop\n\t}\n}", "",
		}},
		{"assertions to interfaces", []string{
			"type V interface{ V() int }\ntype T int\nfunc (t T) V() int { return int(t) }\ntype S struct{ a int }\nfunc (s *S) V() int { return s.a }", "",
			"var e any = T(3)\nv, ok := e.(V)\nfmt.Println(v.V(), ok)", "3 true\n", "any(&S{4}).(V).V()", "4",
			"_, ok = any(nil).(V)\nok", "false", "_, ok = any(5).(V)\nok", "false", "any(5).(V)", "error: interface conversion: int is not V", "var none any\nnone.(fmt.Stringer)", "error: interface is nil, not fmt.Stringer",
			"if w, ok := e.(V); ok { fmt.Print(w.V()) }", "3",
			"import \"strings\"\nimport \"io\"\nvar r any = strings.NewReader(\"abc\")\nrd, ok := r.(io.Reader)\nok, rd != nil", "true true", "_, ok = r.(V)\nok", "false",
			"r.(interface{ Len() int })", "error: cells cannot assert a *strings.Reader to their own interface interface{Len() int}",
			"var er error = fmt.Errorf(\"w: %w\", io.EOF)\ner.(interface{ Unwrap() error })", "error: cells cannot assert a *fmt.wrapError",
			"_, a := any(5).(T)\n_, b := any(T(5)).(int)\n_, c := any(T(5)).(T)\nfmt.Println(a, b, c)", "false false true\n",
		}},
		{"equality of interface values", []string{
			"type V interface{ V() int }\ntype T int\nfunc (t T) V() int { return int(t) }\nvar v V = T(3)\nfmt.Println(v == V(T(3)), v == V(T(4)), v != nil, any(1) == any(1.0))", "true false true false\n",
			"import \"errors\"\nimport \"io\"\nvar e error = io.EOF\nfmt.Println(e == io.EOF, errors.Is(fmt.Errorf(\"w: %w\", e), io.EOF))", "true true\n",
			"type own struct{ n int }\nfunc (o *own) Error() string { return \"own\" }\nvar x error = &own{1}\nw := fmt.Errorf(\"w: %w\", x)\nvar target *own\nfmt.Println(x == x, errors.Is(w, x), errors.As(w, &target), target.n)", "true true true 1\n",
		}},
		{"method values and expressions", []string{
			"type T struct{ a int }\nfunc (t T) Get(k int) int { return t.a + k }\nfunc (t *T) Set(a int) { t.a = a }\ntype E struct{ *T }", "",
			"x := T{5}\ng := x.Get\nx.a = 9\nfmt.Println(g(1), T.Get(x, 1), (*T).Get(&x, 2))", "6 10 11\n",
			"(*T).Set(&x, 4)\ne := E{&x}\nfmt.Println(E.Get(e, 1), e.Get(2), x.a)", "5 6 4\n",
			"import \"strings\"\nf := (*strings.Builder).Len\nf(&strings.Builder{})", "0",
		}},
		{"constants", []string{
			"const big = 1 << 100\nbig >> 98", "4", "const h = 1.0 / 3\nh * 3", "1", "math.MaxUint64 / 2 > math.MaxInt32", "true", "var f float32 = 0.1\nfloat64(f) == 0.1", "false",
			"type w int\nconst (\n\ta w = iota * 10\n\tb\n)\nfmt.Printf(\"%d %T\", b, b)", "10 main.w", "z := 2i * 2i\nz", "(-4+0i)", "'a' + 1", "98",
		}},
		{"new of a value", []string{"p := new(3 + 4)\n*p", "7"}},
		{"instances and interfaces", []string{
			"type Box[T any] struct{ v T }\nfunc (b Box[T]) String() string { return fmt.Sprint(\"box \", b.v) }\nvar s fmt.Stringer = Box[int]{3}\ns.String()", "box 3",
			"any(Box[string]{\"x\"}).(fmt.Stringer).String()", "box x",
		}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) { start(t).cells(tt.cells...) })
	}
}

// Traces name the place of each function's current statement, innermost first.
func TestTrace(t *testing.T) {
	s := start(t)
	s.is("type T struct{ v []int }\nfunc (t *T) at(i int) int {\n\tn := len(t.v)\n\t_ = n\n\treturn t.v[i]\n}\nfunc f(i int) int {\n\tx := 1\n\treturn x + (&T{}).at(i)\n}", "")
	for _, tt := range []struct {
		code string
		want []string
	}{
		{"y := 2\ny = f(3)", []string{"panic: runtime error: index out of range", "    cell[1]:5:2 in T.at", "    cell[1]:9:20 in f", "    cell[2]:2:5"}},
		{"g := func() int {\n\tz := 0\n\treturn 1 / z\n}\nfor i := range 3 {\n\tif i == 2 {\n\t\tg()\n\t}\n}", []string{"panic: runtime error: integer divide by zero", "    cell[3]:3:11 in func", "    cell[3]:7:3"}},
		{"a := 1\nvar m map[string]int\nm[\"a\"] = a", []string{"panic: assignment to entry in nil map", "    cell[4]:3:2"}},
		{"panic(fmt.Sprint(\"own \", 1))", []string{"panic: own 1", "    cell[5]:1:1"}},
		{"func r(n int) int {\n\tif n == 0 {\n\t\tpanic(\"deep\")\n\t}\n\treturn r(n-1)\n}\nr(9)", []string{"panic: deep", "    cell[6]:3:3 in r", "    cell[6] in r, called by itself", "    cell[6]:7:1"}},
	} {
		_, err := s.run(tt.code)
		if got := trace(err); !slices.Equal(got, tt.want) {
			t.Errorf("%s\nhas the trace\n%s\nwant\n%s", tt.code, strings.Join(got, "\n"), strings.Join(tt.want, "\n"))
		}
	}
	// A panic that was recovered leaves nothing in the trace of the next.
	s.is("func() { defer func() { recover() }(); f(1) }()", "")
	_, err := s.run("panic(\"second\")")
	if got := trace(err); len(got) != 2 {
		t.Errorf("the second panic has the trace %q", got)
	}
}
