package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"strings"

	"github.com/alecthomas/kong"

	"linewright/kernel/batch"
)

// The exit statuses of every command.
const (
	statusOK          = 0
	statusFailed      = 1   // the notebook's doing: a cell failed, outputs differ, a parameter was set in vain
	statusTrouble     = 2   // wrong usage, a file that cannot be read or written, a kernel that cannot run
	statusInterrupted = 130 // as shells have it for a program that Ctrl-C ended
)

const exitHelp = `A Go notebook kernel for line codes and their spectra.

Exit status: 0 all right; 1 the notebook failed (a cell, outputs that differ, a parameter set in vain); 2 wrong usage, a file that cannot be read or written, or a kernel that cannot run; 130 interrupted.`

// streams are what commands write to.
type streams struct{ out, err io.Writer }

// terminal reports whether standard error is a terminal.
func (s streams) terminal() bool {
	f, ok := s.err.(*os.File)
	if !ok {
		return false
	}
	info, err := f.Stat()
	return err == nil && info.Mode()&os.ModeCharDevice != 0
}

// command runs the subcommand of table that args name and returns the exit status. An error is one line on stderr.
func command(table any, args []string, stdout, stderr io.Writer) int {
	exited := -1
	parser, err := kong.New(table, kong.Name("linewright"), kong.Description(exitHelp), kong.UsageOnError(),
		kong.Writers(stdout, stderr), kong.Exit(func(status int) { exited = status }),
		kong.ConfigureHelp(kong.HelpOptions{Compact: true}))
	if err != nil {
		panic(err) // the table is wrong, not the arguments
	}
	parsed, err := parser.Parse(args)
	switch {
	case exited >= 0: // help was asked for and has been printed
		return exited
	case err != nil:
		fmt.Fprintf(stderr, "linewright: %v; see linewright --help\n", err)
		return statusTrouble
	}
	err = parsed.Run(streams{stdout, stderr})
	if err != nil {
		report(stderr, err)
	}
	return status(err)
}

// report writes an error, each of several on a line of its own, and the trace of a failed cell below it.
func report(w io.Writer, err error) {
	for l := range strings.Lines(err.Error()) {
		fmt.Fprintf(w, "linewright: %s\n", strings.TrimRight(l, "\n"))
	}
	var cell *batch.CellError
	if errors.As(err, &cell) {
		for _, l := range cell.Trace() {
			fmt.Fprintf(w, "  %s\n", l)
		}
	}
}

// status returns the exit status of a command that ends with err.
func status(err error) int {
	var (
		cell       *batch.CellError
		parameter  *batch.ParameterError
		difference *batch.DifferenceError
	)
	switch {
	case err == nil:
		return statusOK
	case errors.Is(err, batch.ErrInterrupted):
		return statusInterrupted
	case errors.As(err, &cell), errors.As(err, &parameter), errors.As(err, &difference):
		return statusFailed
	}
	return statusTrouble
}
