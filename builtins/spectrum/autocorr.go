package spectrum

import (
	"context"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/floats"
)

// Costs in nanoseconds, measured on one core of the kind of machine that this was written on. They only choose between
// routes.
const (
	lagCost   = 0.5  // one lag at one frequency
	edgeCost  = 1.5  // one edge in one step of the recursion
	basisCost = 1.5  // one number in the basis of a resolvent, for each of its directions
	startCost = 250  // a resolvent at one frequency, whatever its rank
	rankCost  = 2.5  // one product of the triangular solve at one frequency
	points    = 1001 // frequencies that a spectrum is usually wanted at
)

// Limits of the routes: products of the recursion that are spent before long memories are tried as a resolvent of any
// rank, products that are spent at all, lags that are kept, the rank of a resolvent, the numbers in its basis, and its
// rank once the largest was tried in vain.
const (
	easyWork = 3e8
	hardWork = 2e10
	mostLags = 1 << 21
	mostRank = 1500
	mostCell = 3e7

	laterRank = 256
)

// spectral computes the form of a process; at least the first lags of it as lags.
//
// With f_k[s] the mean of the vector at position k of a step that leaves state s, u_i[s] the probability-weighted
// vector at position i of the steps that enter s, and K the matrix of a step on functions of the state that have mean 0
// on every cyclic class (K = P - P Pi: all its eigenvalues lie within the unit circle, whatever the period),
//
//	N R(l) = [sum over positions of one step]           for l < N,
//	N R(N (q+1) + k - i) += u_i . K^q f_k               for q = 0, 1, ... and all positions i, k.
//
// The maximum of |K^q f| never grows, and the sum ends when what is left is below the last digits. If it does not end
// soon, a process of small rank is a ratio of short series; otherwise the functions K^q f by then live on a few slow
// directions, and a resolvent on these takes the rest.
func (p *process) spectral(ctx context.Context, first int) (*form, error) {
	a := newAutocorr(p)
	check, ratioAt := 32, 24
	for q := 0; ; q++ {
		if ctx.Err() != nil {
			return nil, context.Cause(ctx)
		}
		lags := q * p.length
		if lags >= first && recentred(q) {
			bound := a.bound()
			if bound*float64(q+8) <= 1e-16*a.power() {
				return newForm(p.width, a.trim(), nil), nil
			}
			if p.width == 1 && lags >= ratioAt {
				f, need, err := a.ratio(ctx, lags)
				if err != nil || f != nil {
					return f, err
				}
				ratioAt = need
			}
			if lags >= check {
				check = 2 * lags
				if lags > 500 {
					check = 4 * lags
				}
				rest, err := a.resolve(ctx, q, bound)
				if err != nil || rest != nil {
					return newForm(p.width, a.lags, rest), err
				}
			}
		}
		if a.large && (float64(lags)+a.left > mostLags || a.work*(1+a.left/float64(lags)) > hardWork) {
			return nil, fmt.Errorf("spectrum: a machine of %d states and %d edges is too large for either route: it would take about %.0f lags (at most %d, fewer for so many edges), and what is left after %d has a rank above %d",
				p.machine.states, len(p.machine.edges), float64(lags)+a.left, mostLags, lags, a.rank())
		}
		a.step(q)
	}
}

// An autocorr is the state of the recursion.
type autocorr struct {
	p      *process
	first  [][]float64 // f[k*width+j] of position k and component j; nil if zero
	f      [][]float64 // K^q f
	u      [][]float64 // u[i*width+j]
	size   float64     // sum of |u|
	lags   [][]float64 // lags[i*width+j][l]
	next   []float64
	matrix sparse
	work   float64 // products so far
	tried  float64 // bound at the last attempt to resolve
	at     int     // and the step of it
	left   float64 // lags that are still needed, as the decay lets expect
	large  bool    // a resolvent of any rank was tried
}

func newAutocorr(p *process) *autocorr {
	m, w := p.machine, p.width
	a := &autocorr{p: p, lags: vectors(w*w, 2*p.length), next: make([]float64, m.states)}
	a.f, a.u = vectors(len(p.out), m.states), vectors(len(p.out), m.states)
	weighed := make([]float64, len(m.edges))
	for n, v := range p.out {
		floats.MulTo(weighed, p.mass, v)
		f, u := a.f[n], a.u[n]
		for s := range f {
			lo, hi := p.head[s], p.head[s+1]
			f[s] = floats.Dot(p.p[lo:hi], v[lo:hi])
		}
		for i, x := range weighed {
			u[m.edges[i].to] += x
		}
		k, j := n/w, n%w
		for n2 := k * w; n2 < len(p.out); n2++ {
			a.lags[j*w+n2%w][n2/w-k] += floats.Dot(weighed, p.out[n2]) / float64(p.length)
		}
		if largest(f) <= 1e-15*p.size {
			a.f[n] = nil
		}
		floats.Scale(1/float64(p.length), u)
		a.size += floats.Norm(u, 1)
	}
	a.first = make([][]float64, len(a.f))
	for n, f := range a.f {
		a.first[n] = slices.Clone(f)
	}
	a.matrix = newSparse(p)
	return a
}

