package batch

import (
	"errors"
	"strings"
	"testing"
	"time"
)

func TestProgress(t *testing.T) {
	cell := &Cell{Source: "// the code\nimport \"os\"\n\n  ami  :=\tlinecode.AMI()\nami"}
	long := &Cell{Source: strings.Repeat("ä", 60)}
	comment := &Cell{Source: "\n// only a comment\n"}
	var b strings.Builder
	p := NewProgress(&b, false)
	for i, c := range []*Cell{cell, long, comment} {
		p.Begin(i+9, 12, c)
		var err error
		if c == comment {
			err = errors.New("x")
		}
		p.End(i+9, 12, c, 1234*time.Millisecond, err)
	}
	want := "[ 9/12] ami := linecode.AMI()                               1.23 s\n" +
		"[10/12] " + strings.Repeat("ä", 47) + "…    1.23 s\n" +
		"[11/12] // only a comment                                   1.23 s  stopped\n"
	if b.String() != want {
		t.Errorf("got\n%s\nwant\n%s", b.String(), want)
	}
	b.Reset()
	p = NewProgress(&b, true)
	p.Begin(1, 1, cell)
	p.End(1, 1, cell, time.Second, nil)
	if got := b.String(); strings.Count(got, "\n") != 1 || !strings.HasPrefix(got, redraw) {
		t.Errorf("on a terminal: %q", got)
	}
}
