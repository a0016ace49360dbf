package main

import (
	"fmt"
	"text/tabwriter"

	"linewright/kernel/batch"
)

type parametersCommand struct {
	Notebook string `arg:"" name:"notebook.ipynb" help:"The notebook, of nbformat 4.0 to 4.5."`
}

func (c parametersCommand) Run(s streams) error {
	n, err := batch.Read(c.Notebook)
	if err != nil {
		return err
	}
	all := n.Parameters()
	if len(all) == 0 {
		_, err := fmt.Fprintf(s.out, "%s asks for no parameters\n", c.Notebook)
		return err
	}
	w := tabwriter.NewWriter(s.out, 0, 0, 2, ' ', 0)
	fmt.Fprintln(w, "PARAMETER\tTYPE\tSTANDARD\tUNIT\tCELL")
	for _, p := range all {
		fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%d\n", p.Name, p.Type, p.Standard, p.Unit, p.Cell)
	}
	return w.Flush()
}
