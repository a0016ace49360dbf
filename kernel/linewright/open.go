package main

import (
	"errors"
	"fmt"
	"os"
	"os/exec"
	"os/signal"
	"path/filepath"
	"strings"

	"linewright/install"
)

// frontEnd is a program that works with kernels.
type frontEnd struct {
	program   string
	notebooks bool     // opens notebook files
	args      []string // before the notebook
}

// frontEnds are those that open starts, the first that is installed.
var frontEnds = []frontEnd{
	{"jupyter-lab", true, nil},
	{"jupyter-notebook", true, nil},
	{"jupyter-nbclassic", true, nil},
	{"jupyter-qtconsole", false, []string{"--kernel", install.Name}},
	{"jupyter-console", false, []string{"--kernel", install.Name}},
}

type openCommand struct {
	Notebook string `arg:"" optional:"" name:"notebook.ipynb" help:"The notebook to open; none opens the front end alone, which may then be a console."`
}

func (c openCommand) Help() string {
	var names []string
	for _, f := range frontEnds {
		names = append(names, f.program)
	}
	return "Takes the first of these that is installed: " + strings.Join(names, ", ") + "."
}

func (c openCommand) Run(s streams) error {
	if c.Notebook != "" {
		if info, err := os.Stat(c.Notebook); err != nil {
			return fmt.Errorf("%s: %w", c.Notebook, errors.Unwrap(err))
		} else if !info.Mode().IsRegular() {
			return fmt.Errorf("%s: not a file", c.Notebook)
		}
	}
	f, path, err := find(c.Notebook != "")
	if err != nil {
		return err
	}
	dir, err := install.Register(install.Options{})
	if err != nil {
		return err
	}
	fmt.Fprintf(s.err, "registered in %s\nstarting %s\n", dir, path)
	args := f.args
	if c.Notebook != "" {
		args = append(args, filepath.Clean(c.Notebook))
	}
	cmd := exec.Command(path, args...)
	cmd.Stdin, cmd.Stdout, cmd.Stderr = os.Stdin, s.out, s.err
	// The terminal sends Ctrl-C to both; what it means is the front end's to say. To ignore it would make the front end
	// ignore it as well.
	caught := make(chan os.Signal, 1)
	signal.Notify(caught, os.Interrupt)
	defer signal.Stop(caught)
	if err := cmd.Run(); err != nil {
		return fmt.Errorf("%s: %w", f.program, err)
	}
	return nil
}

// find returns the first front end that is installed, and its path.
func find(notebook bool) (frontEnd, string, error) {
	for _, f := range frontEnds {
		if notebook && !f.notebooks {
			continue
		}
		if path, err := exec.LookPath(f.program); err == nil {
			return f, path, nil
		}
	}
	what := "no front end is installed"
	if notebook {
		what = "no front end that opens notebooks is installed"
	}
	return frontEnd{}, "", fmt.Errorf("%s; install one (pip install jupyterlab, or on Debian apt install jupyter-notebook), or execute the notebook without one: linewright run NOTEBOOK.ipynb", what)
}
