// Linewright is a notebook kernel for line codes, and the command around it.
package main

import (
	"io"
	"os"
)

func main() { os.Exit(run(os.Args[1:], os.Stdout, os.Stderr)) }

// run runs one command line and returns the exit status.
func run(args []string, stdout, stderr io.Writer) int {
	return command(&struct {
		Run        runCommand        `cmd:"" help:"Execute a notebook and write it, and a report, to new files."`
		Check      checkCommand      `cmd:"" help:"Execute a notebook again and compare the outputs with those that it has."`
		Parameters parametersCommand `cmd:"" help:"List the parameters that a notebook asks for, for --set."`
		Open       openCommand       `cmd:"" help:"Register the kernel and start an installed front end."`
		Install    installCommand    `cmd:"" help:"Register the kernel with Jupyter front ends."`
		Uninstall  uninstallCommand  `cmd:"" help:"Undo install."`
		Serve      serveCommand      `cmd:"" help:"Be a kernel. Front ends call this."`
		Version    versionCommand    `cmd:"" help:"Print the version."`
	}{}, args, stdout, stderr)
}
