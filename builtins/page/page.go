// Package page is a cell's own page: it shows values, keeps slots that later cells update in place, asks the reader,
// and reads the notebook's parameters.
//
// It knows the kernel only as a [Host]. Without one (in a plain Go program or a test) values are printed on standard
// output, parameters have their defaults and nobody can be asked.
package page

import (
	"context"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
	"sync/atomic"
)

// Host is what the kernel gives to the running cell. The kernel fills it; cells have no use for it.
type Host interface {
	// Show displays v now. With an id that was shown before, every place that shows it is updated instead.
	Show(v any, id string)
	// Clear clears the cell's output when its next output arrives.
	Clear()
	// Ask asks the reader for one line; secret hides what is typed.
	Ask(prompt string, secret bool) (string, error)
	// Parameter returns the text that the run set for a parameter, and whether it set one.
	Parameter(name string) (string, bool)
	// Context is cancelled when the running cell is interrupted.
	Context() context.Context
}

// ErrNoReader is what [Host.Ask] reports where no reader can be asked, for instance in a headless run.
var ErrNoReader = errors.New("nobody can be asked here: this run has no reader; make it a parameter instead (page.Text, page.Float)")

var current atomic.Pointer[Host]

// Attach makes h the host of every later call. The kernel calls it once, before the first cell.
func Attach(h Host) { current.Store(&h) }

func host() Host {
	if h := current.Load(); h != nil {
		return *h
	}
	return bare{}
}

// bare is the host of a program that has no kernel.
type bare struct{}

func (bare) Show(v any, _ string)             { fmt.Println(v) }
func (bare) Clear()                           {}
func (bare) Ask(string, bool) (string, error) { return "", ErrNoReader }
func (bare) Parameter(string) (string, bool)  { return "", false }
func (bare) Context() context.Context         { return context.Background() }

// Context returns the running cell's context: it is cancelled when the cell is interrupted. Long work looks at it at
// least every 0.1 s.
func Context() context.Context { return host().Context() }

// Show displays v now, in the form that it has as a cell's last expression.
func Show(v any) { host().Show(v, "") }

// Clear clears the cell's output when its next output arrives, so that a display is replaced without a flicker.
func Clear() { host().Clear() }

// A Place is one named slot of the notebook; [Slot] makes one.
type Place struct{ name string }

// Slot returns the slot of that name. The name is its display_id, as it stands.
// It panics if the name is empty.
func Slot(name string) Place {
	if name == "" {
		panic(errors.New(`page: Slot("") has no name; give it one, for instance Slot("best")`))
	}
	return Place{name}
}

// Set shows v in the slot: the first time where the cell stands, later, from any cell, in place.
func (p Place) Set(v any) { host().Show(v, p.name) }

// Name returns the slot's name.
func (p Place) Name() string { return p.name }

// Ask asks the reader for one line of text and returns it without the line end. The cell fails if nobody can be asked.
func Ask(prompt string) string { return ask(prompt, false) }

// AskSecret is [Ask] with the answer hidden while it is typed.
func AskSecret(prompt string) string { return ask(prompt, true) }

func ask(prompt string, secret bool) string {
	s, err := host().Ask(prompt, secret)
	if err != nil {
		panic(fmt.Errorf("page: cannot ask %q: %w", prompt, err))
	}
	return s
}

// Float returns the parameter of that name: standard, or what the run gave with --set name=value. The value is a
// number, which may carry the unit ("12e6" or "12e6 Hz"). It panics if what the run gave is no finite number or names
// another unit, and if the name is no parameter name (letters, digits, "-", "_" and ".", a letter first).
func Float(name string, standard float64, unit string) float64 {
	text, ok := parameter(name)
	if !ok {
		return standard
	}
	v, err := strconv.ParseFloat(number(text, unit), 64)
	if err != nil || math.IsInf(v, 0) || math.IsNaN(v) {
		panic(fmt.Errorf("page: parameter %s was set to %q, which is no finite number%s; give one like %g", name, text, in(unit), standard))
	}
	return v
}

// Int is [Float] for whole numbers.
func Int(name string, standard int, unit string) int {
	text, ok := parameter(name)
	if !ok {
		return standard
	}
	v, err := strconv.Atoi(number(text, unit))
	if err != nil {
		panic(fmt.Errorf("page: parameter %s was set to %q, which is no whole number%s; give one like %d", name, text, in(unit), standard))
	}
	return v
}

// Bool returns a parameter that is true or false.
func Bool(name string, standard bool) bool {
	text, ok := parameter(name)
	if !ok {
		return standard
	}
	v, err := strconv.ParseBool(text)
	if err != nil {
		panic(fmt.Errorf("page: parameter %s was set to %q; give true or false", name, text))
	}
	return v
}

// Text returns a parameter that is any text.
func Text(name, standard string) string {
	if text, ok := parameter(name); ok {
		return text
	}
	return standard
}

func parameter(name string) (string, bool) {
	if !ValidName(name) {
		panic(fmt.Errorf("page: %q is no parameter name; use letters, digits, \"-\", \"_\" and \".\", a letter first", name))
	}
	return host().Parameter(name)
}

// ValidName reports whether name can name a parameter: letters, digits, "-", "_" and ".", a letter first.
func ValidName(name string) bool {
	for i, r := range name {
		letter := r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z'
		if !letter && (i == 0 || !strings.ContainsRune("0123456789-_.", r)) {
			return false
		}
	}
	return name != ""
}

func number(text, unit string) string {
	text = strings.TrimSpace(text)
	if unit != "" {
		if cut, ok := strings.CutSuffix(text, unit); ok {
			return strings.TrimSpace(cut)
		}
	}
	return text
}

func in(unit string) string {
	if unit == "" {
		return ""
	}
	return " in " + unit
}
