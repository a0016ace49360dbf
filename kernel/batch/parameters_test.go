package batch

import (
	"testing"

	"github.com/google/go-cmp/cmp"
)

func TestParametersAreReadWithoutRunning(t *testing.T) {
	n := notebookOf(t,
		`rate := page.Float("bit-rate", 10e6, "Hz") // page.Int("comment", 1, "")`,
		`n := page.Int("turns", len([]int{1, 2}), ""); on := page.Bool("busy", true)
x := "page.Text(\"quoted\", 1)"
page.Float("bit-rate", 3, "Hz")`,
		"page.Text(`code`, \"a, b\")",
		`panic("page.Float") ; page.Float(name, 1, "V"); page.Slot("best").Set(1); page.Float("open", 1`,
	)
	want := []Parameter{
		{Name: "bit-rate", Type: "number", Standard: "10e6", Unit: "Hz", Cell: 1},
		{Name: "turns", Type: "whole number", Standard: "len([]int{1, 2})", Cell: 2},
		{Name: "busy", Type: "true or false", Standard: "true", Cell: 2},
		{Name: "code", Type: "text", Standard: `"a, b"`, Cell: 3},
	}
	if d := cmp.Diff(want, n.Parameters()); d != "" {
		t.Error(d)
	}
}
