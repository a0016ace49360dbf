package cell

import (
	"bytes"
	"fmt"
	"reflect"
	"regexp"
	"runtime"
	"strconv"
	"strings"
	"sync"
)

// traces collects the interpreter's lines about the frames that a panic leaves, innermost first, by goroutine.
type traces struct {
	mu sync.Mutex
	of map[uint64][]int // goroutine -> places as the interpreter has them: right function, wrong line
}

const traceDepth = 64

var frameLine = regexp.MustCompile(`^cell\[(\d+)\]/_\.go:(\d+):(\d+): panic: `)

// traceWriter takes those lines: yaegi writes them to its standard error, and nothing else.
type traceWriter struct{ in *Interpreter }

func (t traceWriter) Write(p []byte) (int, error) {
	s := &t.in.traces
	g := goroutine()
	first := firstFrame()
	s.mu.Lock()
	defer s.mu.Unlock()
	if first {
		s.of[g] = nil
	}
	m := frameLine.FindSubmatch(p)
	if m == nil {
		return len(p), nil
	}
	var at [3]int
	for i := range at {
		at[i], _ = strconv.Atoi(string(m[i+1])) // digits, by the expression
	}
	if len(s.of[g]) < traceDepth {
		s.of[g] = append(s.of[g], place64(at[0], at[1], at[2]))
	}
	return len(p), nil
}

// take returns and forgets the calling goroutine's frames.
func (s *traces) take() []int {
	g := goroutine()
	s.mu.Lock()
	defer s.mu.Unlock()
	frames := s.of[g]
	delete(s.of, g)
	return frames
}

// firstFrame reports whether the panic that is being handled starts here: yaegi recovers and panics again in every frame,
// so each further frame finds one more panic on the stack.
func firstFrame() bool {
	var pcs [48]uintptr
	frames := runtime.CallersFrames(pcs[:runtime.Callers(2, pcs[:])])
	for panics := 0; ; {
		f, more := frames.Next()
		if f.Function == "runtime.gopanic" {
			panics++
		} else if panics == 1 && !strings.HasPrefix(f.Function, "runtime.") {
			return !strings.HasSuffix(f.Function, "interp.runCfg.func1")
		}
		if !more {
			return true
		}
	}
}

// goroutine returns the number of the calling goroutine, as the runtime prints it.
func goroutine() uint64 {
	var buf [40]byte
	b := bytes.TrimPrefix(buf[:runtime.Stack(buf[:], false)], []byte("goroutine "))
	if i := bytes.IndexByte(b, ' '); i > 0 {
		if n, err := strconv.ParseUint(string(b[:i]), 10, 64); err == nil {
			return n
		}
	}
	return 0
}

// A fault is a panic of interpreted code in Go's words: what recover gives where Go gives a runtime.Error.
type fault struct{ msg string }

func (f fault) Error() string { return "runtime error: " + f.msg }
func (f fault) RuntimeError() {}

// faults maps what reflect says, on which yaegi is built, to what Go says.
var faults = []struct{ part, msg string }{
	{"index out of range", "index out of range"},
	{"reflect.Value.Slice: slice index out of bounds", "slice bounds out of range"},
	{"reflect.Value.Slice: string slice index out of bounds", "slice bounds out of range"},
	{"reflect.Value.Slice3: slice index out of bounds", "slice bounds out of range"},
	{"reflect.MakeSlice: ", "makeslice: len out of range"},
	{"on zero Value", "invalid memory address or nil pointer dereference"},
	{"call of nil function", "invalid memory address or nil pointer dereference"},
	{"Method on nil interface value", "invalid memory address or nil pointer dereference"},
	{"reflect.MakeChan: ", "makechan: size out of range"},
}

// thrown unwraps what yaegi panics with. Thrown reports whether the cell's own code called panic.
func thrown(v any) (value any, own bool) {
	if rv, ok := v.(reflect.Value); ok {
		for rv.IsValid() && rv.Kind() == reflect.Interface {
			rv = rv.Elem()
		}
		if !rv.IsValid() || !rv.CanInterface() {
			return nil, true
		}
		return rv.Interface(), true
	}
	var text string
	switch x := v.(type) {
	case runtime.Error:
		return x, false
	case string:
		text = x
	case *reflect.ValueError:
		text = x.Error()
	case error:
		if fmt.Sprintf("%T", x) == "*interp.cfgError" {
			_, msg, _ := strings.Cut(x.Error(), ": ")
			return fault{plain(msg)}, false
		}
		return x, false
	default:
		return x, false
	}
	for _, f := range faults {
		if strings.Contains(text, f.part) {
			return fault{f.msg}, false
		}
	}
	return v, false
}

// recovered stands behind every recover() of a cell.
func (in *Interpreter) recovered(v any) any {
	if v == nil {
		return nil
	}
	in.traces.take()
	v, _ = thrown(v)
	return v
}

// panicError describes a panic of the calling goroutine. An error that a compiled function panics with is the cell's error:
// its sentence and the place of the call, nothing more.
func (in *Interpreter) panicError(v any) *Error {
	places := in.places(in.traces.take())
	value, own := thrown(v)
	if err, ok := value.(error); ok && !own {
		if _, ok := err.(runtime.Error); !ok {
			e := &Error{Name: "error", Value: goWords.Replace(clean(err.Error()))}
			e.Trace = []string{e.Value}
			if len(places) > 0 {
				e.Trace = append(e.Trace, "    "+places[0].where)
			}
			return e
		}
	}
	e := &Error{Name: "panic", Value: clean(in.describe(value))}
	e.Trace = []string{"panic: " + e.Value}
	for _, p := range places {
		line := "    " + p.where
		if p.name != "" {
			line += " in " + p.name
		}
		e.Trace = append(e.Trace, line)
	}
	return e
}

// describe says a panic's value as the runtime does.
func (in *Interpreter) describe(v any) string {
	switch x := v.(type) {
	case error:
		return x.Error()
	case fmt.Stringer:
		return x.String()
	}
	if s := in.shown(v, nil); s != nil {
		return fmt.Sprint(s)
	}
	return fmt.Sprint(v)
}

type tracePlace struct{ where, name string }

// places says where each frame was. Of a function that recurses only the innermost place is known.
func (in *Interpreter) places(frames []int) []tracePlace {
	var out []tracePlace
	seen := map[*function]int{}
	for i, at := range frames {
		f := in.tracks.find(at)
		if f != nil {
			if p := in.tracks.where(f); p != 0 {
				at = p
			}
			if seen[f]++; seen[f] > 1 {
				if i == len(frames)-1 || seen[f] == 2 {
					n, _, _ := unplace(at)
					out = append(out, tracePlace{fmt.Sprintf("cell[%d]", n), f.name + ", called by itself"})
				}
				continue
			}
		}
		n, line, column := unplace(at)
		p := tracePlace{where: position(n, line, column)}
		if f != nil {
			p.name = f.name
		}
		out = append(out, p)
	}
	return out
}
