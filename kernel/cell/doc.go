// Package cell is one interpreter session: it checks, lowers and evaluates cells of Go, completes and inspects.
//
// A cell never reaches the interpreter (yaegi) as it was written. Its way is
//
//	scan    cut the source at top-level semicolons: declarations here, statements there (scan.go, parse.go)
//	check   go/types over embedded export data; the first error ends the cell and nothing has changed (check.go, imports.go);
//	        what may have been meant (hints.go)
//	plan    what the cell replaces, and what of earlier cells must be compiled again to see it (redefine.go)
//	lower   rewrite into the Go that yaegi runs well: generations of names, typed globals, folded constants (lower.go,
//	        rewrite.go, values.go), methods as functions (methods.go), instances of generic code (generics.go), also
//	        that of packages (packages.go, generic), loops and ranges over functions (loops.go, rangefunc.go), assignments
//	        and assertions with Go's meaning (assign.go, assertions.go), guarded goroutines (goroutines.go), marks for
//	        traces (marks.go)
//	run     compile, commit the new names, call the cell's function (interpreter.go, machine.go, run.go); interrupts and the
//	        watchdog (run.go, watchdog.go), traces (trace.go), package page (host.go)
//	show    the last expression's value in the form that Go would print (last.go, show.go, typed.go, format.go)
//
// Completion and inspection (complete.go, inspect.go) ask the same checker about the text up to the cursor (probe.go).
//
// Package-level names of cells get a generation: the third x has a name of its own in the interpreter. So a redefinition never meets
// the symbol that it replaces, functions that used the old one are compiled again from their source, and a cell that
// fails to compile leaves nothing behind. No message shows these names.
package cell

//go:generate go run ./internal/gen std
//go:generate go run ./internal/gen own
