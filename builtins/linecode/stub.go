// Package linecode stub.
package linecode

import "linewright/builtins/source"

type Spec struct {
	Name      string
	Bits      int
	Start     any
	Step      func(s any, word uint) (any, []float64)
	Delay     int
	Flush     func(s any) []float64
	MaxStates int
}
type Code struct{}

func New(spec Spec) (*Code, error)                          { panic("stub") }
func AMI() *Code                                            { panic("stub") }
func (c *Code) Name() string                                { panic("stub") }
func (c *Code) States() int                                 { panic("stub") }
func (c *Code) Rate() float64                               { panic("stub") }
func (c *Code) FixedRate() (bits, symbols int, fixed bool)  { panic("stub") }
func (c *Code) Levels() []float64                           { panic("stub") }
func (c *Code) Fed(m source.Model) *Code                    { panic("stub") }
func (c *Code) Chain() *Chain                               { panic("stub") }
func (c *Code) Encode(bits []byte) ([]float64, error)       { panic("stub") }
func (c *Code) Decode(sym []float64) ([]byte, []int, error) { panic("stub") }
