package spectrum

import (
	"context"
	"fmt"
)

// periodic computes the spectrum of a class in which every state has one successor: a cycle of D symbols, whose Fourier
// series are the tones. There is no continuous part.
func (p *PSD) periodic(ctx context.Context, m *machine, coef [][]float64, lags int) (*part, error) {
	symbols := 0
	next := make([]int32, m.states) // edge that leaves each state
	for i, e := range m.edges {
		next[e.from] = int32(i)
		symbols += len(e.word)
	}
	if symbols == 0 {
		return nil, fmt.Errorf("spectrum: the data can end in %d states that emit no symbols for ever; the waveform has no power spectrum", m.states)
	}
	if symbols > mostPeriod {
		return nil, fmt.Errorf("spectrum: the symbols repeat after %d only; the limit is %d", symbols, mostPeriod)
	}
	sequences := make([][]float64, len(p.basis))
	for j := range sequences {
		sequences[j] = make([]float64, 0, symbols)
	}
	for s, n := int32(0), 0; n < m.states; n++ {
		if n%4096 == 0 && ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		e := &m.edges[next[s]]
		for _, w := range e.word {
			for j, v := range coef[w] {
				sequences[j] = append(sequences[j], v)
			}
		}
		s = e.to
	}
	tones, err := newComb(ctx, sequences, lags)
	if err != nil {
		return nil, err
	}
	out := &part{tones: tones}
	out.square = p.square(out, lags)
	return out, nil
}
