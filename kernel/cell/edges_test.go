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
		{"4 a variable in the place of a function or type", []string{
			"func f() int { return 1 }\nfunc g() int { return f() + 10 }\ntype T struct{ a int }\nfunc (t T) M() int { return t.a }\nt := T{3}", "",
			"f := 2.5\nT := 7\nfmt.Println(f, T, g(), t.M())", "2.5 7 11 3\n", "func f() int { return 2 }\ng()", "12",
		}},
		{"4 methods see a redefined function", []string{
			"func f() int { return 1 }\ntype T int\nfunc (t T) M() int { return f() + int(t) }\nx := T(10)\nfunc use() int { return x.M() }", "", "use()", "11", "func f() int { return 2 }", "", "use()", "12",
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
		{"13 recover", []string{
			"func try(f func()) (r any) { defer func() { r = recover() }(); f(); return nil }", "",
			"try(func() { panic(\"s\") }) == \"s\"", "true",
			"e := fmt.Errorf(\"bad\")\ntry(func() { panic(e) }) == e", "true",
			"func index(s []int, i int) int { return s[i] }", "",
			"r := try(func() { index(nil, 3) })\nerr, ok := r.(error)\nfmt.Println(ok, err)", "true runtime error: index out of range\n",
			"try(func() { page.Slot(\"\") }).(error).Error()[:5]", "page:",
			"switch v := try(func() { var p *struct{ a int }; p.a = 1 }).(type) {\ncase error:\n\tfmt.Println(\"an error,\", v)\ndefault:\n\tfmt.Println(\"no error\")\n}", "an error, runtime error: invalid memory address or nil pointer dereference\n",
			"type own struct{ n int }\nfunc (o own) Error() string { return fmt.Sprint(\"own \", o.n) }", "",
			"x, ok := try(func() { panic(own{4}) }).(error)\nfmt.Println(ok, x)", "true own 4\n",
			"try(func() {})", "<nil>",
			"panic(own{5})", "error: panic: own 5",
		}},
		{"14 kinds of values", []string{
			"nil", "<nil>", "func() {}", "func()", "math.Sqrt", "func(x float64) float64", "func void() {}\nvoid()", "",
			"type temp float64\nfunc (t temp) String() string { return fmt.Sprintf(\"%g C\", float64(t)) }\ntemp(3)", "3 C",
			"[]temp{1, 2}", "[1 C 2 C]", "map[string]temp{\"b\": 2, \"a\": 1}", "map[a:1 C b:2 C]",
			"type box struct{ T temp; t temp; n int }\nbox{1, 2, 3}", "{1 C 2 3}", "&box{1, 2, 3}", "&{1 C 2 3}",
			"func ok() (int, error) { return 7, nil }\nok()", "7", "func bad() (int, error) { return 7, fmt.Errorf(\"no good\") }\nbad()", "error: error: no good",
			"fmt.Errorf(\"alone\")", "error: error: alone", "func two() (int, string, error) { return 1, \"b\", nil }\ntwo()", "1 b",
			"fmt.Print(\"x\")", "x", "import \"io\"\nimport \"strings\"\nio.Copy(io.Discard, strings.NewReader(\"abc\"))", "3",
			"io.WriteString(io.Discard, \"abc\")", "", "\"a\\nb\"", "a\nb",
			"fmt.Printf(\"%v %+v %T %.1f\\n\", box{1, 2, 3}, box{1, 2, 3}, box{}, []temp{4})", "{1 C 2 3} {T:1 C t:2 n:3} main.box [4.0]\n",
			"fmt.Println([]any{temp(2), box{}}, fmt.Sprint(temp(1)))", "[2 C {0 C 0 0}] 1 C\n",
			"var none *box\nnone", "<nil>", "struct{ a int; B string }{1, \"x\"}", "{1 x}",
		}},
		{"15 closures in loops", []string{
			"var fs []func() int\nfor i := 0; i < 3; i++ { fs = append(fs, func() int { i += 10; return i }) }\nfor _, f := range fs { fmt.Print(f(), \" \") }", "10 11 12 ",
			"fs = nil\nfor i, v := range []int{5, 6} { fs = append(fs, func() int { return i + v }) }\nfs[0]() + 10*fs[1]()", "75",
			"n := 0\nfor i := 0; i < 6; i++ {\n\tif i == 1 {\n\t\tcontinue\n\t}\n\tfunc() { i++; n++ }()\n}\nn", "3",
			"var ps []*int\nfor i := 0; i < 3; i++ { ps = append(ps, &i) }\n*ps[0] + *ps[1] + *ps[2]", "3",
			"import \"sync\"\nvar mu sync.Mutex\nvar wg sync.WaitGroup\nsum := 0\nfor i := range 10 { wg.Add(1); go func() { defer wg.Done(); mu.Lock(); sum += i; mu.Unlock() }() }\nwg.Wait()\nsum", "45",
			"func rev() string { s := \"\"; func() { for i := range 3 { defer func() { s += fmt.Sprint(i) }() } }(); return s }\nrev()", "210",
		}},
		{"15 range over an integer", []string{
			"for i := range 3 { fmt.Print(i, \" \") }", "0 1 2 ", "k := 0\nfor range 4 { k++ }\nk", "4", "for i := range uint8(3) { fmt.Printf(\"%T%d \", i, i) }", "uint80 uint81 uint82 ",
			"outer:\nfor i := range 3 {\n\tfor j := range 3 {\n\t\tif j == 1 { continue outer }\n\t\tif i == 2 { break outer }\n\t\tfmt.Print(i, j, \" \")\n\t}\n}", "0 0 1 0 ",
		}},
		{"15 range over a function", []string{
			"func count(n int) func(func(int) bool) {\n\treturn func(yield func(int) bool) {\n\t\tfor i := range n {\n\t\t\tif !yield(i) {\n\t\t\t\tfmt.Print(\"stopped \")\n\t\t\t\treturn\n\t\t\t}\n\t\t}\n\t}\n}", "",
			"for x := range count(4) { fmt.Print(x, \" \") }", "0 1 2 3 ", "for range count(2) { fmt.Print(\"!\") }", "!!", "var x int\nfor x = range count(3) {\n}\nx", "2",
			"for x := range count(9) { if x == 2 { continue }; if x == 4 { break }; fmt.Print(x, \" \") }", "0 1 3 stopped ",
			"func find(k int) (int, error) {\n\tfor x := range count(9) {\n\t\tfor y := range count(9) {\n\t\t\tif x*y == k { return x, nil }\n\t\t}\n\t}\n\treturn -1, fmt.Errorf(\"none\")\n}\na, e := find(12)\nfmt.Println(a, e)\na, e = find(100)\nfmt.Println(a, e)", "stopped stopped 2 <nil>\n-1 none\n",
			"outer:\nfor x := range count(5) {\n\tfor y := range count(5) {\n\t\tif y == 2 { continue outer }\n\t\tif x == 1 { break outer }\n\t\tfmt.Print(x, y, \" \")\n\t}\n}", "0 0 0 1 stopped stopped stopped ",
			"for i := 0; i < 3; i++ { for x := range count(3) { if x > i { break }; fmt.Print(i, x, \" \") } }", "0 0 stopped 1 0 1 1 stopped 2 0 2 1 2 2 ",
			"func d() (s string) {\n\tdefer func() { s += \"end\" }()\n\tfor x := range count(3) { defer func() { s += fmt.Sprint(x) }() }\n\tdefer func() { s += \"first \" }()\n\treturn \"r \"\n}\nd()", "r first 210end",
			"func named() (a int, b string) {\n\tfor x := range count(5) {\n\t\tswitch {\n\t\tcase x == 3:\n\t\t\ta, b = x, \"n\"\n\t\t\treturn\n\t\t}\n\t}\n\treturn\n}\nnamed()", "stopped 3 n",
			"func pairs(yield func(string, int) bool) { _ = yield(\"a\", 1) && yield(\"b\", 2) }\nfor k, v := range pairs { fmt.Print(k, v) }\nfor k := range pairs { fmt.Print(k) }", "a1b2ab",
			"func bad(yield func(int) bool) { yield(1); yield(2) }\nfor range bad { break }", "error: range function continued iteration after function for loop body returned false",
			"func r() { for range count(1) { defer func() { recover() }() } }", "error: cells cannot recover in a call that a loop over a function defers",
		}},
		{"15 sequences", []string{
			"import \"iter\"\ntype tree struct { l, r *tree; v int }\nfunc (t *tree) push(yield func(int) bool) bool { return t == nil || t.l.push(yield) && yield(t.v) && t.r.push(yield) }\nfunc (t *tree) All() iter.Seq[int] { return func(yield func(int) bool) { t.push(yield) } }\ntr := &tree{&tree{nil, nil, 1}, &tree{nil, nil, 3}, 2}\nfor v := range tr.All() { fmt.Print(v) }", "123",
			"var fs []func() int\nfor v := range tr.All() { fs = append(fs, func() int { v++; return v }) }\nfs[0](), fs[0](), fs[2]()", "2 3 4",
			"func Filter[T any](s iter.Seq[T], keep func(T) bool) iter.Seq[T] {\n\treturn func(yield func(T) bool) {\n\t\tfor x := range s {\n\t\t\tif keep(x) && !yield(x) { return }\n\t\t}\n\t}\n}\nfor v := range Filter(tr.All(), func(v int) bool { return v > 1 }) { fmt.Print(v) }", "23",
			"import \"strings\"\nfor s := range strings.SplitSeq(\"a,b,c\", \",\") { if s == \"c\" { break }; fmt.Print(s) }", "ab",
		}},
		{"16 inferred generics", []string{
			"func Map[T, U any](s []T, f func(T) U) []U {\n\tvar out []U\n\tfor _, x := range s {\n\t\tout = append(out, f(x))\n\t}\n\treturn out\n}\nMap([]int{1, 2}, func(i int) string { return fmt.Sprint(i * 2) })", "[2 4]",
			"func Sum[T int | float64](xs ...T) T { var s T; for _, x := range xs { s += x }; return s }\nfmt.Println(Sum(1, 2), Sum(0.5, 1))", "3 1.5\n",
			"func Keys[M ~map[K]V, K comparable, V any](m M) (k []K) { for x := range m { k = append(k, x) }; return }\nKeys(map[string]int{\"z\": 1})", "[z]",
			"type Stack[T any] struct{ items []T }\nfunc (s *Stack[T]) Push(x T) { s.items = append(s.items, x) }\nfunc (s Stack[E]) String() string { return fmt.Sprint(\"stack \", s.items) }\nvar st Stack[int]\nst.Push(4)\nst", "stack [4]",
			"type list[T any] struct{ v T; next *list[T] }\nl := &list[string]{\"a\", &list[string]{v: \"b\"}}\nl.next.v", "b",
			"func Sum[T int | float64](xs ...T) T { return 1 }\nSum(5)", "1",
			"func half[T int | float64](x T) T { return x / 2 }\nfunc quarter[T int | float64](x T) T { return half(half(x)) }\nfmt.Println(quarter(9), quarter(9.0))", "2 2.25\n",
		}},
		{"16 min, max, clear", []string{
			"a, b := 3, 2\nfmt.Println(min(a, b), max(a, b, 7), min(2.5, float64(a)), max(\"a\", fmt.Sprint(b)))", "2 7 2.5 a\n",
			"m := map[int]int{1: 1}\nclear(m)\nlen(m)", "0", "s := []int{1, 2}\nclear(s)\ns", "[0 0]",
		}},
		{"16 generic functions of packages", []string{
			"import (\n\t\"cmp\"\n\t\"maps\"\n\t\"slices\"\n\t\"strings\"\n)\ns := []int{3, 1, 2}\nslices.Sort(s)\ns, slices.Max(s), slices.Index(s, 2)", "[1 2 3] 3 1",
			"slices.SortFunc(s, func(a, b int) int { return b - a })\ns", "[3 2 1]", "slices.SortFunc(s, cmp.Compare)\ns", "[1 2 3]", "slices.Sorted(maps.Keys(map[string]int{\"b\": 1, \"a\": 2}))", "[a b]",
			"type p struct { name string; age int }\nps := []p{{\"b\", 3}, {\"a\", 3}, {\"c\", 1}}\nslices.SortFunc(ps, func(x, y p) int { return cmp.Or(cmp.Compare(x.age, y.age), strings.Compare(x.name, y.name)) })\nps", "[{c 1} {a 3} {b 3}]",
			"type ty int\nfunc (t ty) String() string { return fmt.Sprint(\"ty\", int(t)) }\nts := []ty{3, 1, 2}\nslices.Sort(ts)\nfor i, v := range slices.Backward(ts) { fmt.Print(i, v, \" \") }", "2 ty3 1 ty2 0 ty1 ",
			"func top[T cmp.Ordered](x []T) T { y := slices.Clone(x); slices.Sort(y); return y[len(y)-1] }\ntop([]string{\"x\", \"z\"}), top([]float64{2, 3})", "z 3",
			"import \"iter\"\nnext, stop := iter.Pull(slices.Values(s))\na, ok := next()\nstop()\nb, more := next()\na, ok, b, more", "1 true 0 false",
			"import \"sync\"\nonce := sync.OnceValue(func() int { fmt.Print(\"once \"); return 4 })\nonce(), once()", "once 4 4",
			"import \"time\"\nds := []time.Duration{time.Second, time.Millisecond}\nslices.Sort(ds)\nds", "[1ms 1s]",
			"slices.Insert(s, 9, 1)", "error: slice bounds out of range", "slices.Reverse, 1", "error: cannot infer S",
			"import \"reflect\"\nreflect.TypeFor[error]()", "error: reflect.TypeFor is not available: cells can use generic code of their own, and of cmp, errors, iter, maps, math/rand/v2, slices and sync",
		}},
		{"23 unexported fields in JSON are a limit", []string{"import \"encoding/json\"\ntype t struct{ A, b int }\nout, err := json.Marshal(t{1, 2})\nstring(out)", `{"A":1,"Xb":2}`}},
		{"14 a last line of several values", []string{"1, \"a\"", "1 a", "x := []int{1}\nx, len(x), math.Sqrt(4) // both", "[1] 1 2", "x, y", "error: cell[3]:1:4: undefined: y", "x, 1 = 2", "error: cell[4]:1:"}},
		{"19 hints", []string{"var mu sync.Mutex", "error: cell[1]:1:8: undefined: sync; add import \"sync\"", "import \"mat\"", "error: it has \"gonum.org/v1/gonum/mat\""}},
		{"recover in literals", []string{
			"func g() { f := func() { fmt.Print(recover()) }; defer f(); panic(\"x\") }", "error: cell[1]:1:36: cells cannot recover in a function literal that is deferred in a loop or kept as a value",
			"for range 3 { defer func() { recover() }() }", "error: cells cannot recover in a function literal",
			"func h() { fmt.Print(recover()) }\nfunc g() { for range 2 { defer h() }; panic(\"x\") }\ng()", "x<nil>",
			"for i := range 2 { func() { defer func() { fmt.Print(i, recover()) }(); panic(\"x\") }() }", "0x1x",
			"try := func(f func()) (e any) { defer func() { e = recover() }(); f(); return }\ntry(func() { panic(7) })", "7",
		}},
		{"errors of a type", []string{
			"import \"errors\"\ntype own struct{ n int }\nfunc (o *own) Error() string { return \"own\" }\nfunc f() error { return fmt.Errorf(\"w: %w\", &own{3}) }\ne, ok := errors.AsType[*own](f())\ne.n, ok", "3 true",
		}},
		{"limits are refused", []string{
			"type L []L", "error: cell[1]:1:6: the interpreter cannot have type L, which contains itself", "type M map[string]*M", "error: which contains itself", "type F func(F) int", "error: which contains itself", "type G[T any] []G[T]\nvar g G[int]", "error: which contains itself", "type N struct{ m map[string]N }", "",
			"type V interface{ V() int }\nm := map[V]int{}", "error: 2:10: the interpreter cannot look up keys of the interface type V",
			"import . \"math\"", "error: a cell cannot import into its own names", "func init() {}", "error: func init: a cell is run", "package main", "error: a cell has no package clause",
			"func f() int", "error: func f has no body", "import \"sync/atomic\"\nvar p atomic.Pointer[int]", "error: the interpreter has no atomic.Pointer[int]", "func g() { type T int; return }\nx := func() any { type U int; return U(1) }()\nx != nil", "true",
		}},
		{"19 a cell that ends too early", []string{"x := 1\nfor {", "error: cell[1]:2:6: expected '}', found the end of the cell"}},
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
