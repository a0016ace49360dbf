package main

import (
	"context"
	"fmt"
	"os"
	"os/signal"
	"strings"
	"syscall"

	"linewright/builtins/page"
	"linewright/install"
	"linewright/kernel/batch"
)

// execution is what run and check have in common.
type execution struct {
	Notebook string   `arg:"" name:"notebook.ipynb" help:"The notebook, of nbformat 4.0 to 4.5."`
	Set      []string `sep:"none" placeholder:"NAME=VALUE" help:"Value of a parameter that the notebook asks for. Repeatable."`
}

// conditions returns what the cells are executed under.
func (e execution) conditions(s streams) (batch.Conditions, error) {
	program, err := os.Executable()
	if err != nil {
		return batch.Conditions{}, fmt.Errorf("cannot tell where this program is, to start it as a kernel: %w", err)
	}
	parameters := map[string]string{}
	for _, pair := range e.Set {
		name, value, ok := strings.Cut(pair, "=")
		switch {
		case !ok || !page.ValidName(name):
			return batch.Conditions{}, fmt.Errorf(`--set %s: write name=value; a name has letters, digits, "-", "_" and ".", a letter first`, pair)
		case has(parameters, name):
			return batch.Conditions{}, fmt.Errorf("--set %s: %s is set twice", pair, name)
		}
		parameters[name] = value
	}
	return batch.Conditions{
		Kernel:     install.Argv(program),
		Parameters: parameters,
		Progress:   batch.NewProgress(s.err, s.terminal()),
	}, nil
}

func has(m map[string]string, name string) bool {
	_, ok := m[name]
	return ok
}

// interruptible returns a context that the first Ctrl-C or SIGTERM ends; the second ends the program.
func interruptible() (context.Context, context.CancelFunc) {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	context.AfterFunc(ctx, stop)
	return ctx, stop
}

type runCommand struct {
	execution
	Out  string `short:"o" type:"path" placeholder:"OUT.ipynb" help:"Write the executed notebook here. Only this may be the notebook itself."`
	HTML string `name:"html" type:"path" placeholder:"OUT.html" help:"Write the report here. Without -o and --html, both files are written beside the notebook, as NAME-run.ipynb and NAME-run.html."`
}

func (c runCommand) Run(s streams) error {
	conditions, err := c.conditions(s)
	if err != nil {
		return err
	}
	ctx, stop := interruptible()
	defer stop()
	job := batch.Job{In: c.Notebook, Out: c.Out, HTML: c.HTML, Conditions: conditions, Program: "Linewright " + version()}
	written, err := job.Run(ctx)
	for _, path := range written {
		fmt.Fprintf(s.err, "wrote %s\n", path)
	}
	return err
}
