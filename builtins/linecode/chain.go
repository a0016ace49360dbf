package linecode

// A Chain is a Markov chain that emits symbols: the joint machine of an encoder and the model of its data, or one
// given edge by edge. It is what the exact spectrum is computed from.
type Chain struct {
	Name   string    // of the code and its data, for labels
	States int       // states are 0 .. States-1
	Start  []float64 // probability of starting in each state; nil means state 0
	Edges  []Edge    // in any order; the probabilities that leave a state add up to 1
}

// An Edge of a [Chain] is one step: with probability P the chain goes from From to To and emits Levels.
type Edge struct {
	From, To int
	P        float64
	Levels   []float64 // symbol levels in order of time; may be empty
	Bits     int       // source bits that the step consumes
}
