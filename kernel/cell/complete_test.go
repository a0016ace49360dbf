package cell

import (
	"slices"
	"strings"
	"testing"
)

func TestComplete(t *testing.T) {
	s := start(t)
	s.cells("// rate is the rate of the line.\ntype rate struct{ Hz float64; note string }\nfunc (r rate) Double() rate { return rate{2 * r.Hz, r.note} }\nr := rate{1, \"a\"}\nimport \"strings\"", "")
	tests := []struct {
		name, code string // | is the cursor
		want       []string
		not        []string
		kind       string // of the first wanted one
	}{
		{"package", "linecode.Ne|", []string{"New"}, []string{"AMI"}, "function"},
		{"package in a call", "fmt.Println(math.Sq|", []string{"Sqrt", "SqrtPi"}, nil, "function"},
		{"fields and methods", "r.|", []string{"Hz", "note", "Double"}, nil, "instance"},
		{"of a call", "r.Double().D|", []string{"Double"}, []string{"Hz"}, "function"},
		{"of a variable of this cell", "q := r.Double()\nq.H|", []string{"Hz"}, nil, "instance"},
		{"in a block", "for i := 0; i < 3; i++ {\n\tif r.H|", []string{"Hz"}, nil, "instance"},
		{"in the head of an if", "if r.|", []string{"Hz"}, nil, "instance"},
		{"after a broken statement", "x := = 3\nr.H|", []string{"Hz"}, nil, "instance"},
		{"local names", "func f(argument int) { total := argument; arg|", []string{"argument"}, nil, "instance"},
		{"names of cells", "ra|", []string{"rate", "range"}, nil, "class"},
		{"packages", "spec|", []string{"spectrum"}, nil, "module"},
		{"imported package", "strings.ToU|", []string{"ToUpper"}, nil, "function"},
		{"import in the cell", "import \"sort\"\nsort.Sl|", []string{"Slice"}, nil, "function"},
		{"import path", "import \"gonum.org/v1/gonum/ma|", []string{"gonum.org/v1/gonum/mat"}, nil, "path"},
		{"import of a builtin", "import \"linec|", []string{"linecode"}, nil, "path"},
		{"keyword", "fal|", []string{"fallthrough", "false"}, nil, "keyword"},
		{"keys of a literal", "linecode.Spec{Na|", []string{"Name"}, nil, "instance"},
		{"more keys of a literal", "linecode.Spec{Name: \"x\", B|", []string{"Bits"}, nil, "instance"},
		{"not the keys that are given", "linecode.Spec{Name: \"x\", |", []string{"Bits", "Step"}, []string{"Name"}, "instance"},
		{"keys of an element", "[]*linecode.Spec{{Na|", []string{"Name"}, nil, "instance"},
		{"names of codes", "linecode.ByName(\"HD|", []string{"HDB3"}, []string{"AMI"}, "value"},
		{"all names of codes", "c, err := linecode.ByName(\"|", []string{"AMI", "HDB3"}, nil, "value"},
		{"generic functions", "import \"slices\"\nslices.Sor|", []string{"Sort", "SortFunc", "Sorted"}, nil, "function"},
		{"other case", "fmt.println|", []string{"Println"}, nil, "function"},
		{"universe", "appe|", []string{"append"}, nil, "function"},
		{"the kernel's side of page is hidden", "page.|", []string{"Show", "Slot"}, []string{"Host", "Attach"}, "function"},
		{"nothing in a comment", "// fmt.|", nil, []string{"Println"}, ""},
		{"nothing in a string", "\"fmt.|", nil, []string{"Println"}, ""},
		{"code points", "s := \"äöü\"; fmt.Printl|", []string{"Println"}, nil, "function"},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			before, after, _ := strings.Cut(tt.code, "|")
			c := s.in.Complete(before+after, len([]rune(before)))
			for i, w := range tt.want {
				at := slices.Index(c.Matches, w)
				if at < 0 {
					t.Fatalf("matches %q; want %q among them", c.Matches, w)
				}
				if i == 0 && c.Types[at] != tt.kind {
					t.Errorf("%s is a %q; want %q", w, c.Types[at], tt.kind)
				}
			}
			for _, w := range tt.not {
				if slices.Contains(c.Matches, w) {
					t.Errorf("matches %q; want no %q", c.Matches, w)
				}
			}
			for _, m := range c.Matches {
				if strings.Contains(m, mark) {
					t.Errorf("match %q is a name of the interpreter", m)
				}
			}
			if c.End != len([]rune(before)) || c.Start > c.End {
				t.Errorf("replaces %d to %d; want the word before the cursor %d", c.Start, c.End, len([]rune(before)))
			}
		})
	}
	if c := s.in.Complete("fmt.Pr", 1000); !slices.Contains(c.Matches, "Printf") || c.End != 6 {
		t.Errorf("a cursor behind the end gives %+v", c)
	}
	if c := s.in.Complete("fmt", -5); c.Start != 0 || c.End != 0 {
		t.Errorf("a cursor before the start gives %d to %d", c.Start, c.End)
	}
}

