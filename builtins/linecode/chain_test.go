package linecode

import (
	"testing"

	"linewright/builtins/source"
)

func TestChainJoinsCodeAndData(t *testing.T) {
	for _, tt := range []struct {
		code *Code
		want Chain
	}{
		{AMI(), Chain{"AMI", 2, []float64{1, 0}, []Edge{
			{0, 0, 0.5, []float64{0}, 1}, {0, 1, 0.5, []float64{1}, 1}, {1, 1, 0.5, []float64{0}, 1}, {1, 0, 0.5, []float64{-1}, 1},
		}}},
		{PolarNRZ().Fed(source.Biased(0.75)), Chain{"polar NRZ, P(1) = 0.75", 1, []float64{1}, []Edge{
			{0, 0, 0.25, []float64{-1}, 1}, {0, 0, 0.75, []float64{1}, 1},
		}}},
		{AMI().Fed(source.Biased(1)), Chain{"AMI, P(1) = 1", 2, []float64{1, 0}, []Edge{
			{0, 1, 1, []float64{1}, 1}, {1, 0, 1, []float64{-1}, 1},
		}}},
		// The last bit is 0 with probability 3/4 at the start; words multiply bit by bit, the most significant first.
		{Code2B1Q().Fed(source.Markov(0.25, 0.75)), Chain{"2B1Q, P(1 after 0) = 0.25, P(0 after 1) = 0.75", 2, []float64{0.75, 0.25}, []Edge{
			{0, 0, 0.75 * 0.75, []float64{-3}, 2}, {0, 1, 0.75 * 0.25, []float64{-1}, 2}, {0, 0, 0.25 * 0.75, []float64{3}, 2}, {0, 1, 0.25 * 0.25, []float64{1}, 2},
			{1, 0, 0.75 * 0.75, []float64{-3}, 2}, {1, 1, 0.75 * 0.25, []float64{-1}, 2}, {1, 0, 0.25 * 0.75, []float64{3}, 2}, {1, 1, 0.25 * 0.25, []float64{1}, 2},
		}}},
		// Three bits against two marks: the pattern comes back to the same state after six.
		{AMI().Fed(source.Repeating([]byte{1, 0, 0})), Chain{"AMI, repeating 3 bits", 6, []float64{1, 0, 0, 0, 0, 0}, []Edge{
			{0, 1, 1, []float64{1}, 1}, {1, 2, 1, []float64{0}, 1}, {2, 3, 1, []float64{0}, 1},
			{3, 4, 1, []float64{-1}, 1}, {4, 5, 1, []float64{0}, 1}, {5, 0, 1, []float64{0}, 1},
		}}},
	} {
		wantEqual(t, tt.want.Name, *tt.code.Chain(), tt.want)
	}
}

func TestChainIsMadeOnce(t *testing.T) {
	c := HDB3()
	if first := c.Chain(); c.Chain() != first {
		t.Error("the second chain is another")
	}
	if fed := c.Fed(source.Biased(0.2)); fed.Chain() == c.Chain() || fed.Source().String() != "P(1) = 0.2" || c.Source().String() != "P(1) = 0.5" {
		t.Error("Fed shares the chain or changes the code it is called on")
	}
}

func TestChainOfTooMuchDataIsRefused(t *testing.T) {
	const want = "linecode: HDB3 with repeating 1001 bits gives a chain of more than 1000 edges (35 states of the code, 1001 of the data, 2 words); take a smaller code or data with fewer states"
	_, err := HDB3().Fed(source.Repeating(source.Random().Bits(1001, 1))).join(t.Context(), 1000)
	if err == nil || err.Error() != want {
		t.Errorf("got  %v\nwant %s", err, want)
	}
}
