// Package spectrum stub.
package spectrum

import (
	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
)

type Line struct{ Freq, Power float64 }
type Class struct {
	Probability float64
	Spectrum    *PSD
}
type PSD struct{}

func Exact(c *linecode.Code, t pulse.Train) (*PSD, error)     { panic("stub") }
func OfChain(ch *linecode.Chain, t pulse.Train) (*PSD, error) { panic("stub") }
func (p *PSD) Name() string                                   { panic("stub") }
func (p *PSD) SymbolRate() float64                            { panic("stub") }
func (p *PSD) Load() float64                                  { panic("stub") }
func (p *PSD) At(f float64) float64                           { panic("stub") }
func (p *PSD) Density(dst, f []float64) []float64             { panic("stub") }
func (p *PSD) Lines(fmax float64) []Line                      { panic("stub") }
func (p *PSD) Power(lo, hi float64) float64                   { panic("stub") }
func (p *PSD) Within(part float64) float64                    { panic("stub") }
func (p *PSD) Total() float64                                 { panic("stub") }
func (p *PSD) Classes() []Class                               { panic("stub") }
func (p *PSD) DBm(v2 float64) (float64, error)                { panic("stub") }
func (p *PSD) Watts(v2 float64) (float64, error)              { panic("stub") }
