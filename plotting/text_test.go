package plotting

import (
	"errors"
	"fmt"
	"math"
	"reflect"
	"strconv"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

type shouting struct{ s string }

func (s shouting) String() string { return strings.ToUpper(s.s) }

// TestTextIsPrint: up to the limit, the text is what fmt.Print gives. fmt itself is the expected value.
func TestTextIsPrint(t *testing.T) {
	n := 7
	type inner struct {
		A []int
		b map[string]float64
	}
	for _, v := range []any{
		nil, 1, -0.5, 1e21, math.Inf(1), complex(1, -2), true, "a \"b\"\n", 'x', []byte("AMI"), []string{"a", "b c"},
		[]float64{}, []float64(nil), [3]int{1, 2, 3}, [][]float64{{1, 2}, nil, {3}}, map[string]int{"b": 2, "a": 1},
		struct{}{}, inner{[]int{1}, map[string]float64{"y": 2, "x": 1}}, &inner{}, []any{1, "a", nil, []int{2}},
		shouting{"quiet"}, []shouting{{"a"}, {"b"}}, &shouting{"p"}, errors.New("no"), []error{errors.New("e"), nil},
		time.Second, []time.Duration{1, 2}, &[]int{1, 2}, &map[int]bool{1: true}, (*inner)(nil), (*int)(nil), struct{ p *int }{&n},
	} {
		if got, want := Text(v), fmt.Sprint(v); got != want {
			t.Errorf("Text(%#v) = %q, fmt.Print gives %q", v, got, want)
		}
	}
}

// TestPrinterIsPrint: the printer that cuts long values writes short ones as fmt does, too.
func TestPrinterIsPrint(t *testing.T) {
	var value func(depth int) *rapid.Generator[any]
	value = func(depth int) *rapid.Generator[any] {
		if depth == 0 {
			return rapid.OneOf(rapid.Int().AsAny(), rapid.Float64().AsAny(), rapid.String().AsAny(), rapid.Bool().AsAny(), rapid.Just[any](nil))
		}
		return rapid.OneOf(
			rapid.SliceOfN(value(depth-1), 0, 4).AsAny(),
			rapid.SliceOfN(rapid.Float64(), 0, 4).AsAny(),
			rapid.MapOfN(rapid.Int(), value(depth-1), 0, 4).AsAny(),
			rapid.MapOfN(rapid.String(), rapid.Byte(), 0, 4).AsAny(),
			rapid.Custom(func(t *rapid.T) any {
				return struct {
					A any
					b []int
				}{value(depth-1).Draw(t, "field"), rapid.SliceOfN(rapid.Int(), 0, 3).Draw(t, "ints")}
			}),
			value(depth-1),
		)
	}
	rapid.Check(t, func(t *rapid.T) {
		v := []any{value(3).Draw(t, "value")} // in a slice: a bare nil is no value to reflection
		if got, want := printWhole(v), fmt.Sprint(v); got != want {
			t.Fatalf("printed %q, fmt gives %q", got, want)
		}
	})
}

func printWhole(v any) string {
	p := printer{left: math.MaxInt}
	p.print(reflect.ValueOf(v), 0)
	return p.String()
}

func TestTextSeveral(t *testing.T) {
	// The contract: several values are parted by a space, also strings, where fmt.Print would join them.
	if got, want := Text(1, "a", "b", nil, []int{2}), "1 a b <nil> [2]"; got != want {
		t.Errorf("Text = %q, want %q", got, want)
	}
	if got := Text(); got != "" {
		t.Errorf("Text() = %q, want nothing", got)
	}
}

// TestTextCut: the contract has values whole up to 10,000 elements and then cut with the count.
func TestTextCut(t *testing.T) {
	ints := make([]int, 20_000)
	for i := range ints {
		ints[i] = i
	}
	rows := make([][]int, 200)
	for i := range rows {
		rows[i] = ints[:100]
	}
	words := map[int]string{}
	for i := range 10_001 {
		words[i] = "w" + strconv.Itoa(i)
	}
	whole := strings.TrimSuffix(fmt.Sprint(ints[:10_000]), "]")
	for _, tt := range []struct {
		name           string
		v              any
		prefix, suffix string
		fields         int
	}{
		{"whole at the limit", ints[:10_000], "[0 1 2", "9998 9999]", 10_000},
		{"slice", ints, whole + " ...", "] (20000 elements)", 10_003},
		{"one more", ints[:10_001], whole + " ...", "] (10001 elements)", 10_003},
		{"nested", rows, "[[0 1 2", "98 99] ...] (20000 elements)", 10_003},
		{"in a struct", struct {
			Name string
			V    []int
		}{"x", ints}, "{x [0 1 2", "9999 ...]} (20000 elements)", 10_004},
		{"behind a pointer", &struct{ V []int }{ints}, "&{[0 1 2", "9999 ...]} (20000 elements)", 10_003},
		{"map", words, "map[0:w0 1:w1 2:w2", "9999:w9999 ...] (10001 elements)", 10_003},
		{"string", strings.Repeat("x ", 30_000), "x x", "x ", 30_000},
	} {
		t.Run(tt.name, func(t *testing.T) {
			got := Text(tt.v)
			if !strings.HasPrefix(got, tt.prefix) || !strings.HasSuffix(got, tt.suffix) {
				t.Errorf("text begins %.60q and ends %q; want %.60q and %q", got, got[max(0, len(got)-60):], tt.prefix, tt.suffix)
			}
			if n := len(strings.Fields(got)); n != tt.fields {
				t.Errorf("%d fields, want %d", n, tt.fields)
			}
		})
	}
}

// TestTextEndless: values that hold themselves would overflow fmt's stack and end the process.
func TestTextEndless(t *testing.T) {
	ring := []any{1, nil, nil}
	ring[1], ring[2] = ring, ring
	loop := map[string]any{}
	loop["self"] = loop
	for _, v := range []any{ring, loop} {
		got := Text(v)
		if !strings.Contains(got, "...") || len(got) > 1_000_000 {
			t.Errorf("text of a value that holds itself: %d characters, %.80q", len(got), got)
		}
	}
}
