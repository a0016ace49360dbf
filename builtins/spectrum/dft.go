package spectrum

import (
	"context"
	"math"

	"gonum.org/v1/gonum/dsp/fourier"
)

// A dft is the discrete Fourier transform of one length, whatever its factors.
//
// The library's transform is quick for lengths of small factors and quadratic in each large prime. A length is
// therefore split once into rows and columns (J. W. Cooley and J. W. Tukey, Math. Comp. 19 (1965) 297-301), each
// short or itself split, and a large prime becomes a convolution of a good length (L. I. Bluestein, IEEE Trans. Audio
// Electroacoust. AU-18 (1970) 451-455). No single library call takes long, so that the work can be interrupted.
type dft struct {
	n          int
	small      *fourier.CmplxFFT // lengths of small factors
	rows, cols *dft              // n = rows.n * cols.n
	chirp      []complex128      // Bluestein: exp(-j pi k^2 / n), k < n
	filter     []complex128      // transform of the conjugate chirp, wrapped around
	pad        *dft              // of the length of filter
}

const (
	smallPrime  = 64      // largest factor that the library transforms quickly enough
	smallLength = 1 << 15 // longest length given to the library
)

func newDFT(ctx context.Context, n int) (*dft, error) {
	d := &dft{n: n}
	if n == 1 {
		return d, nil
	}
	var factors []int
	for rest, f := n, 2; rest > 1; f++ {
		if f*f > rest {
			f = rest
		}
		for rest%f == 0 {
			factors = append(factors, f)
			rest /= f
		}
	}
	top := factors[len(factors)-1]
	var err error
	switch {
	case n <= smallLength && top <= smallPrime:
		d.small = fourier.NewCmplxFFT(n)
	case len(factors) == 1:
		err = d.bluestein(ctx)
	default:
		cols := top
		for i := len(factors) - 2; i > 0 && top <= smallPrime && cols*factors[i] <= smallLength/8; i-- {
			cols *= factors[i]
		}
		if d.cols, err = newDFT(ctx, cols); err == nil {
			d.rows, err = newDFT(ctx, n/cols)
		}
	}
	return d, err
}

func (d *dft) bluestein(ctx context.Context) error {
	n := d.n
	length := 1
	for length < 2*n-1 {
		length *= 2
	}
	var err error
	if d.pad, err = newDFT(ctx, length); err != nil {
		return err
	}
	d.chirp = make([]complex128, n)
	d.filter = make([]complex128, length)
	square := 0 // k^2 mod 2n
	for k := range n {
		if k%(1<<16) == 0 && ctx.Err() != nil {
			return context.Cause(ctx)
		}
		d.chirp[k] = unit(-float64(square) / float64(2*n))
		c := complex(real(d.chirp[k]), -imag(d.chirp[k]))
		d.filter[k] = c
		if k > 0 {
			d.filter[length-k] = c
		}
		square = (square + 2*k + 1) % (2 * n)
	}
	return d.pad.transform(ctx, d.filter)
}

// transform replaces x[n] by the sum over n of x[n] exp(-2 pi j n k / len(x)).
func (d *dft) transform(ctx context.Context, x []complex128) error {
	if ctx.Err() != nil {
		return context.Cause(ctx)
	}
	switch {
	case d.n == 1:
		return nil
	case d.small != nil:
		d.small.Coefficients(x, x)
		return nil
	case d.pad != nil:
		y := make([]complex128, d.pad.n)
		for k, c := range d.chirp {
			y[k] = x[k] * c
		}
		if err := d.pad.transform(ctx, y); err != nil {
			return err
		}
		for k, f := range d.filter {
			v := y[k] * f
			y[k] = complex(real(v), -imag(v)) // the inverse transform is the conjugate of that of the conjugate
		}
		if err := d.pad.transform(ctx, y); err != nil {
			return err
		}
		for k, c := range d.chirp {
			x[k] = complex(real(y[k]), -imag(y[k])) * c / complex(float64(d.pad.n), 0)
		}
		return nil
	}
	// n = cols a + b and k = c + rows e: over a for each b, a twist by b c, over b for each c.
	rows, cols := d.rows.n, d.cols.n
	y := make([]complex128, d.n)
	for b := range cols {
		row := y[b*rows : (b+1)*rows]
		for a := range row {
			row[a] = x[cols*a+b]
		}
		if err := d.rows.transform(ctx, row); err != nil {
			return err
		}
	}
	column := make([]complex128, cols)
	for c := range rows {
		for b := range column {
			column[b] = y[b*rows+c] * unit(-float64(b*c%d.n)/float64(d.n))
		}
		if err := d.cols.transform(ctx, column); err != nil {
			return err
		}
		for e, v := range column {
			x[c+rows*e] = v
		}
	}
	return nil
}

// real returns the transform of real x at 0 <= k <= len(x)/2; the rest is the conjugate of that, backwards. Of rows and
// columns it needs half.
func (d *dft) real(ctx context.Context, x []float64) ([]complex128, error) {
	half := make([]complex128, d.n/2+1)
	if d.rows == nil {
		y := make([]complex128, d.n)
		for i, v := range x {
			y[i] = complex(v, 0)
		}
		err := d.transform(ctx, y)
		copy(half, y)
		return half, err
	}
	rows, cols := d.rows.n, d.cols.n
	y := make([]complex128, (rows/2+1)*cols) // as in transform, c <= rows/2, column by column
	row := make([]complex128, rows)
	for b := range cols {
		for a := range row {
			row[a] = complex(x[cols*a+b], 0)
		}
		if err := d.rows.transform(ctx, row); err != nil {
			return nil, err
		}
		for c, v := range row[:rows/2+1] {
			y[c*cols+b] = v * unit(-float64(b*c%d.n)/float64(d.n))
		}
	}
	for c := range rows/2 + 1 {
		column := y[c*cols : (c+1)*cols]
		if err := d.cols.transform(ctx, column); err != nil {
			return nil, err
		}
		for e, v := range column {
			if k := c + rows*e; k < len(half) {
				half[k] = v
			} else {
				half[d.n-k] = complex(real(v), -imag(v))
			}
		}
	}
	return half, nil
}

// unit is exp(2 pi j turns).
func unit(turns float64) complex128 {
	sin, cos := math.Sincos(2 * math.Pi * turns)
	return complex(cos, sin)
}
