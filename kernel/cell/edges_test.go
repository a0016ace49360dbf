package cell

import "testing"

// The numbered cases are the sharp edges of running Go cells on yaegi: what its own top level gets wrong.
func TestEdges(t *testing.T) {
	tests := []struct {
		name  string
		cells []string // code, want
	}{
		{"1 redeclare from itself", []string{"x := 3", "", "x := x+1", "", "x", "4"}},
		{"1 with another type", []string{"x := 3", "", "x := float64(x)/2", "", "x", "1.5"}},
		{"2 comma ok of a map", []string{`m := map[string]int{"a": 1}`, "", `v, ok := m["a"]`, "", "fmt.Println(v, ok)", "1 true\n"}},
		{"2 comma ok of a channel", []string{"c := make(chan int, 2); c <- 7; c <- 8", "", "v, ok := <-c", "", "fmt.Println(v, ok)", "7 true\n", "<-c", "8"}},
		{"2 assertion", []string{"var a any = 5", "", "a.(int)", "5", "s, ok := a.(string)", "", "fmt.Printf(\"%q %v\", s, ok)", `"" false`}},
		{"2 type switch", []string{"var a any = 2.5\nswitch v := a.(type) {\ncase float64:\n\tfmt.Println(\"float\", v)\ndefault:\n\tfmt.Println(\"other\")\n}", "float 2.5\n"}},
		{"2 element of an earlier cell", []string{"s := []int{4, 5}", "", "p := s[0]", "", "var y = s", "", "fmt.Println(p, len(y))", "4 2\n"}},
		{"3 redefine a type and its method", []string{
			"type T struct{ a int }\nfunc (t T) M() string { return fmt.Sprint(\"old \", t.a) }\nt := T{1}\nt.M()", "old 1",
			"type T struct{ a, b int }\nfunc (t T) M() string { return fmt.Sprint(\"new \", t.a, t.b) }\nT{1, 2}.M()", "new 1 2",
			"t.M()", "old 1",
			"var u T = t", "error: cell[4]:1:11",
		}},
		{"3 redefine a method in the same words", []string{
			"type T struct{ a int }\nfunc (t T) M() int { return t.a }\nfunc (t T) String() string { return fmt.Sprint(\"T\", t.M()) }", "", "t := T{1}\nvar s fmt.Stringer = t", "",
			"fmt.Println(t.M(), s.String())", "1 T1\n",
			"type T struct{ a int }\nfunc (t T) M() int { return t.a + 10 }\nfunc (t T) String() string { return fmt.Sprint(\"T\", t.M()) }", "",
			"fmt.Println(t.M(), s.String())", "11 T11\n",
			"func (t T) M() int { return t.a + 20 }", "", "fmt.Println(t.M(), s.String())", "21 T21\n",
			"func (t T) M() string { return \"text\" }", "", "fmt.Println(T{5}.M(), T{6}.String())", "text Ttext\n",
		}},
		{"3 add a method to an earlier type", []string{
			"type T struct{ a int }", "", "t := T{4}", "", "func (t *T) Inc() { t.a++ }\nt.Inc()\nt.a", "5", "p := &t\np.Inc(); p.a", "6",
			"func (t T) Bad() int { return nosuch }", "error: cell[5]:1:31: undefined: nosuch", "t.Bad()", "error: undefined",
			"func (t T) Bad() int { return t.a }\nt.Bad()", "6",
		}},
		{"3 embedding", []string{
			"type A struct{ n int }\nfunc (a *A) Add(k int) { a.n += k }\nfunc (a A) Get() int { return a.n }", "",
			"type B struct{ A; name string }", "", "b := B{A{1}, \"b\"}\nb.Add(3)\nfmt.Println(b.Get(), b.n, b.A.n)", "4 4 4\n",
			"type G interface{ Get() int }\nvar g G = b\ng.Get()", "4",
		}},
		{"4 callers see a redefined function", []string{
			"func f() int { return 1 }\nfunc g() int { return f() + 10 }\nfunc h() int { return g() + 100 }", "", "h()", "111", "func f() int { return 2 }", "", "h()", "112",
			"func f() string { return \"s\" }", "", "g()", "12", "f()", "s",
		}},
		{"4 methods see a redefined function", []string{
			"func f() int { return 1 }\ntype T int\nfunc (t T) M() int { return f() + int(t) }\nx := T(10)\nfunc use() int { return x.M() }", "", "use()", "11", "func f() int { return 2 }", "", "use(), ", "error: ", "use()", "12",
			"const k = 3\nfunc g() int { return k }", "", "const k = 4", "", "g()", "4",
		}},
		{"4 a function of a variable with a new type", []string{
			"x := 2\nfunc f() string { return fmt.Sprint(x, \"!\") }\nf()", "2!", "x := 2.5", "", "f()", "2.5!",
		}},
		{"5 a function that fails to compile", []string{"func g() int { return nosuch() }", "error: cell[1]:1:23: undefined: nosuch", "func g() int { return 1 }", "", "g()", "1"}},
		{"6 a failed cell changes nothing", []string{"a := 1; b := a + \"s\"", "error: cell[1]:1:14", "a", "error: undefined: a"}},
		{"6 a panic keeps what was done", []string{"a := 1\npanic(\"stop\")\nb := 2", "error: stop", "a", "1", "b", "0"}},
		{"7 the same import twice", []string{`import "strings"`, "", "import \"strings\"\nstrings.ToUpper(\"a\")", "A", `strings.Repeat("x", 2)`, "xx"}},
		{"7 import, func and statements mixed", []string{"import \"strings\"\nx := f(2)\nfunc f(n int) string { return strings.Repeat(\"z\", n) }\nx", "zz"}},
		{"8 a top-level defer runs once", []string{`defer fmt.Println("deferred"); fmt.Println("first")`, "first\ndeferred\n", "1", "1"}},
		{"14 several values", []string{"func f() (int, string) { return 1, \"a\" }\nf()", "1 a"}},
		{"18 a named result and := of it", []string{"func one() (int, error) { return 1, fmt.Errorf(\"bad\") }", "", "func f() (i int, err error) {\n\tr, err := one()\n\ti = r\n\treturn\n}\nv, e := f()\nfmt.Println(v, e)", "1 bad\n"}},
		{"19 overflow", []string{"uint8(200) + 100", "error: cell[1]:1:"}},
		{"19 third line", []string{"x := 1\n\ny := x +  z", "error: cell[1]:3:11: undefined: z"}},
		{"23 main, len, math", []string{"func main() {}", "", "func len(x int) int { return x * 2 }", "", "len(4)", "8", "math := 3", "", "math", "3"}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) { start(t).cells(tt.cells...) })
	}
}
