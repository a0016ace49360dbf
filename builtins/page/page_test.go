package page

import (
	"context"
	"errors"
	"strings"
	"testing"
)

// fakeHost records what a cell's page asks of the kernel.
type fakeHost struct {
	set     map[string]string
	shown   []string // "id=value"
	answers []string
	secret  bool
	cleared int
}

func (h *fakeHost) Show(v any, id string) { h.shown = append(h.shown, id+"="+v.(string)) }
func (h *fakeHost) Clear()                { h.cleared++ }
func (h *fakeHost) Ask(_ string, secret bool) (string, error) {
	h.secret = secret
	if len(h.answers) == 0 {
		return "", ErrNoReader
	}
	a := h.answers[0]
	h.answers = h.answers[1:]
	return a, nil
}
func (h *fakeHost) Parameter(name string) (string, bool) { v, ok := h.set[name]; return v, ok }
func (h *fakeHost) Context() context.Context             { return context.Background() }

func attach(t *testing.T, h *fakeHost) {
	t.Helper()
	Attach(h)
	t.Cleanup(func() { current.Store(nil) })
}

// panicOf returns the text of the error that f panics with.
func panicOf(t *testing.T, f func()) (text string) {
	t.Helper()
	defer func() {
		err, ok := recover().(error)
		if !ok {
			t.Fatal("no panic with an error")
		}
		text = err.Error()
	}()
	f()
	return ""
}

func TestParametersKeepTheirStandardUnlessSet(t *testing.T) {
	attach(t, &fakeHost{set: map[string]string{"rate": "12e6", "with-unit": " 12.5 kHz ", "count": "7", "fast": "true", "name": "two words"}})
	for _, tt := range []struct{ got, want any }{
		{Float("rate", 10e6, "Hz"), 12e6},
		{Float("other", 10e6, "Hz"), 10e6},
		{Float("with-unit", 1, "kHz"), 12.5},
		{Int("count", 3, ""), 7},
		{Int("other", 3, ""), 3},
		{Bool("fast", false), true},
		{Bool("other", true), true},
		{Text("name", "x"), "two words"},
		{Text("other", "x"), "x"},
	} {
		if tt.got != tt.want {
			t.Errorf("got %v, want %v", tt.got, tt.want)
		}
	}
}

func TestBadParametersSayWhatWouldBeRight(t *testing.T) {
	attach(t, &fakeHost{set: map[string]string{"rate": "fast", "huge": "1e999", "nan": "NaN", "unit": "3 MHz", "count": "2.5", "on": "perhaps"}})
	for want, f := range map[string]func(){
		`page: parameter rate was set to "fast", which is no finite number in Hz; give one like 1e+07`: func() { Float("rate", 10e6, "Hz") },
		`page: parameter huge was set to "1e999", which is no finite number; give one like 1`:          func() { Float("huge", 1, "") },
		`page: parameter nan was set to "NaN", which is no finite number; give one like 1`:             func() { Float("nan", 1, "") },
		`page: parameter unit was set to "3 MHz", which is no finite number in Hz; give one like 1`:    func() { Float("unit", 1, "Hz") },
		`page: parameter count was set to "2.5", which is no whole number in turns; give one like 4`:   func() { Int("count", 4, "turns") },
		`page: parameter on was set to "perhaps"; give true or false`:                                  func() { Bool("on", true) },
		`page: "two words" is no parameter name; use letters, digits, "-", "_" and ".", a letter first`: func() {
			Text("two words", "")
		},
		`page: Slot("") has no name; give it one, for instance Slot("best")`: func() { Slot("") },
	} {
		if got := panicOf(t, f); got != want {
			t.Errorf("got  %s\nwant %s", got, want)
		}
	}
}

func TestAskPassesTheAnswerOrFails(t *testing.T) {
	h := &fakeHost{answers: []string{"AMI", "1234"}}
	attach(t, h)
	if got := Ask("code? "); got != "AMI" || h.secret {
		t.Errorf("Ask gave %q, secret %v", got, h.secret)
	}
	if got := AskSecret("key? "); got != "1234" || !h.secret {
		t.Errorf("AskSecret gave %q, secret %v", got, h.secret)
	}
	if got := panicOf(t, func() { Ask("more? ") }); !strings.HasPrefix(got, `page: cannot ask "more? ": nobody can be asked here`) {
		t.Error(got)
	}
}

func TestSlotsAndShowReachTheHost(t *testing.T) {
	h := &fakeHost{}
	attach(t, h)
	Slot("best").Set("one")
	Show("plain")
	Clear()
	if got := strings.Join(h.shown, " "); got != "best=one =plain" || h.cleared != 1 {
		t.Errorf("host saw %q and %d clears", got, h.cleared)
	}
	if Slot("best").Name() != "best" {
		t.Error("a slot's name is its display_id")
	}
}

func TestWithoutAKernelNobodyCanBeAsked(t *testing.T) {
	if _, err := host().Ask("?", false); !errors.Is(err, ErrNoReader) {
		t.Errorf("got %v", err)
	}
	if Float("rate", 2.5, "Hz") != 2.5 || Context().Err() != nil {
		t.Error("a plain program has the standard values and a live context")
	}
}
