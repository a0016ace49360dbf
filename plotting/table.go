package plotting

import (
	"fmt"
	"html"
	"reflect"
	"strconv"
	"strings"

	"gonum.org/v1/gonum/mat"

	"linewright/builtins/spectrum"
)

// What a table shows of a large value: so many rows and columns from its start and its end. A page stays readable
// and a notebook small; text/plain has all digits.
const (
	headRows, tailRows       = 12, 4
	headColumns, tailColumns = 8, 2
	wideColumns              = 5 // in place of headColumns where a number has more than shortNumber characters
	shortNumber              = 6
)

// Table returns an HTML table of numbers: slices and arrays of integers, floating-point or complex numbers, such
// slices of slices, and matrices. Of a large value it has the first and last rows and columns, and the size in the
// caption. It reports false for every other value, and for one that holds no number.
//
// A slice runs along the rows, ten or five numbers each: the index of a number is its row's head plus its column's.
// Numbers are rounded to six digits.
func Table(v any) (string, bool) {
	if m, ok := v.(mat.Matrix); ok && !isNil(v) {
		rows, columns := m.Dims()
		return grid(rows, columns, fmt.Sprintf("%d × %d matrix", rows, columns), func(i, j int) string {
			return digits(reflect.ValueOf(m.At(i, j)))
		}), rows > 0 && columns > 0
	}
	if lines, ok := v.([]spectrum.Line); ok {
		return toneTable(lines), len(lines) > 0
	}
	rv := reflect.ValueOf(v)
	if !isList(rv) || rv.Len() == 0 {
		return "", false
	}
	elem := rv.Type().Elem()
	if isNumber(elem) {
		return listTable(rv), true
	}
	if k := elem.Kind(); k != reflect.Slice && k != reflect.Array || !isNumber(elem.Elem()) {
		return "", false
	}
	columns, ragged := 0, false
	for i := range rv.Len() {
		n := rv.Index(i).Len()
		ragged = ragged || i > 0 && n != columns
		columns = max(columns, n)
	}
	if columns == 0 {
		return "", false
	}
	size := fmt.Sprintf("%d × %d numbers, %s", rv.Len(), columns, elem.Elem())
	if ragged {
		size = fmt.Sprintf("%d rows of up to %d numbers, %s", rv.Len(), columns, elem.Elem())
	}
	return grid(rv.Len(), columns, size, func(i, j int) string {
		if row := rv.Index(i); j < row.Len() {
			return digits(row.Index(j))
		}
		return ""
	}), true
}

func isList(v reflect.Value) bool { return v.Kind() == reflect.Slice || v.Kind() == reflect.Array }

func isNumber(t reflect.Type) bool {
	return t.Kind() >= reflect.Int && t.Kind() <= reflect.Complex128 && t.Kind() != reflect.Uintptr
}

// digits writes a number in at most six digits. Numbers with a String method of their own keep it.
func digits(v reflect.Value) string {
	if opaque(v) {
		return fmt.Sprint(v)
	}
	switch {
	case v.CanFloat():
		return strconv.FormatFloat(v.Float(), 'g', 6, 64)
	case v.CanComplex():
		return strings.Trim(strconv.FormatComplex(v.Complex(), 'g', 6, 128), "()")
	}
	return fmt.Sprint(v)
}

// listTable writes a slice of numbers along rows.
func listTable(v reflect.Value) string {
	n := v.Len()
	perRow := 10
	for _, i := range shown(n, 100, 10) {
		if i >= 0 && len(digits(v.Index(i))) > shortNumber {
			perRow = 5 // wide numbers: ten in a row would need a scroll bar
		}
	}
	var t tableWriter
	t.start(plural(n, "number") + ", " + v.Type().Elem().String())
	t.head("")
	for j := range min(perRow, n) {
		t.head("+" + strconv.Itoa(j))
	}
	for _, i := range shown((n+perRow-1)/perRow, headRows, tailRows) {
		t.row()
		if i < 0 {
			t.head("⋮")
			continue
		}
		t.head(strconv.Itoa(i * perRow))
		for j := i * perRow; j < min(n, (i+1)*perRow); j++ {
			t.cell(digits(v.Index(j)))
		}
	}
	return t.end()
}

// grid writes rows by columns under a caption.
func grid(rows, columns int, caption string, at func(i, j int) string) string {
	is, js := shown(rows, headRows, tailRows), shown(columns, headColumns, tailColumns)
	for _, i := range is {
		for _, j := range js {
			if i >= 0 && j >= 0 && len(at(i, j)) > shortNumber {
				js = shown(columns, wideColumns, tailColumns) // no scroll bar
			}
		}
	}
	var t tableWriter
	t.start(caption)
	t.head("")
	for _, j := range js {
		t.head(index(j, "⋯"))
	}
	for _, i := range is {
		t.row()
		t.head(index(i, "⋮"))
		for _, j := range js {
			switch {
			case i < 0:
				t.cell("")
			case j < 0:
				t.cell("⋯")
			default:
				t.cell(at(i, j))
			}
		}
	}
	return t.end()
}

// toneTable writes tones with their units.
func toneTable(lines []spectrum.Line) string {
	var t tableWriter
	t.start(plural(len(lines), "tone"))
	t.head("")
	t.head("frequency (Hz)")
	t.head("power (V²)")
	for _, i := range shown(len(lines), headRows, tailRows) {
		t.row()
		t.head(index(i, "⋮"))
		if i >= 0 {
			// A frequency keeps ten digits: tones lie close together, and six would merge them.
			t.cell(strconv.FormatFloat(lines[i].Freq, 'g', 10, 64))
			t.cell(strconv.FormatFloat(lines[i].Power, 'g', 6, 64))
		}
	}
	return t.end()
}

// shown returns the indices 0..n-1, those between the first head and the last tail replaced by a single -1.
func shown(n, head, tail int) []int {
	var is []int
	for i := 0; i < n; i++ {
		if i == head && n > head+tail+1 {
			is = append(is, -1)
			i = n - tail
		}
		is = append(is, i)
	}
	return is
}

func index(i int, gap string) string {
	if i < 0 {
		return gap
	}
	return strconv.Itoa(i)
}

// A tableWriter writes an HTML table. It sets no colours, so that the table is as readable as the page, light or dark.
type tableWriter struct{ strings.Builder }

func (t *tableWriter) start(caption string) {
	t.WriteString(`<table class="linewright"><caption style="text-align:left;color:inherit">` + html.EscapeString(caption) + `</caption><tr>`)
}
func (t *tableWriter) row() { t.WriteString("</tr>\n<tr>") }
func (t *tableWriter) head(s string) {
	t.WriteString(`<th style="text-align:right">` + html.EscapeString(s) + `</th>`)
}
func (t *tableWriter) cell(s string) {
	t.WriteString(`<td style="text-align:right">` + html.EscapeString(s) + `</td>`)
}
func (t *tableWriter) end() string {
	t.WriteString("</tr></table>")
	return t.String()
}
