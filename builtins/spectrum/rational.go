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
// and T(l) = 0 for l >= N (r+1). The ratio replaces the lags where it is shorter and T proves to vanish: then no digits
// were lost on the way.
const (
	longestRatio = 16    // rank up to which the coefficients of D are good for use
	ratioError   = 1e-13 // of the mean power that the ratio may be wrong by
)

// ratio turns the lags of a finished sum into a ratio; it returns nil where that does not pay or would lose digits.
func (a *autocorr) ratio(ctx context.Context, lags []float64) (numerator, denominator []float64, err error) {
	n := a.p.length
	most := min(longestRatio, (len(lags)/2-16)/(n+1))
	if a.p.width != 1 || most < 1 {
		return nil, nil, nil
	}
	basis, h, err := a.arnoldi(ctx, a.first, most)
	if err != nil || basis == nil {
		return nil, nil, err
	}
	if err := hessenberg(ctx, h); err != nil {
		return nil, nil, err
	}
	d := characteristic(h)
	r := len(h)
	g := make([]float64, r+1)
	for k := range g {
		for i := k; i <= r; i++ {
			g[k] += d[i] * d[i-k]
		}
	}
	at := func(l int) float64 {
		if l < 0 {
			l = -l
		}
		if l >= len(lags) {
			return 0
		}
		return lags[l]
	}
	t := make([]float64, n*(r+1))
	size, left := 0.0, 0.0
	for l := range len(lags) + n*r {
		v := g[0] * at(l)
		for k := 1; k <= r; k++ {
			v += g[k] * (at(l-n*k) + at(l+n*k))
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
	least := math.Inf(1)
	den := newSeries(g)
	const grid = 64
	for k := range grid + 1 {
		least = min(least, den.even(newAngle(0.5*float64(k)/grid)))
	}
	if 2*left+1e-15*size > ratioError*lags[0]*least {
		return nil, nil, nil
	}
	return t, g, nil
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
