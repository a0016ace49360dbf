package spectrum

import (
	"context"
	"math"
	"slices"

	"gonum.org/v1/gonum/floats"
)

// A resolvent is what a process adds to its form beyond the first lags:
//
//	2 Re[ z^(q+1) u(h)' (I - z H)^-1 b(h) ],   z = exp(-j t N),
//
// where H is K on the subspace that the functions K^q f span under K (W. E. Arnoldi, Quart. Appl. Math. 9 (1951)
// 17-29), in Hessenberg form. It is regular at every real t. Nothing is diagonalised: shift registers are defective.
type resolvent struct {
	width, length int
	steps         int         // q+1
	columns       [][]float64 // columns[c][r] = H[r][c] for r <= c+1
	b, u          [][]float64 // b[k*width+j]: coordinates of K^q f; u likewise of the left vectors
	work          chan *solveSpace
}

type solveSpace struct{ b, u, w []complex128 }

// newResolvent returns nil if the subspace has more dimensions than rank.
func newResolvent(ctx context.Context, a *autocorr, q, rank int) (*resolvent, error) {
	basis, h, err := a.arnoldi(ctx, a.f, rank)
	if err != nil || basis == nil {
		return nil, err
	}
	r := &resolvent{width: a.p.width, length: a.p.length, steps: q + 1, work: make(chan *solveSpace, 16)}
	r.b, r.u = coordinates(basis, a.f), coordinates(basis, a.u)
	if err := hessenberg(ctx, h, r.b, r.u); err != nil {
		return nil, err
	}
	n := len(h)
	r.columns = vectors(n, n+1)
	for c := range n {
		r.columns[c] = r.columns[c][:min(c+2, n)]
		for row := range r.columns[c] {
			r.columns[c][row] = h[row][c]
		}
	}
	return r, nil
}

// arnoldi returns an orthonormal basis of the smallest subspace that holds the functions and is mapped into itself by
// K, and the matrix of K on it; nil if it has more than rank dimensions.
//
// A direction is new if what the others leave of it is more than rounding. How little of it is left says nothing about
// what it does: slow chains make much of small steps.
func (a *autocorr) arnoldi(ctx context.Context, functions [][]float64, rank int) (basis, h [][]float64, err error) {
	// orthogonalise takes from v its parts along the basis, twice for full precision, and makes the rest a new
	// direction if it is one. It returns the coordinates of v.
	orthogonalise := func(v []float64) []float64 {
		size := floats.Norm(v, 2)
		c := make([]float64, len(basis), len(basis)+1)
		for range 2 {
			for i, e := range basis {
				d := floats.Dot(e, v)
				c[i] += d
				floats.AddScaled(v, -d, e)
			}
		}
		left := floats.Norm(v, 2)
		if left <= 1e-14*size {
			return c
		}
		floats.Scale(1/left, v)
		basis = append(basis, v)
		return append(c, left)
	}
	for _, f := range functions {
		if f != nil {
			orthogonalise(slices.Clone(f))
		}
	}
	var columns [][]float64
	for n := 0; n < len(basis); n++ {
		if len(basis) > rank {
			return nil, nil, nil
		}
		if ctx.Err() != nil {
			return nil, nil, context.Cause(ctx)
		}
		v := make([]float64, len(a.next))
		a.matrix.apply(v, basis[n], true)
		columns = append(columns, orthogonalise(v))
	}
	h = vectors(len(basis), len(basis))
	for c, column := range columns {
		for r, v := range column {
			h[r][c] = v
		}
	}
	return basis, h, nil
}

func coordinates(basis, of [][]float64) [][]float64 {
	c := vectors(len(of), len(basis))
	for i, v := range of {
		if v == nil {
			continue
		}
		for n, e := range basis {
			c[i][n] = floats.Dot(e, v)
		}
	}
	return c
}

// hessenberg makes h upper Hessenberg by reflections (A. S. Householder 1958; G. H. Golub and C. F. Van Loan, Matrix
// Computations, algorithm 7.4.2) and turns the vectors along. A subspace that grew from one function is so already.
func hessenberg(ctx context.Context, h [][]float64, vectors ...[][]float64) error {
	n := len(h)
	x := make([]float64, n)
	for c := 0; c < n-2; c++ {
		if ctx.Err() != nil {
			return context.Cause(ctx)
		}
		below := 0.0
		for r := c + 2; r < n; r++ {
			below = max(below, math.Abs(h[r][c]))
		}
		if below == 0 {
			continue
		}
		v := x[c+1:]
		for r := range v {
			v[r] = h[c+1+r][c]
		}
		v[0] += math.Copysign(floats.Norm(v, 2), v[0])
		floats.Scale(1/floats.Norm(v, 2), v)
		reflect := func(row []float64) { // row of n numbers, from the right
			d := 2 * floats.Dot(v, row[c+1:])
			for r, y := range v {
				row[c+1+r] -= d * y
			}
		}
		for col := c; col < n; col++ { // from the left
			d := 0.0
			for r, y := range v {
				d += y * h[c+1+r][col]
			}
			for r, y := range v {
				h[c+1+r][col] -= 2 * d * y
			}
		}
		for r := c + 2; r < n; r++ {
			h[r][c] = 0
		}
		for r := range h {
			reflect(h[r])
		}
		for _, set := range vectors {
			for _, row := range set {
				reflect(row)
			}
		}
	}
	return nil
}

