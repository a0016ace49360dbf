package cell

import (
	"context"
	"errors"
	"strings"
	"testing"
	"time"
)

// interrupted runs a cell, cancels it after a moment and checks that the answer comes at once.
func (s *session) interrupted(code string) {
	s.Helper()
	ctx, cancel := context.WithCancel(context.Background())
	var at time.Time
	timer := time.AfterFunc(80*time.Millisecond, func() {
		at = time.Now()
		cancel()
	})
	defer timer.Stop()
	_, err := s.runContext(ctx, code)
	var e *Error
	if !errors.As(err, &e) || e.Name != "interrupted" {
		s.Errorf("%s\ngave %v; want the error interrupted", code, err)
		return
	}
	// The contract's limit is 0.2 s; the slack is for a loaded machine.
	if late := time.Since(at); late > 700*time.Millisecond {
		s.Errorf("%s\nanswered %v after the interrupt", code, late)
	}
}

// Case 9: closures made before an interrupt go on working after it.
func TestInterruptKeepsClosures(t *testing.T) {
	s := start(t)
	s.cells("n := 0\ncount := func() int { n++; return n }\ncount()", "1")
	s.interrupted("for {\n}")
	s.cells("count()", "2", "count()", "3")
	s.interrupted("for { count() }")
	s.is("a := count(); b := count(); b - a", "1")
}

// Case 12: what a cell can be waiting in when it is interrupted.
func TestInterruptOfWaitingCells(t *testing.T) {
	tests := []struct{ name, before, code string }{
		{"loop in a function", "func spin() { for { } }", "spin()"},
		{"recursion", "func fib(n int) int { if n < 2 { return n }; return fib(n-1) + fib(n-2) }", "fib(60)"},
		{"sleep", "", "import \"time\"\ntime.Sleep(time.Hour)"},
		{"receive", "c := make(chan int)\nwait := func() int { return <-c }", "wait()"},
		{"receive in a function", "func wait(c chan int) int { return <-c }", "wait(make(chan int))"},
		{"send", "", "make(chan int) <- 1"},
		{"select", "", "select {\ncase <-make(chan int):\n}"},
		{"empty select", "", "select {}"},
		{"mutex", "import \"sync\"\nvar mu sync.Mutex\nmu.Lock()", "mu.Lock()"},
		{"range over a channel", "", "for range make(chan int) {\n}"},
		{"compiled code that looks at the context", "", "<-page.Context().Done()"},
		{"compiled code with callbacks", "import \"sort\"\ns := make([]int, 1000)", "for { sort.Slice(s, func(i, j int) bool { return s[i] < s[j] }) }"},
		{"enumeration of a scripted code", "", "linecode.New(linecode.Spec{Name: \"endless\", Bits: 1, Start: 0, MaxStates: 1 << 40, Step: func(s any, w uint) (any, []float64) { return s.(int) + 1, []float64{1} }})"},
		{"goroutines", "import \"time\"", "for range 5 { go func() { for { time.Sleep(time.Millisecond) } }() }\nfor { }"},
		{"question", "", `page.Ask("?")`}, // which the recorder never answers
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			if raceDetector && (tt.name == "mutex" || tt.name == "goroutines") {
				t.Skip("abandons its goroutine, or sets the marks of one literal from several")
			}
			s := start(t)
			s.cells("k := 0\nnext := func() int { k++; return k }\nnext()", "1")
			if tt.before != "" {
				s.is(tt.before, "")
			}
			s.interrupted(tt.code)
			s.cells("next()", "2", "1 + 1", "2")
		})
	}
}

// A goroutine that waits in compiled code when its cell is interrupted cannot be stopped; the next cell says so, and when it
// wakes it does not go on with the cell's statements.
func TestInterruptLeavesWaitingGoroutine(t *testing.T) {
	if raceDetector {
		t.Skip("an abandoned goroutine has no order with the cells after it; it only looks at a number, and leaves")
	}
	s := start(t)
	s.cells("import \"sync\"\nvar mu sync.Mutex\nmu.Lock()\nx := 1", "")
	s.interrupted("mu.Lock()\nx = 2")
	s.is("x", "1")
	if got := s.out.stderr.String(); !strings.Contains(got, "cell[2]") {
		t.Errorf("stderr of the next cell is %q; want a word about what cell[2] left behind", got)
	}
	s.cells("mu.Unlock()", "", "import \"time\"\ntime.Sleep(50 * time.Millisecond)\nx", "1")
}

// Case 11: runaway recursion leaves the kernel alive.
func TestRunawayRecursion(t *testing.T) {
	s := start(t)
	s.cells("n := 0\ncount := func() int { n++; return n }\ncount()", "1")
	s.is("func rec(n int) int { return rec(n+1) + 1 }\nrec(0)", "error: stack")
	s.is("count()", "2")
	s.is("var f func(int) int\nf = func(n int) int { return f(n+1) + 1 }\nf(0)", "error: stack")
	s.is("count()", "3")
	s.is("import \"time\"\ngo rec(0)", "")
	// The goroutine outlives its cell; what runs when it is stopped is stopped too.
	if _, err := s.run("time.Sleep(1500 * time.Millisecond)"); err != nil && !strings.Contains(err.Error(), "stack") {
		t.Errorf("the cell beside the goroutine failed with %v", err)
	}
	s.is("count()", "4")
}

// Case 10: a panic in a goroutine is reported by the cell that started it and fails none.
func TestGoroutinePanic(t *testing.T) {
	s := start(t)
	s.is("import \"time\"\nfunc bad(s []int) int {\n\treturn s[3]\n}\ngo bad(nil)\ntime.Sleep(50 * time.Millisecond)\n1", "1")
	first := s.out
	for _, want := range []string{"index out of range", "cell[1]:3:10 in bad"} {
		if !strings.Contains(first.stderr.String(), want) {
			t.Errorf("stderr is %q; want %q in it", first.stderr.String(), want)
		}
	}
	s.is("go func() { time.Sleep(80 * time.Millisecond); fmt.Println(\"late\"); panic(\"late panic\") }()", "")
	second := s.out
	s.is("time.Sleep(200 * time.Millisecond)\n2", "2")
	if got := second.stderr.String(); !strings.Contains(got, "late panic") {
		t.Errorf("the starting cell's stderr is %q; want the late panic", got)
	}
	if got := second.stdout.String(); got != "late\n" {
		t.Errorf("the starting cell's stdout is %q; want the goroutine's line", got)
	}
}
