package linecode

import (
	"errors"
	"math"
	"reflect"
	"strings"
	"testing"
)

func TestNewRefusesWhatIsNoMachine(t *testing.T) {
	still := func(s any, _ uint) (any, []float64) { return s, []float64{0} }
	give := func(levels ...float64) func(any, uint) (any, []float64) {
		return func(s any, _ uint) (any, []float64) { return s, levels }
	}
	type st struct{ sum int }
	for name, tt := range map[string]struct {
		spec Spec
		want string
	}{
		"no bits":        {Spec{Name: "x", Step: still}, "linecode: x has Bits = 0; a word holds 1 to 16 source bits"},
		"too many bits":  {Spec{Name: "x", Bits: 17, Step: still}, "linecode: x has Bits = 17; a word holds 1 to 16 source bits"},
		"no step":        {Spec{Name: "x", Bits: 1}, "linecode: x has no Step; give the function that encodes one word"},
		"negative delay": {Spec{Bits: 1, Step: still, Delay: -1}, "linecode: unnamed code has Delay = -1; it is a number of symbols, 0 or more"},
		"negative limit": {Spec{Bits: 1, Step: still, MaxStates: -1}, "linecode: unnamed code has MaxStates = -1; give a number of states, or 0 for 200000"},
		"step panics": {Spec{Name: "x", Bits: 2, Start: st{}, Step: func(s any, w uint) (any, []float64) {
			v := s.(st)
			return st{v.sum + 1}, []float64{[]float64{0, 1}[v.sum]}
		}}, "linecode: x: Step panicked in state {2} on word 00: runtime error: index out of range [2] with length 2"},
		"step panics with a text": {Spec{Name: "x", Bits: 1, Step: func(any, uint) (any, []float64) { panic("no such word") }},
			"linecode: x: Step panicked in state <nil> on word 0: no such word"},
		"wrong state": {Spec{Name: "x", Bits: 1, Start: 1, Step: func(s any, w uint) (any, []float64) { return s.(st), nil }},
			"linecode: x: Step panicked in state 1 on word 0: interface conversion: interface {} is int, not linecode.st"},
		"NaN":          {Spec{Name: "x", Bits: 1, Start: 7, Step: give(1, math.NaN())}, "linecode: x: Step in state 7 on word 0 gives the level NaN at position 1; levels are finite"},
		"infinite":     {Spec{Name: "x", Bits: 1, Step: give(math.Inf(-1))}, "linecode: x: Step in state <nil> on word 0 gives the level -Inf at position 0; levels are finite"},
		"long step":    {Spec{Name: "x", Bits: 1, Step: give(make([]float64, 70000)...)}, "linecode: x: Step in state <nil> on word 0 gives 70000 symbols; one step may give 65536"},
		"start a list": {Spec{Name: "x", Bits: 1, Start: []int{1}, Step: still}, "linecode: x: the start is a slice, which cannot be compared; use a struct, an array or a plain value without slices, maps and functions"},
		"a list within": {Spec{Name: "x", Bits: 1, Start: 0, Step: func(any, uint) (any, []float64) { return [1]any{map[int]int{}}, []float64{0} }},
			"linecode: x: the state after Step in state 0 on word 0 is an array, which cannot be compared"},
		"no symbols at all": {Spec{Name: "x", Bits: 1, Step: give()}, "linecode: x: no symbols for ever: from state <nil> the words 0 lead back to it without a symbol"},
		"no symbols in a cycle": {Spec{Name: "x", Bits: 2, Start: 0, Step: func(s any, w uint) (any, []float64) {
			if w == 2 && s.(int) > 0 {
				return s.(int)%3 + 1, nil
			}
			return (s.(int) + 1) % 4, []float64{1}
		}}, "linecode: x: no symbols for ever: from state 1 the words 10 10 10 lead back to it without a symbol"},
		"endless states": {Spec{Name: "x", Bits: 1, Start: 0, Step: func(s any, _ uint) (any, []float64) { return s.(int) + 1, []float64{0} }},
			"linecode: x: more than 200000 states, the newest 200000; bound what the state counts, or raise MaxStates"},
		"states that are not themselves": {Spec{Name: "x", Bits: 1, MaxStates: 100, Step: func(any, uint) (any, []float64) { return math.NaN(), []float64{0} }},
			"linecode: x: more than 100 states, the newest NaN; bound what the state counts, or raise MaxStates"},
		"flush panics": {Spec{Name: "x", Bits: 1, Start: 3, Step: still, Flush: func(any) []float64 { panic(errors.New("nothing owed")) }},
			"linecode: x: Flush panicked in state 3: nothing owed"},
		"flush infinite": {Spec{Name: "x", Bits: 1, Start: 3, Step: still, Flush: func(any) []float64 { return []float64{math.Inf(1)} }},
			"linecode: x: Flush in state 3 gives the level +Inf at position 0; levels are finite"},
		"too many steps": {Spec{Name: "x", Bits: 16, Start: uint(0), Step: func(_ any, w uint) (any, []float64) { return w, []float64{1} }},
			"linecode: x: more than 67108864 steps: 65536 states so far with 65536 words each; merge states or shorten the words"},
	} {
		t.Run(name, func(t *testing.T) {
			_, err := New(tt.spec)
			if err == nil || !strings.HasPrefix(err.Error(), tt.want) {
				t.Errorf("got  %v\nwant %s", err, tt.want)
			}
		})
	}
}

