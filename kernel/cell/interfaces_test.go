package cell

import "testing"

// What a cell puts into an interface arrives there with its value and its type, by whatever way. The expected values are
// those of the language.
func TestIntoInterfaces(t *testing.T) {
	const stringer = "type En int\nfunc (e En) String() string { return fmt.Sprint(\"En\", int(e)) }"
	tests := []struct {
		name  string
		cells []string // code, want
	}{
		{"operations assigned", []string{
			"v, b := 3, true\nvar q any", "",
			"q = -v\nfmt.Println(q)", "-3\n", "q = v % 2\nq", "1", "q = ^v\nq", "-4", "q = v == 3\nq", "true", "q = !b\nq", "false",
			"q = v < 2\nq", "false", "q = v >> 1\nq", "1", "q = v + 1\nq", "4", "q = float64(v) / 2\nq", "1.5", "q = uint8(v) % 2\nq", "1",
			"m := map[string]any{}\nm[\"k\"] = -v\nm", "map[k:-3]", "a := make([]any, 1)\na[0] = v % 2\na", "[1]",
			"w := struct{ x any }{}\nw.x = -v\nw.x", "-3", "pq := &q\n*pq = -v\nq", "-3",
			"var a2 any = -v\nvar a3 any = !b\na2, a3", "-3 false", "q, w.x = -v, v != 3\nq, w.x", "-3 false",
			"switch x := q.(type) {\ncase int:\n\tq = x % 2\n}\nq", "-1",
			"func local() { v := 3; var p any = -v; r := any(v % 2); p, r = r, p; fmt.Println(p, r) }\nlocal()", "1 -3\n",
			"c := make(chan any, 1)\nc <- -v\n<-c", "-3", "[]any{-v, v%2, !b}", "[-3 1 false]",
		}},
		{"operations returned", []string{
			"func f(v int) any { return -v }\nf(3)", "-3", "func g(b int) any { return b % 2 }\ng(3)", "1", "func not(b bool) any { return !b }\nnot(true)", "false",
			"func eq(b int) any { return b == 2 }\neq(2)", "true", "func lt(x float64) any { return x < 0 }\nlt(1)", "false", "func sh(v uint) any { return v >> 1 }\nsh(5)", "2",
			"func neg(x float64) (any, error) { return -x, nil }\nneg(2)", "-2",
			"func c(x int) (r any, ok bool) { if x > 3 { r = x % 3; ok = true }; return }\nc(5)", "2 true",
			"func lit(v int) func() any { return func() any { return ^v } }\nlit(1)()", "-2",
			"func first(n int) any { for i := range func(yield func(int) bool) { yield(n) } { return -i }; return nil }\nfirst(4)", "-4",
			"func three() (int, any) { v := 2; return v, -v }\nthree()", "2 -2",
		}},
		{"operations as interfaces with methods", []string{
			stringer, "", "e := En(2)\nvar st fmt.Stringer = -e\nst.String()", "En-2", "st = e % 2\nst.String()", "En0",
			"func s(e En) fmt.Stringer { return -e }\ns(3).String()", "En-3",
		}},
		{"named types keep their type", []string{
			stringer, "", "func g(w uint) any { return En(w) }\ng(1)", "En1", "func h(w uint) any { v := En(0); v = En(w); return v }\nh(2)", "En2",
			"func k(w uint) any { v := En(0); v += En(w); return v }\nk(3)", "En3", "_, ok := g(1).(En)\nok", "true", "var q any\nq = En(4)\nq", "En4",
			"type box struct{ e En }\nfunc in(b box) any { return b.e }\nin(box{5})", "En5", "func el(s []En) any { return s[0] }\nel([]En{6})", "En6",
			"func call() En { return 7 }\nfunc viaCall() any { return call() }\nviaCall()", "En7", "s := []any{call()}\ns", "[En7]",
		}},
		{"structs with methods are one type", []string{
			"type S struct { a int; neg bool }\nfunc (s S) flip() S { s.neg = !s.neg; return s }", "",
			"func mks(start any) int { st := map[any]bool{}; st[start] = true; st[S{}] = true; v := start.(S); st[v] = true; st[v.flip().flip()] = true; return len(st) }\nmks(S{})", "1",
			"func same(a, b any) bool { return a == b }\nsame(S{1, true}, S{1, true}), same(S{1, true}, S{2, true})", "true false",
			"func ret(s S) any { return s }\nm := map[any]int{}\nm[ret(S{})]++\nm[any(S{})]++\nvar q any = S{}\nm[q]++\nm[S{}]++\nlen(m)", "1",
		}},
		{"states of scripted codes", []string{
			"func states(start any, step func(s any, w uint) (any, []float64)) (int, error) { c, err := linecode.New(linecode.Spec{Bits: 1, Start: start, Step: step}); if err != nil { return 0, err }; return c.States(), nil }", "",
			"states(0, func(s any, w uint) (any, []float64) { return (s.(int)+int(w))%3, []float64{0} })", "3",
			"states(false, func(s any, w uint) (any, []float64) { if w == 0 { return s, []float64{0} }; return !s.(bool), []float64{1} })", "2",
			"states(1, func(s any, w uint) (any, []float64) { l := s.(int); return -l, []float64{1} })", "2",
			"states(1.0, func(s any, w uint) (next any, out []float64) { l := s.(float64); next = -l; out = []float64{1}; return })", "2",
			"states(uint(0), func(s any, w uint) (any, []float64) { return w>>1, []float64{1} })", "1",
			stringer, "", "states(En(0), func(s any, w uint) (any, []float64) { v := s.(En); v = En(w); return v, []float64{1} })", "2",
			"type S struct { a int; neg bool }\nfunc (s S) flip() S { s.neg = !s.neg; return s }", "",
			"states(S{}, func(s any, w uint) (any, []float64) { v := s.(S); if w == 1 { v = v.flip() }; return v, []float64{0} })", "2",
			"type st struct{ sum int }\nstates(st{}, func(s any, w uint) (any, []float64) { v := s.(st); if w == 1 { v.sum = (v.sum + 1) % 4 }; return v, []float64{0} })", "4",
		}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) { start(t).cells(tt.cells...) })
	}
}
