package main

import (
	"fmt"

	"linewright/install"
)

// place says where the kernel is registered.
type place struct {
	User   bool   `xor:"place" help:"For this user. This is what happens without flags."`
	Prefix string `xor:"place" type:"path" placeholder:"DIR" help:"Below DIR/share/jupyter, for instance that of a Python environment."`
}

type installCommand struct {
	place
	List bool `help:"Only list where the kernel is registered."`
}

func (c installCommand) Run(s streams) error {
	if c.List {
		found, err := install.List(c.Prefix)
		if err != nil {
			return err
		}
		if len(found) == 0 {
			fmt.Fprintln(s.out, "not registered")
		}
		for _, r := range found {
			line := r.Dir
			if r.Problem != "" {
				line += "  broken: " + r.Problem
			}
			fmt.Fprintln(s.out, line)
		}
		return nil
	}
	dir, err := install.Register(install.Options{Prefix: c.Prefix})
	if err != nil {
		return err
	}
	fmt.Fprintf(s.out, "registered in %s\n", dir)
	return nil
}

type uninstallCommand struct{ place }

func (c uninstallCommand) Run(s streams) error {
	dir, err := install.Unregister(c.Prefix)
	if err != nil {
		return err
	}
	fmt.Fprintf(s.out, "removed %s\n", dir)
	return nil
}
