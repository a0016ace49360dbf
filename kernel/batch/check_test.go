package batch

import (
	"bytes"
	"encoding/base64"
	"errors"
	"image"
	"image/color"
	"image/png"
	"os"
	"slices"
	"strings"
	"testing"
)

func TestCheck(t *testing.T) {
	j := job(t, `x := 1.0 / 3`, `fmt.Println(x)`, `linecode.AMI()`, "p, err := spectrum.Exact(linecode.AMI(), pulse.Train{})\nplotting.Spectrum(p)", `[]float64{x}`)
	j.Out = j.In
	if _, err := j.Run(t.Context()); err != nil {
		t.Fatal(err)
	}
	var b bytes.Buffer
	if err := Check(t.Context(), j.In, j.Conditions, 0, &b); err != nil {
		t.Errorf("a notebook differs from itself: %v\n%s", err, b.String())
	}
	stored := readFile(t, j.In)
	changed := strings.Replace(stored, "0.3333333333333333\\n", "0.3333333\\n", 1)
	if err := os.WriteFile(j.In, []byte(changed), 0o644); err != nil {
		t.Fatal(err)
	}
	if err := Check(t.Context(), j.In, j.Conditions, 1e-6, &b); err != nil {
		t.Errorf("a difference below the tolerance: %v\n%s", err, b.String())
	}
	b.Reset()
	err := Check(t.Context(), j.In, j.Conditions, 1e-9, &b)
	var differs *DifferenceError
	if !errors.As(err, &differs) || !slices.Equal(differs.Cells, []int{2}) {
		t.Errorf("a difference above the tolerance: %v", err)
	}
	for _, want := range []string{"cell 2: fmt.Println(x)\n", "-0.3333333\n", "+0.3333333333333333\n"} {
		if !strings.Contains(b.String(), want) {
			t.Errorf("the difference lacks %q:\n%s", want, b.String())
		}
	}
	if readFile(t, j.In) != changed {
		t.Error("the notebook has changed")
	}
}

func TestCheckOfANotebookThatFails(t *testing.T) {
	j := job(t, `fmt.Println(1)`, `1/0`)
	var b bytes.Buffer
	err := Check(t.Context(), j.In, j.Conditions, 0, &b)
	var failed *CellError
	if !errors.As(err, &failed) || failed.Number != 2 {
		t.Errorf("%v", err)
	}
	if !strings.Contains(b.String(), `output 1 is new: stdout "1\n"`) {
		t.Errorf("differences:\n%s", b.String())
	}
}

func TestCompareText(t *testing.T) {
	for _, c := range []struct {
		name, stored, now string
		tolerance         float64
		same              bool
	}{
		{"the same", "a 1", "a 1", 0, true},
		{"last line end", "a\n", "a", 0, true},
		{"terminal colours", "\x1b[31ma\x1b[0m", "a", 0, true},
		{"near", "P = 1.0000001e-08 W", "P = 1.0000002e-08 W", 1e-6, true},
		{"far", "P = 1.0001e-08 W", "P = 1.0002e-08 W", 1e-6, false},
		{"another unit", "P = 1 W", "P = 1 V", 1e-6, false},
		{"other notation", "100000", "1e+05", 0, true},
		{"sign", "-1", "1", 0.5, false},
		{"sign and spaces", "[1 -2]", "[1 -2.0000000001]", 1e-9, true},
		{"a number more", "1 2", "1 2 3", 1, false},
		{"a line more", "1\n2", "1\n2\n3", 1, false},
		{"a word", "NaN", "1", 1, false},
		{"both not a number", "NaN +Inf", "NaN +Inf", 0, true},
		{"names with digits", "8b10b", "8b12b", 0, false},
	} {
		if got := (comparison{c.tolerance}).text("x", c.stored, c.now, 0); (got == "") != c.same {
			t.Errorf("%s: %q", c.name, got)
		}
	}
}

func pngOf(t *testing.T, paint func(*image.Gray)) string {
	t.Helper()
	m := image.NewGray(image.Rect(0, 0, 100, 100))
	paint(m)
	var b bytes.Buffer
	if err := png.Encode(&b, m); err != nil {
		t.Fatal(err)
	}
	return base64.StdEncoding.EncodeToString(b.Bytes())
}

func TestCompareOutputs(t *testing.T) {
	display := func(pairs ...any) *Output {
		o := &Output{Type: displayData, Data: map[string]any{}}
		for i := 0; i < len(pairs); i += 2 {
			o.Data[pairs[i].(string)] = pairs[i+1]
		}
		return o
	}
	black := pngOf(t, func(*image.Gray) {})
	paint := func(n int, grey uint8) string {
		return pngOf(t, func(m *image.Gray) {
			for i := range n {
				m.SetGray(i, 50, color.Gray{grey})
			}
		})
	}
	const svg, mime = `<path d="M10 20.5"/>`, "image/svg+xml"
	for _, c := range []struct {
		name        string
		stored, now *Output
		want        string // "" means the same
	}{
		{"type", &Output{Type: stream, Stream: "stdout"}, display("text/plain", "x"), `was stdout "" and is display_data "x"`},
		{"stream", &Output{Type: stream, Stream: "stdout"}, &Output{Type: stream, Stream: "stderr"}, "was stdout"},
		{"forms", display("text/plain", "x"), display("text/plain", "x", "text/html", "x"), "had the forms text/plain and has text/html, text/plain"},
		{"error", &Output{Type: failure, Name: "panic", Value: "a"}, &Output{Type: failure, Name: "panic", Value: "b"}, "error differs"},
		{"trace alone", &Output{Type: failure, Value: "a", Traceback: []string{"x"}}, &Output{Type: failure, Value: "a"}, ""},
		{"count alone", &Output{Type: executeResult, Count: 1}, &Output{Type: executeResult, Count: 2}, ""},
		{"drawing moved a little", display(mime, svg), display(mime, `<path d="M10.04 20.5"/>`), ""},
		{"drawing moved", display(mime, svg), display(mime, `<path d="M10.06 20.5"/>`), "image/svg+xml differs"},
		{"picture beside a drawing", display(mime, svg, "image/png", black), display(mime, svg, "image/png", paint(100, 255)), ""},
		{"few pixels", display("image/png", black), display("image/png", paint(10, 255)), ""},
		{"more pixels", display("image/png", black), display("image/png", paint(11, 255)), "image/png differs in 0.11 %"},
		{"many pixels, invisibly", display("image/png", black), display("image/png", paint(100, 10)), ""},
		{"no picture", display("image/png", black), display("image/png", "AAAA"), "cannot be read"},
		{"tree", display("application/json", map[string]any{"a": []any{"x"}}), display("application/json", map[string]any{"a": []any{"y"}}), "application/json differs"},
		{"same tree", display("application/json", map[string]any{"a": true}), display("application/json", map[string]any{"a": true}), ""},
		{"other bytes", display("application/pdf", "AA"), display("application/pdf", "AB"), "application/pdf differs"},
	} {
		got := comparison{1e-6}.output(c.stored, c.now)
		if (got == "") != (c.want == "") || !strings.Contains(got, c.want) {
			t.Errorf("%s: %q, want %q", c.name, got, c.want)
		}
	}
}

func TestLongDifferencesAreCut(t *testing.T) {
	text := comparison{}.text("stdout", strings.Repeat("a\n", 100), strings.Repeat("b\n", 100), 0)
	if n := strings.Count(text, "\n"); n > maxDiff+2 || !strings.HasSuffix(text, "...") {
		t.Errorf("%d lines:\n%s", n, text)
	}
}