func largest(v []float64) float64 {
	top := 0.0
	for _, x := range v {
		top = max(top, math.Abs(x))
	}
	return top
}

// power is the sum of the mean squares.
func (a *autocorr) power() float64 {
	sum := 0.0
	for i := range a.p.width {
		sum += a.lags[i*a.p.width+i][0]
	}
	return sum
}

// bound is a bound of every lag that the next step would add.
func (a *autocorr) bound() float64 {
	top := 0.0
	for _, f := range a.f {
		top = max(top, largest(f))
	}
	return top * a.size
}

// step adds the lags of step q and goes on to q+1.
func (a *autocorr) step(q int) {
	p, w := a.p, a.p.width
	for i := range a.lags {
		for len(a.lags[i]) < p.length*(q+2) {
			a.lags[i] = append(a.lags[i], 0)
		}
	}
	for n, f := range a.f {
		if f == nil {
			continue
		}
		k, j := n/w, n%w
		for m, u := range a.u {
			a.lags[m%w*w+j][p.length*(q+1)+k-m/w] += floats.Dot(u, f)
		}
		a.matrix.apply(a.next, f, recentred(q))
		a.f[n], a.next = a.next, f
		a.work += float64(len(a.matrix.to) + len(a.u)*len(f))
	}
}

// trim drops lags at the end that are too small to matter.
func (a *autocorr) trim() [][]float64 {
	least := 1e-17 * a.power()
	n := 1
	for _, lags := range a.lags {
		for l, r := range lags {
			if math.Abs(r) > least {
				n = max(n, l+1)
			}
		}
	}
	for i := range a.lags {
		a.lags[i] = a.lags[i][:n]
	}
	return a.lags
}

// rank is the largest rank that a resolvent of this machine may have.
func (a *autocorr) rank() int {
	return min(a.p.machine.states, mostRank, int(mostCell)/a.p.machine.states)
}

// resolventWork estimates the nanoseconds of making a resolvent of a rank and using it at the usual number of points.
func (a *autocorr) resolventWork(rank int) float64 {
	n := float64(rank)
	return basisCost*n*n*float64(len(a.next)) + points*resolventCost(rank, len(a.f))
}

// resolve tries to end the sum after q steps with a resolvent, if that is cheaper than what the decay since the last
// attempt lets expect of going on; it returns nil if not.
func (a *autocorr) resolve(ctx context.Context, q int, bound float64) (*resolvent, error) {
	rank := 0
	if a.tried > 0 {
		rate := math.Log(a.tried/bound) / float64(q-a.at)
		a.left = math.Log(bound/(1e-17*a.power())) / max(rate, 1e-9) * float64(a.p.length)
		most := a.left * (points*lagCost + edgeCost*float64(len(a.matrix.to)*len(a.f)))
		for rank < a.rank() && a.resolventWork(rank+1) < most {
			rank++
		}
	}
	a.tried, a.at = bound, q
	if a.large {
		rank = min(rank, laterRank)
	} else if a.work > easyWork || a.left > mostLags {
		a.large = true
		rank = a.rank()
	}
	if rank == 0 {
		return nil, nil
	}
	return newResolvent(ctx, a, q, rank)
}

// A sparse is the matrix K of one step on functions of the state.
type sparse struct {
	p    *process
	head []int32
	to   []int32
	v    []float64
	mean []float64
	work []float64
}

func newSparse(p *process) sparse {
	n := p.machine.states
	k := sparse{p: p, head: make([]int32, n+1), mean: make([]float64, p.period), work: make([]float64, n)}
	for s := range n {
		to, prob := p.graph.Row(s)
		k.to = append(k.to, to...)
		k.v = append(k.v, prob...)
		k.head[s+1] = int32(len(k.to))
	}
	return k
}

// recentred tells whether step q takes off the means that rounding has brought in: the first steps do, which may end
// the sum at once, then every eighth.
func recentred(q int) bool { return q < 8 || q%8 == 0 }

// apply sets dst to K v. For functions of mean 0 on every cyclic class that is P v; centre takes the means off first.
func (k *sparse) apply(dst, v []float64, centre bool) {
	p := k.p
	if centre {
		clear(k.mean)
		for s, x := range v {
			k.mean[p.cyc[s]] += p.pi[s] * x
		}
		for s, x := range v {
			k.work[s] = x - float64(p.period)*k.mean[p.cyc[s]]
		}
		v = k.work
	}
	lo := k.head[0]
	for s, hi := range k.head[1:] {
		sum := 0.0
		for i := lo; i < hi; i++ {
			sum += k.v[i] * v[k.to[i]]
		}
		dst[s] = sum
		lo = hi
	}
}
