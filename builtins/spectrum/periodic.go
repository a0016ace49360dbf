package spectrum

import (
	"context"
	"fmt"
)

// single tells whether one edge leaves each state: data that repeat leave nothing to chance. Edge s then is that of
// state s.
func (m *machine) single() bool {
	if len(m.edges) != m.states {
		return false
	}
	for s := range m.edges {
		if m.edges[s].from != int32(s) {
			return false
		}
	}
	return true
}

// begin is the state that the machine starts in, state 0 if it is a closed class and does not say; ok is false if chance
// decides.
func (m *machine) begin() (state int32, ok bool) {
	found := 0
	for s, p := range m.start {
		if p > 0 {
			state = int32(s)
			found++
		}
	}
	return state, found < 2
}

// cycle is the cycle that a machine with single edges comes to from state s.
func (m *machine) cycle(s int32) []int32 {
	seen := make([]bool, m.states)
	for !seen[s] {
		seen[s] = true
		s = m.edges[s].to
	}
	states := []int32{s}
	for t := m.edges[s].to; t != s; t = m.edges[t].to {
		states = append(states, t)
	}
	return states
}

// periodic computes the spectrum of a machine with single edges that starts in state s.
func periodic(ctx context.Context, m *machine, s int32, coef [][]float64, width, lags int) (*part, error) {
	cycle := m.cycle(s)
	symbols := 0
	for _, t := range cycle {
		symbols += len(m.edges[t].word)
	}
	if symbols == 0 {
		return nil, fmt.Errorf("spectrum: the data end in %d states that emit no symbols for ever; the waveform has no power spectrum", len(cycle))
	}
	if symbols > mostPeriod {
		return nil, fmt.Errorf("spectrum: the symbols repeat after %d only; the limit is %d", symbols, mostPeriod)
	}
	waves := make([]int32, 0, symbols)
	for _, t := range cycle {
		waves = append(waves, m.edges[t].word...)
	}
	return recurrent(ctx, waves, coef, width, lags)
}

// recurrent computes the spectrum of waveforms that come again and again: their Fourier series are the tones. There is no
// continuous part.
func recurrent(ctx context.Context, waves []int32, coef [][]float64, width, lags int) (*part, error) {
	sequences := vectors(width, len(waves))
	for n, w := range waves {
		if n%(1<<16) == 0 && ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		for j, v := range coef[w] {
			sequences[j][n] = v
		}
	}
	tones, err := newComb(ctx, sequences, lags)
	if err != nil {
		return nil, err
	}
	return &part{prob: 1, tones: tones}, nil
}
