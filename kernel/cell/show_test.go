package cell

import (
	"context"
	"slices"
	"strings"
	"testing"
	"time"
)

// The cells of the contract run as they stand, one after the other.
func TestContract(t *testing.T) {
	s := start(t)
	s.cells("ami := linecode.AMI()", "",
		"train := pulse.Train{BitRate: 2.048e6, Level: 3, Load: 120, Shape: pulse.Rect(0.5)}\np, err := spectrum.Exact(ami, train)   // *spectrum.PSD", "",
		"fmt.Println(p.Lines(10e6))\nfmt.Println(p.Total())", "[]\n2.25\n") // a marks-inverting code has no tones; 3 V, half width, half the symbols: 9/4 V^2
	b, err := s.in.Run(context.Background(), 90, "plotting.Spectrum(p)", "", s.out)
	if err != nil || b == nil {
		t.Fatalf("figure: %v", err)
	}
	for _, mime := range []string{"image/svg+xml", "image/png", "text/plain"} {
		if b.Data[mime] == nil {
			t.Errorf("a figure has no %s", mime)
		}
	}
	if b, err := s.in.Run(context.Background(), 91, "ami", "", s.out); err != nil || b.Data["text/html"] == nil {
		t.Errorf("a code has no card: %v", err)
	}
	s.cells(`type st struct{ sum int }
mine, err := linecode.New(linecode.Spec{
	Name:  "balanced marks",
	Bits:  1,                                    // source bits per step
	Start: st{},                                 // any comparable value
	Step: func(s any, word uint) (any, []float64) {
		v := s.(st)
		if word == 0 {
			return v, []float64{0, 0}
		}
		if v.sum > 0 {
			return st{0}, []float64{-1, 0}
		}
		return st{1}, []float64{1, 0}
	},
})`, "",
		"fmt.Println(mine.States(), mine.Rate())", "2 0.5\n",
		"sym, err := mine.Encode([]byte{1, 0, 1, 1})\nsym", "[1 0 0 0 -1 0 1 0]",
		"bits, faults, err := mine.Decode(sym)\nbits", "[1 0 1 1]",
		"biased := mine.Fed(source.Biased(0.7))\nsticky := mine.Fed(source.Markov(0.1, 0.4))\nprbs := mine.Fed(source.Repeating(source.PRBS(7).Bits(127)))\nprbs.States()", "2",
		"mine.Decode(sym)", "[1 0 1 1] []",
		"import \"linecode\"\nimport lc \"linewright/builtins/linecode\"\nlc.AMI().Name() == linecode.AMI().Name()", "true",
		"linecode.New(linecode.Spec{Name: \"p\", Bits: 1, Start: 0, Step: func(s any, w uint) (any, []float64) { panic(\"own trouble\") }})", "error: own trouble",
	)
	_, err = s.run("x := 1\nq := pulse.Rect(\n\t3)\nx, _ = 2, q")
	if got := trace(err); len(got) != 2 || !strings.HasPrefix(got[0], "pulse: Rect(3)") || !strings.Contains(got[1], "cell[") || !strings.HasSuffix(got[1], ":2:6") {
		t.Errorf("a builtin's panic is %q; want its sentence and the place of the call", got)
	}
}

func TestPage(t *testing.T) {
	in, err := New(Options{Parameters: map[string]string{"bit-rate": "12e6"}})
	if err != nil {
		t.Fatal(err)
	}
	out := &recorder{answer: func(prompt string, secret bool) (string, error) {
		if secret {
			return "hidden", nil
		}
		return "answer to " + prompt, nil
	}}
	run := func(n int, id, code string) string {
		t.Helper()
		b, err := in.Run(context.Background(), n, code, id, out)
		if err != nil {
			t.Fatalf("%s: %v", code, err)
		}
		if b == nil {
			return ""
		}
		return b.Data["text/plain"].(string)
	}
	run(1, "a", `page.Slot("best").Set("one"); page.Slot("best").Set("two")`)
	run(2, "b", `page.Slot("best").Set("three")`)
	run(3, "a", `page.Slot("best").Set("one"); page.Slot("best").Set("two")`)
	run(4, "c", "type st struct{ sum int }\nfunc (s st) String() string { return fmt.Sprint(\"sum \", s.sum) }\npage.Show(st{3})\npage.Show([]any{st{4}, 1})")
	run(5, "", `page.Slot("other").Set(1)`)
	run(6, "", `page.Slot("other").Set(1)`)
	run(7, "", `page.Slot("other").Set(2)`)
	want := []string{"best|false|one", "best|true|two", "best|true|three", "best|false|one", "best|true|two", "|false|sum 3", "|false|[sum 4 1]", "other|false|1", "other|false|1", "other|true|2"}
	if !slices.Equal(out.shown, want) {
		t.Errorf("shown are\n%q; want\n%q", out.shown, want)
	}
	if got := run(8, "", `page.Float("bit-rate", 10e6, "Hz")`); got != "1.2e+07" {
		t.Errorf("a parameter that was set is %s", got)
	}
	if got := run(9, "", `page.Int("taps", 5, "")`); got != "5" {
		t.Errorf("a parameter that was not set is %s", got)
	}
	if got := in.Asked(); !slices.Equal(got, []string{"bit-rate", "taps"}) {
		t.Errorf("asked for %q", got)
	}
	if got := run(10, "", `page.Ask("candidate? ") + ", " + page.AskSecret("key? ")`); got != "answer to candidate? , hidden" {
		t.Errorf("the reader's answers are %q", got)
	}
	run(11, "", "page.Clear()")
	if out.cleared != 1 {
		t.Errorf("cleared %d times", out.cleared)
	}
	s := &session{T: t, in: in, n: 20}
	s.is(`page.Ask("candidate? ")`, "error: nobody can be asked")
	s.is("page.Show(fmt.Errorf(\"no figure\"))", "error: no figure")
}

