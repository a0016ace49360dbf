package spectrum

import (
	"context"
	"math"
)

// A process of small rank has a spectral density that is a ratio of short trigonometric series. On the subspace of
// dimension r that the functions f span under K, K satisfies its characteristic equation (Cayley and Hamilton), so with
// D(y) = det(I - y K) = D_0 + ... + D_r y^r and G the autocorrelation of these coefficients,
//
//	S = [sum of T(l) cos lt] / [sum of G(d) cos(d N t)],   T(l) = sum over d of G(d) R(l - N d),
//
// and T(l) = 0 for l >= N (r+1). The ratio is used where T is seen to vanish, over as many lags as it has itself: then no
// digits were lost on the way.
const (
	longestRatio = 16    // rank up to which the coefficients of D are good for use
	ratioError   = 1e-12 // of the mean power that the ratio may be wrong by
)

// ratio gives the form as a ratio, from so many lags. It returns nil, and the number of lags at which to try again, if it
// has to see more of them; nil and a number that is never reached if the rank is too large or digits would be lost.
func (a *autocorr) ratio(ctx context.Context, lags int) (*form, int, error) {
	const never = math.MaxInt
	basis, h, err := a.arnoldi(ctx, a.first, longestRatio)
	if err != nil || basis == nil {
		return nil, never, err
	}
	n, r := a.p.length, len(h)
	if need := n*(2*r+2) + 8; lags < need {
		return nil, need, nil
	}
	if err := hessenberg(ctx, h); err != nil {
		return nil, never, err
	}
	d := characteristic(h)
	g := make([]float64, r+1)
	for k := range g {
		for i := k; i <= r; i++ {
			g[k] += d[i] * d[i-k]
		}
	}
	// R is complete below lags, so T is below lags - N r.
	known := a.lags[0]
	t := make([]float64, n*(r+1))
	size, left := 0.0, 0.0
	for l := range lags - n*r {
		v := g[0] * known[l]
		for k := 1; k <= r; k++ {
			before := l - n*k
			v += g[k] * (known[max(before, -before)] + known[l+n*k])
		}
		if l < len(t) {
			t[l] = v
			size += math.Abs(v)
		} else {
			left += math.Abs(v)
		}
	}
	for l := 1; l < len(t); l++ {
		t[l] *= 2
	}
	for k := 1; k < len(g); k++ {
		g[k] *= 2
	}
	spread := make([]float64, n*r+1) // in t, not N t
	for k, v := range g {
		spread[n*k] = v
	}
	under := newSeries(spread)
	least := math.Inf(1)
	const grid = 64
	for k := range grid + 1 {
		least = min(least, under.even(newAngle(0.5*float64(k)/grid)))
	}
	if left+1e-15*size > ratioError*known[0]*least {
		return nil, never, nil
	}
	f := newForm(1, a.lags, nil)
	f.even[0], f.under = newSeries(t), under
	return f, 0, nil
}

// characteristic gives the coefficients of det(I - y H) for an upper Hessenberg H, from those of its leading blocks
// (expansion along the last column).
func characteristic(h [][]float64) []float64 {
	blocks := [][]float64{{1}}
	for k := range h {
		p := make([]float64, k+2)
		copy(p, blocks[k])
		path := 1.0
		for i := k; i >= 0; i-- {
			for n, v := range blocks[i] {
				p[n+k-i+1] -= h[i][k] * path * v
			}
			if i > 0 {
				path *= h[i][i-1]
			}
		}
		blocks = append(blocks, p)
	}
	return blocks[len(blocks)-1]
}
