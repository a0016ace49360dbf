package spectrum

import (
	"fmt"
	"math"
)

// Watts turns V^2, or V^2/Hz, across the load into W, or W/Hz. It is an error if the train states no load, and if v2 is
// negative or not finite.
func (p *PSD) Watts(v2 float64) (float64, error) {
	switch {
	case p == nil:
		return 0, errNil
	case !(v2 >= 0) || math.IsInf(v2, 0):
		return 0, fmt.Errorf("spectrum: %v V^2 is no power; give a finite number of V^2, or V^2/Hz, of at least 0", v2)
	case p.drive.Load == 0:
		return 0, fmt.Errorf("spectrum: %v V^2 in watts needs a load; give pulse.Train its Load in ohms", v2)
	}
	return v2 / p.drive.Load, nil
}

// DBm turns V^2, or V^2/Hz, across the load into dBm, or dBm/Hz: decibels over 1 mW, -Inf for 0. It is an error where
// [PSD.Watts] is one.
func (p *PSD) DBm(v2 float64) (float64, error) {
	w, err := p.Watts(v2)
	if err != nil {
		return 0, err
	}
	return 10 * math.Log10(w/1e-3), nil
}
