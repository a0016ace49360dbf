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