func TestInspect(t *testing.T) {
	s := start(t)
	s.cells("// double gives twice x.\nfunc double(x float64) float64 { return 2 * x }\ntype T struct{ Hz float64 }\n// Get gives the rate.\nfunc (t T) Get() float64 { return t.Hz }\nv := T{3}", "")
	tests := []struct{ name, code, want string }{
		{"function of a package", "math.Sq|rt(2)", "func math.Sqrt(x float64) float64"},
		{"its comment", "math.Sqrt|", "Sqrt returns the square root of x."},
		{"inside the brackets of a call", "math.Sqrt(|", "func math.Sqrt(x float64) float64"},
		{"behind an argument", "math.Pow(2, |", "func math.Pow(x float64, y float64) float64"},
		{"the parameter at the cursor", "math.Pow(2, |", "parameter 2 of 2: y float64"},
		{"of the outer call", "math.Pow(math.Max(1, 2), |", "parameter 2 of 2: y float64"},
		{"of the inner call", "math.Pow(math.Max(1, |", "func math.Max(x float64, y float64) float64\nparameter 2 of 2: y"},
		{"in brackets in an argument", "math.Pow((1 + |", "parameter 1 of 2: x float64"},
		{"in a literal in an argument", "linecode.New(linecode.Spec{Name: |", "parameter 1 of 1: spec linecode.Spec"},
		{"of a variadic function", "fmt.Printf(\"a\", 1, 2, |", "parameter 2 of 2: a ...any"},
		{"of an instance", "import \"slices\"\nslices.Index[[]int]([]int{1}, |", "parameter 2 of 2: v E"},
		{"of a method of a cell", "double(|", "parameter 1 of 1: x float64"},
		{"function of a cell", "doub|le(2)", "func double(x float64) float64"},
		{"comment of a cell", "double|", "double gives twice x."},
		{"variable", "v|", "var v T"},
		{"method of a cell", "v.Get|()", "Get gives the rate."},
		{"field", "v.Hz|", "field T.Hz float64"},
		{"type", "linecode.Spec|", "type linecode.Spec struct {"},
		{"package", "lineco|de.AMI()", `package linecode // import "linewright/builtins/linecode"`},
		{"constant", "math.Pi|", "3.14159"},
		{"builtin", "len|(s)", "builtin len"},
		{"field of a compiled type", "linecode.Spec{}.Bits|", "field linecode.Spec.Bits int"},
		{"gonum", "import \"gonum.org/v1/gonum/floats\"\nfloats.Sum|", "func floats.Sum(s []float64) float64"},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			before, after, _ := strings.Cut(tt.code, "|")
			b, ok := s.in.Inspect(before+after, len([]rune(before)), 0)
			if !ok {
				t.Fatal("found nothing")
			}
			text := b.Data["text/plain"].(string)
			if !strings.Contains(text, tt.want) {
				t.Errorf("says %q; want %q in it", text, tt.want)
			}
			if strings.Contains(text, mark) || strings.Contains(text, "main.") {
				t.Errorf("says %q, with names of the interpreter", text)
			}
			if h, _ := b.Data["text/html"].(string); !strings.Contains(h, "<pre>") {
				t.Errorf("HTML is %q", h)
			}
		})
	}
	if b, ok := s.in.Inspect("double", 3, 1); !ok || !strings.Contains(b.Data["text/plain"].(string), "return 2 * x") {
		t.Errorf("detail 1 gives %v; want the source", b.Data)
	}
	if _, ok := s.in.Inspect("nosuchname", 3, 0); ok {
		t.Error("an unknown name was found")
	}
	if _, ok := s.in.Inspect("   ", 2, 0); ok {
		t.Error("nothing was found to be something")
	}
}
