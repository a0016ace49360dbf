// Package cell is one interpreter session: it checks, lowers and evaluates cells of Go, completes and inspects.
//
// A cell never reaches the interpreter (yaegi) as it was written. Its way is
//
//	scan    cut the source at top-level semicolons: declarations here, statements there (scan.go, parse.go)
//	check   go/types over embedded export data; the first error ends the cell and nothing has changed (check.go, imports.go)
//	lower   rewrite into the Go that yaegi runs well: generations of names, typed globals, folded constants, methods as
//	        functions, guarded goroutines (lower.go and its neighbours)
//	run     compile, commit the new names, call the cell's function; interrupts, watchdog, traces (run.go, machine.go)
//	show    the last expression's value in the form that Go would print (show.go, format.go)
//
// Package-level names of cells get a generation: the third x has a name of its own in the interpreter. So a redefinition never meets
// the symbol that it replaces, functions that used the old one are compiled again from their source, and a cell that
// fails to compile leaves nothing behind. No message shows these names.
package cell

//go:generate go run ./internal/gen std
//go:generate go run ./internal/gen own
