package plotting

import (
	"encoding/xml"
	"io"
	"math"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"gonum.org/v1/gonum/mat"

	"linewright/builtins/spectrum"
)

// parse reads an HTML table as its caption and the text of its cells.
func parse(t *testing.T, table string) (caption string, rows [][]string) {
	t.Helper()
	d := xml.NewDecoder(strings.NewReader(table))
	var in string
	for {
		token, err := d.Token()
		if err == io.EOF {
			return caption, rows
		}
		if err != nil {
			t.Fatalf("the table is not well formed: %v\n%s", err, table)
		}
		switch e := token.(type) {
		case xml.StartElement:
			switch in = e.Name.Local; in {
			case "tr":
				rows = append(rows, nil)
			case "th", "td":
				rows[len(rows)-1] = append(rows[len(rows)-1], "")
			}
		case xml.EndElement:
			in = ""
		case xml.CharData:
			switch in {
			case "caption":
				caption += string(e)
			case "th", "td":
				r := rows[len(rows)-1]
				r[len(r)-1] += string(e)
			}
		}
	}
}

func TestTable(t *testing.T) {
	for _, tt := range []struct {
		name    string
		v       any
		caption string
		rows    [][]string
	}{
		{"bits", []byte{1, 0, 1, 1, 0, 0, 0, 0, 1, 1, 0, 1}, "12 numbers, uint8", [][]string{
			{"", "+0", "+1", "+2", "+3", "+4", "+5", "+6", "+7", "+8", "+9"},
			{"0", "1", "0", "1", "1", "0", "0", "0", "0", "1", "1"},
			{"10", "0", "1"}}},
		{"one", []int{7}, "1 number, int", [][]string{{"", "+0"}, {"0", "7"}}},
		{"floats", []float64{1.0 / 3, math.Inf(-1), math.NaN(), -2e-12, 5, 6}, "6 numbers, float64", [][]string{
			{"", "+0", "+1", "+2", "+3", "+4"},
			{"0", "0.333333", "-Inf", "NaN", "-2e-12", "5"},
			{"5", "6"}}},
		{"complex", []complex128{1 - 2i}, "1 number, complex128", [][]string{{"", "+0"}, {"0", "1-2i"}}},
		{"durations keep their units", [2]time.Duration{time.Second, time.Millisecond}, "2 numbers, time.Duration", [][]string{
			{"", "+0", "+1"}, {"0", "1s", "1ms"}}},
		{"rows", [][]float64{{1, 2}, {3, 4}}, "2 × 2 numbers, float64", [][]string{{"", "0", "1"}, {"0", "1", "2"}, {"1", "3", "4"}}},
		{"ragged rows", [][]int{{1}, {2, 3}}, "2 rows of up to 2 numbers, int", [][]string{{"", "0", "1"}, {"0", "1", ""}, {"1", "2", "3"}}},
		{"matrix", mat.NewDense(2, 2, []float64{1, 2, 3, 4}), "2 × 2 matrix", [][]string{{"", "0", "1"}, {"0", "1", "2"}, {"1", "3", "4"}}},
		{"transposed", mat.NewDense(2, 2, []float64{1, 2, 3, 4}).T(), "2 × 2 matrix", [][]string{{"", "0", "1"}, {"0", "1", "3"}, {"1", "2", "4"}}},
		{"tones", []spectrum.Line{{Freq: 0, Power: 0.25}, {Freq: 2048000.5, Power: 1.0 / 3}}, "2 tones", [][]string{
			{"", "frequency (Hz)", "power (V²)"}, {"0", "0", "0.25"}, {"1", "2048000.5", "0.333333"}}},
	} {
		t.Run(tt.name, func(t *testing.T) {
			table, ok := Table(tt.v)
			if !ok {
				t.Fatal("no table")
			}
			caption, rows := parse(t, table)
			if caption != tt.caption {
				t.Errorf("caption %q, want %q", caption, tt.caption)
			}
			if diff := cmp.Diff(tt.rows, rows); diff != "" {
				t.Errorf("rows (-want +got):\n%s", diff)
			}
		})
	}
}

func TestTableBounded(t *testing.T) {
	long := make([]float64, 1_000_000)
	for i := range long {
		long[i] = float64(i)
	}
	wide := make([][]float64, 1000)
	for i := range wide {
		wide[i] = long[:1000]
	}
	tones := make([]spectrum.Line, 5000)
	for name, v := range map[string]any{"slice": long, "rows": wide, "matrix": mat.NewDense(1000, 1000, long), "tones": tones} {
		t.Run(name, func(t *testing.T) {
			table, _ := Table(v)
			caption, rows := parse(t, table)
			if !strings.Contains(caption, "1000") && !strings.Contains(caption, "5000") {
				t.Errorf("the caption %q lacks the count", caption)
			}
			if len(table) > 20_000 || len(rows) > 20 {
				t.Errorf("%d bytes in %d rows, want at most 20,000 in 20", len(table), len(rows))
			}
			for _, r := range rows {
				if len(r) > 12 {
					t.Errorf("%d cells in a row, want at most 12", len(r))
				}
			}
			if last := rows[len(rows)-1]; name != "tones" && !strings.HasPrefix(last[len(last)-1], "99") && last[len(last)-1] != "1e+06" {
				t.Errorf("the table ends with %q, want the last number", last)
			}
		})
	}
	// All of a value is shown where only one row would be left out: the mark of the gap takes as much room.
	table, _ := Table(mat.NewDense(headRows+tailRows+1, 1, nil))
	if strings.Contains(table, "⋮") {
		t.Error("a gap of one row is marked")
	}
}

func TestNoTable(t *testing.T) {
	for _, v := range []any{
		nil, 1, "text", []string{"a"}, []bool{true}, []float64{}, []any{1}, [][]float64{}, [][]float64{{}, {}}, (*mat.Dense)(nil),
		&mat.Dense{}, []spectrum.Line{}, struct{ V []float64 }{}, [][][]float64{{{1}}}, map[int]int{1: 1}, []uintptr{1},
	} {
		if table, ok := Table(v); ok {
			t.Errorf("%T has a table: %s", v, table)
		}
	}
}
