package cell

import (
	"context"
	"fmt"
	"go/types"
	"runtime"
	"slices"
	"strings"
	"testing"

	"linewright/kernel/cell/internal/godoc"
)

// Case 22: cells that declare the same again and again keep the memory bounded.
func TestManyCells(t *testing.T) {
	s := start(t)
	s.is("total := 0\nfunc add(n int) int { return total + n }", "")
	heap := func() int64 {
		runtime.GC()
		var m runtime.MemStats
		runtime.ReadMemStats(&m)
		return int64(m.HeapAlloc)
	}
	var before int64
	for i := range 5000 {
		if i == 500 {
			before = heap()
		}
		if _, err := s.run(fmt.Sprintf("s := make([]float64, 1000)\ns[0] = %d\nfor j := range s { s[j] += 1 }", i)); err != nil {
			t.Fatal(err)
		}
	}
	s.is("s[0]", "5000")
	// The slices alone would be 8 kB a cell, the trees that yaegi keeps by itself 30 kB.
	perCell := (heap() - before) / 4500
	t.Logf("%d bytes a cell", perCell)
	if perCell > 4000 {
		t.Errorf("a cell leaves %d bytes behind; want at most 4 kB", perCell)
	}
	runtime.KeepAlive(s)
}

// The pinned yaegi has the fields that interrupts need; New says so if it has not.
func TestMachine(t *testing.T) {
	s := start(t)
	id := *s.in.vm.id
	if old := s.in.vm.stop(); old != id || *s.in.vm.id != id+1 {
		t.Errorf("stop took the run id from %d to %d", id, *s.in.vm.id)
	}
	s.in.vm.restore(id)
	s.is("c := make(chan int, 1)\nc <- 1\n<-c", "1")
	if cap(s.in.vm.done) != 0 {
		t.Errorf("the channel that wakes blocked operations has a buffer")
	}
}

func TestNoNamesOfTheInterpreter(t *testing.T) {
	s := start(t)
	s.is("type T struct{ a int }\nfunc (t T) M(n int) int { return t.a / n }\nfunc f(n int) int { return T{1}.M(n) }", "")
	for _, code := range []string{"f(0)", "go f(0)", "T{1}.N()", "var x int = T{}", "T.M", "f", "f(1, 2)", "var s []T\ns[3]", "func() { f(0) }()", "interface{ Q() }(T{}).Q()"} {
		v, err := s.run(code)
		s.out.mu.Lock() // a goroutine may still report its panic
		all := v + s.out.stdout.String() + s.out.stderr.String()
		s.out.mu.Unlock()
		if err != nil {
			all += err.Error() + strings.Join(trace(err), "\n")
		}
		for _, bad := range []string{mark, "_.go", "main.", "reflect.", "interp."} {
			if strings.Contains(all, bad) {
				t.Errorf("%s\nsays %q, with %q in it", code, all, bad)
			}
		}
	}
}

// The embedded types and comments are those of the sources; if not, run go generate ./kernel/cell/...
func TestOwnTablesAreFresh(t *testing.T) {
	in := start(t).in
	for name, path := range in.lib.own {
		dir := "../../builtins/" + name
		if name == "plotting" {
			dir = "../../plotting"
		}
		files, err := godoc.Files(dir)
		if err != nil {
			t.Fatal(err)
		}
		want, err := godoc.Read(dir, path, files)
		if err != nil {
			t.Fatal(err)
		}
		in.lib.doc(path, "")
		for key, text := range want {
			if in.lib.docs[path][key] != text {
				t.Errorf("%s: the comment of %q is stale; run go generate ./kernel/cell/...", path, key)
			}
		}
		names, err := godoc.Exported(dir, files)
		if err != nil {
			t.Fatal(err)
		}
		p, err := in.lib.Import(path)
		if err != nil {
			t.Fatal(err)
		}
		for _, n := range names {
			if p.Scope().Lookup(n) == nil {
				t.Errorf("%s: %s is not in the embedded types; run go generate ./kernel/cell/...", path, n)
			} else if _, constant := p.Scope().Lookup(n).(*types.Const); !constant && !isGeneric(p.Scope().Lookup(n)) && !in.vm.has(path, n) {
				t.Errorf("%s: %s is not in the symbol table; run go generate ./kernel/cell/...", path, n)
			}
		}
		for _, n := range p.Scope().Names() {
			if p.Scope().Lookup(n).Exported() && !slices.Contains(names, n) {
				t.Errorf("%s: %s is no longer in the source; run go generate ./kernel/cell/...", path, n)
			}
		}
	}
}

// Completion and inspection answer while a cell runs.
func TestCompleteWhileRunning(t *testing.T) {
	s := start(t)
	ctx, cancel := context.WithCancel(context.Background())
	done := make(chan struct{})
	go func() {
		defer close(done)
		s.in.Run(ctx, 1, "for {\n}", "", &recorder{})
	}()
	if c := s.in.Complete("math.Sq", 7); !slices.Contains(c.Matches, "Sqrt") {
		t.Errorf("matches %q", c.Matches)
	}
	if _, ok := s.in.Inspect("math.Sqrt", 9, 0); !ok {
		t.Error("math.Sqrt was not found")
	}
	cancel()
	<-done
}

func BenchmarkExpression(b *testing.B) {
	in, err := New(Options{})
	if err != nil {
		b.Fatal(err)
	}
	out := &recorder{}
	n := 0
	for b.Loop() {
		n++
		if _, err := in.Run(context.Background(), n, "1 + 1", "", out); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkStart(b *testing.B) {
	for b.Loop() {
		in, err := New(Options{})
		if err != nil {
			b.Fatal(err)
		}
		if _, err := in.Run(context.Background(), 1, "ami := linecode.AMI()", "", &recorder{}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkComplete(b *testing.B) {
	in, err := New(Options{})
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		in.Complete("p, err := spectrum.Exact(linecode.AMI(), pulse.Train{})\np.", 58)
	}
}