func TestNewKeepsThePanicsError(t *testing.T) {
	reason := errors.New("reason")
	for _, v := range []any{reason, reflect.ValueOf(reason)} { // as compiled code panics, and as interpreted code does
		_, err := New(Spec{Bits: 1, Step: func(any, uint) (any, []float64) { panic(v) }})
		if !errors.Is(err, reason) {
			t.Errorf("%v does not wrap the panic's error", err)
		}
	}
}

func TestNewTakesManyStatesAndIsAskedOnce(t *testing.T) {
	const n = 250000
	calls := 0
	c := must(t, Spec{Bits: 1, Start: 0, MaxStates: n, Step: func(s any, w uint) (any, []float64) {
		calls++
		return (s.(int) + 1) % n, []float64{float64(w)}
	}})
	if c.States() != n || calls != 2*n {
		t.Errorf("%d states in %d calls of Step, want %d in %d", c.States(), calls, n, 2*n)
	}
	if c.Minimal() != 1 {
		t.Errorf("%d states do the same, and %d are said to be needed", n, c.Minimal())
	}
	if c.Rate() != 1 || calls != 2*n {
		t.Error("Step was called after New")
	}
}

func TestNewIsInterrupted(t *testing.T) {
	interrupt := interruptible(t)
	calls := 0
	// After an interrupt an interpreted Step returns zero values, or panics; neither is to blame.
	for name, after := range map[string]func() (any, []float64){
		"zero values": func() (any, []float64) { return nil, nil },
		"panic":       func() (any, []float64) { panic("interrupted") },
	} {
		_, err := New(Spec{Name: "x", Bits: 1, Start: 0, MaxStates: 1 << 20, Step: func(s any, w uint) (any, []float64) {
			if calls++; calls > 1000 {
				interrupt()
				return after()
			}
			return s.(int) + 1, []float64{1}
		}})
		if !errors.Is(err, errStop) || !strings.HasPrefix(err.Error(), "linecode: interrupted while enumerating x, after ") || calls > 1002 {
			t.Errorf("%s: %v after %d calls", name, err, calls)
		}
	}
}

func TestBalancedMarks(t *testing.T) {
	c := must(t, balancedMarks())
	if c.States() != 2 || c.Rate() != 0.5 || c.Name() != "balanced marks" || c.Bits() != 1 || c.Reference() != "" {
		t.Errorf("%v: %d states, rate %v", c, c.States(), c.Rate())
	}
	sym, err := c.Encode([]byte{1, 0, 1, 1})
	wantEqual(t, "symbols", sym, []float64{1, 0, 0, 0, -1, 0, 1, 0})
	bits, faults, err2 := c.Decode(sym)
	wantEqual(t, "bits", bits, []byte{1, 0, 1, 1})
	wantEqual(t, "faults", faults, []int{})
	if err != nil || err2 != nil {
		t.Error(err, err2)
	}
	sym[4] = 1 // a second mark of the same sign
	bits, faults, _ = c.Decode(sym)
	wantEqual(t, "bits after a fault", bits, []byte{1, 0, 1, 1})
	wantEqual(t, "faults", faults, []int{4, 6})
}

func TestNegativeZeroIsZero(t *testing.T) {
	c := must(t, Spec{Bits: 1, Step: func(_ any, w uint) (any, []float64) {
		return nil, []float64{math.Copysign(0, -1) * float64(w), float64(w)}
	}})
	if got := c.Levels(); len(got) != 2 || math.Signbit(got[0]) {
		t.Errorf("levels %v", got)
	}
}
