// Package source describes the data: statistical models for exact work and bit generators for simulation.
package source

// Model is a statistical description of source bits: a finite machine that draws one bit a step.
type Model struct{}

func Biased(p float64) Model        { panic("stub") }
func Markov(p01, p10 float64) Model { panic("stub") }
func Repeating(bits []byte) Model   { panic("stub") }
