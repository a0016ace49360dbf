package main

import (
	"fmt"

	"linewright/kernel/batch"
)

type checkCommand struct {
	execution
	Tolerance float64 `default:"1e-6" help:"Largest relative difference between numbers that counts as none (${default})."`
}

func (c checkCommand) Run(s streams) error {
	conditions, err := c.conditions(s)
	if err != nil {
		return err
	}
	if !(c.Tolerance >= 0 && c.Tolerance < 1) {
		return fmt.Errorf("--tolerance %g: give a number from 0 to below 1", c.Tolerance)
	}
	ctx, stop := interruptible()
	defer stop()
	return batch.Check(ctx, c.Notebook, conditions, c.Tolerance, s.out)
}