func (r *resolvent) cost() float64 { return resolventCost(len(r.columns), len(r.b)) }

// resolventCost estimates the nanoseconds of one value at a rank, with so many left and right vectors.
func resolventCost(rank, vectors int) float64 {
	n := float64(rank)
	return startCost + n*(30+rankCost*n+8*float64(vectors))
}

// at is the resolvent's part of the form for the transforms h.
func (r *resolvent) at(t angle, h []complex128) float64 {
	left := make([]complex128, len(h))
	for j, v := range h {
		left[j] = complex(real(v), -imag(v))
	}
	return 2 * real(r.value(t, left, h))
}

// matrix adds prob times the resolvent's part of the spectral matrix to column k of dst, as form.matrix has it.
func (r *resolvent) matrix(t angle, dst [][]float64, k int, prob float64) {
	w := r.width
	x := make([]complex128, w*w)
	left, right := make([]complex128, w), make([]complex128, w)
	for i := range w {
		for j := range w {
			clear(left)
			clear(right)
			left[i], right[j] = 1, 1
			x[i*w+j] = r.value(t, left, right)
		}
	}
	for i := range w {
		for j := i; j < w; j++ {
			// S_ij is x_ij for rising lags and the conjugate of x_ji for falling ones.
			dst[i*w+j][k] += prob * (real(x[i*w+j]) + real(x[j*w+i]))
			if i != j {
				dst[j*w+i][k] -= prob * (imag(x[i*w+j]) - imag(x[j*w+i]))
			}
		}
	}
}

// value is z^(q+1) u' (I - zH)^-1 b, where u is weighed by left and b by right.
func (r *resolvent) value(t angle, left, right []complex128) complex128 {
	n := len(r.columns)
	if n == 0 {
		return 0
	}
	var s *solveSpace
	select {
	case s = <-r.work:
		clear(s.b)
		clear(s.u)
	default:
		s = &solveSpace{make([]complex128, n), make([]complex128, n), make([]complex128, n)}
	}
	for k := range r.length {
		turn := power(t, -k)
		back := complex(real(turn), -imag(turn))
		for j := range r.width {
			right, left := right[j]*turn, left[j]*back
			b, u := r.b[k*r.width+j], r.u[k*r.width+j]
			for i := range n {
				s.b[i] += complex(real(right)*b[i], imag(right)*b[i])
				s.u[i] += complex(real(left)*u[i], imag(left)*u[i])
			}
		}
	}
	x := s.solve(r.columns, power(t, -r.length))
	select {
	case r.work <- s:
	default:
	}
	return power(t, -r.length*r.steps) * x
}

// solve returns u' (I - zH)^-1 b and uses up b and u.
//
// A = I - zH is solved from its last row upward: two neighbouring columns combine so that the row has one entry left,
// which gives one unknown; the larger entry is the pivot. Neither factor has to be kept.
func (s *solveSpace) solve(columns [][]float64, z complex128) complex128 {
	b, u, w := s.b, s.u, s.w
	n := len(columns)
	zr, zi := -real(z), -imag(z)
	for r, v := range columns[n-1] {
		w[r] = complex(zr*v, zi*v)
	}
	w[n-1] += 1
	left := u[n-1]
	var sum complex128
	for i := n - 1; i > 0; i-- {
		column := columns[i-1][:i]
		tip := complex(zr*columns[i-1][i], zi*columns[i-1][i])
		pivot, right := w[i], b[i]
		w, b := w[:len(column)], b[:len(column)]
		if square(pivot) >= square(tip) {
			f, y := tip/pivot, right/pivot
			sum += y * left
			left = u[i-1] - f*left
			for r, v := range column {
				x := w[r]
				b[r] -= y * x
				w[r] = complex(zr*v, zi*v) - f*x
			}
			w[i-1] += 1
		} else {
			f, y := pivot/tip, right/tip
			sum += y * u[i-1]
			left -= f * u[i-1]
			for r, v := range column {
				x := complex(zr*v, zi*v)
				b[r] -= y * x
				w[r] -= f * x
			}
			b[i-1] -= y
			w[i-1] -= f
		}
	}
	return sum + b[0]/w[0]*left
}

// power is exp(j t k). The product nu k is reduced to a turn with its rounding error, which long memories would feel.
func power(t angle, k int) complex128 {
	whole := t.nu * float64(k)
	turns := whole - math.Round(whole) + math.FMA(t.nu, float64(k), -whole)
	sin, cos := math.Sincos(2 * math.Pi * turns)
	return complex(cos, sin)
}
