package cell

import (
	"fmt"
	"regexp"
	"strconv"
)

// Names of the interpreter's side carry a letter that no one types, so that they collide with nothing in a cell and can
// be taken out of every message.
const (
	mark   = "ǀ"        // x + mark + generation
	kernel = "k" + mark // the package by which lowered cells call this one

	valuesName = kernel + "values" // the function of source.list, which only the checker sees

	asError = kernel + "error" // a function of the interpreter that makes an error of its argument
	asAny   = kernel + "any"   // the same for any
)

var (
	marked       = regexp.MustCompile(`([\p{L}_][\p{L}\p{Nd}_]*?)` + mark + `\d+`)
	cellsPackage = regexp.MustCompile(`\bmain\.`)
)

// plain takes generations, and the package that all cells are to the checker, out of a message.
func plain(s string) string {
	return cellsPackage.ReplaceAllString(marked.ReplaceAllString(s, "$1"), "")
}

// generations numbers the interpreter's names.
type generations map[string]int

// fresh returns a name that was never used before.
func (g generations) fresh(name string) string {
	g[name]++
	return name + mark + strconv.Itoa(g[name])
}

// position says where in a cell something is, as "cell[3]:2:5".
func position(n, line, column int) string { return fmt.Sprintf("cell[%d]:%d:%d", n, line, column) }
