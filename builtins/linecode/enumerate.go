package linecode

import (
	"context"
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"reflect"
	"slices"
	"strings"
)

// An enumeration calls the functions of a Spec and fills the tables of its machine.
type enumeration struct {
	spec   Spec
	m      *machine
	states []any
	number map[any]int32    // of each state
	output map[string]int32 // of each symbol sequence, by the bytes of its levels
	key    []byte

	state int  // being stepped
	word  uint // likewise
	doing string
}

// enumerate makes the machine of a Spec whose plain fields are in order.
func enumerate(ctx context.Context, spec Spec) (*machine, error) {
	e := &enumeration{
		spec: spec, m: &machine{bits: spec.Bits, delay: spec.Delay}, number: make(map[any]int32), output: make(map[string]int32),
	}
	e.m.outputs.head = []int32{0}
	if _, err := e.emit(nil); err != nil {
		return nil, err
	}
	if err := e.run(ctx); err != nil {
		if ctx.Err() != nil { // an interrupt may itself make Step panic
			return nil, fmt.Errorf("linecode: interrupted while enumerating %s, after %d states: %w", spec.Name, len(e.states), context.Cause(ctx))
		}
		return nil, fmt.Errorf("linecode: %s: %w", spec.Name, err)
	}
	e.finish()
	if cycle := e.m.silentCycle(); cycle != nil {
		return nil, fmt.Errorf("linecode: %s: no symbols for ever: from state %s the words %s lead back to it without a symbol; give each cycle of steps at least one",
			spec.Name, e.m.labels(cycle[0].state), spellWords(stepWords(cycle), spec.Bits))
	}
	return e.m, nil
}

// run steps every state that can be reached by every word. It turns a panic of the author's functions into an error.
func (e *enumeration) run(ctx context.Context) (err error) {
	defer func() {
		if v := recover(); v != nil {
			err = fmt.Errorf("%s panicked %s: %w", e.doing, e.where(), panicked(v))
		}
	}()
	e.doing = "Step"
	if _, err := e.enter(e.spec.Start); err != nil {
		return err
	}
	for e.state = 0; e.state < len(e.states); e.state++ {
		if len(e.states)<<e.spec.Bits > maxSteps {
			return fmt.Errorf("more than %d steps: %d states so far with %d words each; merge states or shorten the words", maxSteps, len(e.states), 1<<e.spec.Bits)
		}
		for e.word = 0; e.word < 1<<e.spec.Bits; e.word++ {
			next, levels := e.spec.Step(e.states[e.state], e.word)
			if ctx.Err() != nil {
				return ctx.Err() // what an interrupted Step returned means nothing
			}
			to, err := e.enter(next)
			if err != nil {
				return err
			}
			out, err := e.emit(levels)
			if err != nil {
				return err
			}
			e.m.next = append(e.m.next, to)
			e.m.output = append(e.m.output, out)
		}
	}
	if e.spec.Flush == nil {
		return nil
	}
	e.doing = "Flush"
	for e.state = range e.states {
		levels := e.spec.Flush(e.states[e.state])
		if ctx.Err() != nil {
			return ctx.Err()
		}
		out, err := e.emit(levels)
		if err != nil {
			return err
		}
		e.m.flush = append(e.m.flush, out)
	}
	return nil
}

// enter returns the number of a state, a new one if it has not been seen.
func (e *enumeration) enter(state any) (int32, error) {
	if state != nil && !reflect.ValueOf(state).Comparable() {
		if len(e.states) == 0 {
			return 0, fmt.Errorf("the start is %s", incomparable(state))
		}
		return 0, fmt.Errorf("the state after Step %s is %s", e.where(), incomparable(state))
	}
	if n, ok := e.number[state]; ok {
		return n, nil
	}
	if len(e.states) == e.spec.MaxStates {
		return 0, fmt.Errorf("more than %d states, the newest %s; bound what the state counts, or raise MaxStates", e.spec.MaxStates, label(state))
	}
	n := int32(len(e.states))
	e.number[state] = n
	e.states = append(e.states, state)
	e.m.parent = append(e.m.parent, int32(e.state<<e.spec.Bits)|int32(e.word))
	return n, nil
}

// incomparable says what a state is that cannot be compared. The type itself would say little: that of an interpreted
// struct has other names than its author gave.
func incomparable(state any) string {
	article := "a"
	kind := reflect.TypeOf(state).Kind()
	if kind == reflect.Array {
		article = "an"
	}
	return fmt.Sprintf("%s %v, which cannot be compared; use a struct, an array or a plain value without slices, maps and functions", article, kind)
}

