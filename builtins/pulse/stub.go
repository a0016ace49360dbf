// Package pulse stub.
package pulse

type Shape struct{}
type Train struct {
	BitRate, SymbolRate, Level, Peak, Load float64
	Shape                                  Shape
	Shapes                                 map[float64]Shape
	Transition                             func(prev, next float64) Shape
}
type Coder interface {
	Name() string
	Levels() []float64
	FixedRate() (bits, symbols int, fixed bool)
}
type Drive struct{ SymbolRate, Volts, Load float64 }

func Rect(duty float64) Shape                                   { panic("stub") }
func (t Train) Drive(c Coder) (*Drive, error)                   { panic("stub") }
func (d *Drive) Wave(levels []float64, perSymbol int) []float64 { panic("stub") }
