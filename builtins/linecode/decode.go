package linecode

// Verdict is what is known of whether data can be told apart from symbols.
type Verdict struct{}

// Decode is written next.
func (c *Code) Decode(sym []float64) ([]byte, []int, error) {
	panic("linecode: Decode is not written yet")
}