// emit returns the number of a symbol sequence, a new one if it has not been seen.
func (e *enumeration) emit(levels []float64) (int32, error) {
	if len(levels) > maxStepLength {
		return 0, fmt.Errorf("%s %s gives %d symbols; one step may give %d", e.doing, e.where(), len(levels), maxStepLength)
	}
	e.key = e.key[:0]
	for i, a := range levels {
		if math.IsNaN(a) || math.IsInf(a, 0) {
			return 0, fmt.Errorf("%s %s gives the level %v at position %d; levels are finite", e.doing, e.where(), a, i)
		}
		e.key = binary.LittleEndian.AppendUint64(e.key, math.Float64bits(a+0)) // -0 becomes 0
	}
	if n, ok := e.output[string(e.key)]; ok {
		return n, nil
	}
	o := &e.m.outputs
	if len(o.values)+len(levels) > maxSteps {
		return 0, fmt.Errorf("steps give more than %d symbols in all different sequences; shorten them", maxSteps)
	}
	n := int32(len(o.head) - 1)
	e.output[string(e.key)] = n
	for _, a := range levels {
		o.values = append(o.values, a+0)
	}
	o.head = append(o.head, int32(len(o.values)))
	return n, nil
}

// finish fills in what the enumeration leaves open: the alphabet and the symbols as places in it.
func (e *enumeration) finish() {
	m := e.m
	m.states = len(e.states)
	states := e.states
	m.labels = func(s int) string { return label(states[s]) }
	m.levels = slices.Clone(m.outputs.values)
	slices.Sort(m.levels)
	m.levels = slices.Clip(slices.Compact(m.levels))
	m.outputs.symbols = make([]int32, len(m.outputs.values))
	for i, a := range m.outputs.values {
		m.outputs.symbols[i] = int32(m.symbol(a))
	}
}

// where says which call the enumeration is at.
func (e *enumeration) where() string {
	if e.doing == "Flush" {
		return "in state " + label(e.states[e.state])
	}
	return fmt.Sprintf("in state %s on word %0*b", label(e.states[e.state]), e.spec.Bits, e.word)
}

// label writes a state as fmt.Print does, cut to a line.
func label(state any) string {
	s := strings.Join(strings.Fields(fmt.Sprint(state)), " ")
	if len(s) > 80 {
		s = s[:77] + "..."
	}
	return s
}

// panicked returns what a function of the author panicked with as an error. The panics of an interpreted function carry
// their value within a reflect.Value.
func panicked(v any) error {
	if r, ok := v.(reflect.Value); ok && r.IsValid() && r.CanInterface() {
		v = r.Interface()
	}
	if err, ok := v.(error); ok {
		return err
	}
	return errors.New(fmt.Sprint(v))
}

// A machineStep is a state and the word read in it.
type machineStep struct {
	state int
	word  uint32
}

// silentCycle returns a cycle of steps that emit nothing, or nil.
func (m *machine) silentCycle() []machineStep {
	const open, done = 1, 2
	colour := make([]byte, m.states)
	var path []machineStep
	for root := range m.states {
		if colour[root] != 0 {
			continue
		}
		colour[root] = open
		path = append(path[:0], machineStep{root, 0})
		for len(path) > 0 {
			at := &path[len(path)-1]
			if int(at.word) == m.words() {
				colour[at.state] = done
				if path = path[:len(path)-1]; len(path) > 0 {
					path[len(path)-1].word++
				}
				continue
			}
			i := at.state<<m.bits | int(at.word)
			next := int(m.next[i])
			switch {
			case m.outputs.length(m.output[i]) > 0 || colour[next] == done:
				at.word++
			case colour[next] == open:
				first := slices.IndexFunc(path, func(p machineStep) bool { return p.state == next })
				return slices.Clone(path[first:])
			default:
				colour[next] = open
				path = append(path, machineStep{next, 0})
			}
		}
	}
	return nil
}

func stepWords(steps []machineStep) []uint32 {
	words := make([]uint32, len(steps))
	for i, s := range steps {
		words[i] = s.word
	}
	return words
}

// spellWords writes words in binary, parted by spaces, and cuts a long list in the middle.
func spellWords(words []uint32, bits int) string {
	const most = 24
	var b strings.Builder
	for i, w := range words {
		if len(words) > most && i == most/2 {
			fmt.Fprintf(&b, " ... (%d words in all) ...", len(words))
		}
		if len(words) > most && i >= most/2 && i < len(words)-most/2 {
			continue
		}
		if i > 0 {
			b.WriteByte(' ')
		}
		fmt.Fprintf(&b, "%0*b", bits, w)
	}
	return b.String()
}
