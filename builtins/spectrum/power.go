package spectrum
type plan struct{}
func (p *PSD) Power(lo, hi float64) float64 { panic("x") }
func (p *PSD) Within(part float64) float64 { panic("x") }