// exiting is an Output that takes the end of the kernel.
type exiting struct {
	recorder
	code chan int
}

func (e *exiting) Exit(code int) { e.code <- code }

func TestExit(t *testing.T) {
	for _, tt := range []struct {
		code, stderr string
		want         int
	}{
		{"import \"os\"\nfmt.Print(\"last words\")\nos.Exit(3)\nfmt.Print(\"never\")", "", 3},
		{"import \"log\"\nfmt.Print(\"last words\")\nlog.Fatal(\"fatal: \", 7)", "fatal: 7", 1},
	} {
		s := start(t)
		out := &exiting{code: make(chan int, 1)}
		ctx, cancel := context.WithCancel(context.Background())
		go func() {
			time.Sleep(100 * time.Millisecond) // the end of a process that is on its way takes a moment
			cancel()
		}()
		s.in.Run(ctx, 1, tt.code, "", out)
		select {
		case code := <-out.code:
			if code != tt.want || out.stdout.String() != "last words" || !strings.Contains(out.stderr.String(), tt.stderr) {
				t.Errorf("%s\nended with %d, stdout %q, stderr %q", tt.code, code, out.stdout.String(), out.stderr.String())
			}
		default:
			t.Errorf("%s\ndid not end", tt.code)
		}
	}
}

func TestOutput(t *testing.T) {
	s := start(t)
	s.is("fmt.Print(1); println(2); fmt.Println(3)", "12\n3\n")
	s.is("import \"log\"\nlog.SetFlags(0)\nlog.Print(\"noted\")", "")
	if got := s.out.stderr.String(); got != "noted\n" {
		t.Errorf("log wrote %q", got)
	}
}

func TestEvaluate(t *testing.T) {
	s := start(t)
	s.is("x := 4", "")
	b, err := s.in.Evaluate(context.Background(), "x * 2", s.out)
	if err != nil || b.Data["text/plain"] != "8" {
		t.Errorf("x * 2 gave %v, %v", b.Data, err)
	}
	for _, bad := range []string{"y", "x := 3", "fmt.Print()", "1/(x-4)"} {
		if _, err := s.in.Evaluate(context.Background(), bad, s.out); err == nil {
			t.Errorf("%s was evaluated", bad)
		}
	}
}

func TestIsComplete(t *testing.T) {
	s := start(t)
	for _, tt := range []struct{ code, status, indent string }{
		{"x := 1", "complete", ""},
		{"", "complete", ""},
		{"func f() {", "incomplete", "\t"},
		{"func f() {\n\tif true {", "incomplete", "\t\t"},
		{"f(1,", "incomplete", "\t"},
		{"x := `raw", "incomplete", ""},
		{"/* open", "incomplete", ""},
		{"x := 1 +", "incomplete", ""},
		{"x := )", "invalid", ""},
		{"func }{", "invalid", ""},
		{"x := \"open", "invalid", ""},
		{"for i := range 3 {\n}", "complete", ""},
	} {
		if status, indent := s.in.IsComplete(tt.code); status != tt.status || indent != tt.indent {
			t.Errorf("%q is %s with indent %q; want %s with %q", tt.code, status, indent, tt.status, tt.indent)
		}
	}
}

// A value of many elements is cut with the count; a string never is.
func TestLongValues(t *testing.T) {
	s := start(t)
	s.is("type e struct{ n int }\ns := make([]e, 20000)", "")
	got, err := s.run("s")
	if err != nil || !strings.HasSuffix(got, "(20000 elements)") || strings.Count(got, "{0}") != textLimit {
		t.Errorf("20000 elements gave %d of them and end in %q", strings.Count(got, "{0}"), got[max(0, len(got)-40):])
	}
	got, err = s.run("import \"strings\"\nstrings.Repeat(\"x\", 300000)")
	if err != nil || len(got) != 300000 {
		t.Errorf("a string of 300000 bytes gave %d", len(got))
	}
}
