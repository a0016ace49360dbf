package spectrum

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"slices"
)

// A comb is the Fourier series of a vector sequence of some period D on the symbol clock: coef[j][k] is
// (1/D) sum over n of c_j(n) exp(-2 pi j k n / D) for 0 <= k <= D/2. Tones stand at k/D symbol rates, k kept as a whole
// number, so that neighbours are never confused by rounding.
type comb struct {
	period int
	coef   [][]complex128
	power  []float64 // mean of c_i(n) c_j(n+l) at (i*width+j)*(lags) + l
	lags   int
}

// mostPeriod is the longest period that is transformed. The work then takes about half a gigabyte, if the period is a
// prime three.
const mostPeriod = 12_000_000

// newComb takes sequences of length period, one a component, and keeps their mean products up to lag lags-1.
func newComb(ctx context.Context, sequences [][]float64, lags int) (*comb, error) {
	n, w := len(sequences[0]), len(sequences)
	c := &comb{period: n, power: make([]float64, w*w*lags), lags: lags}
	for i, x := range sequences {
		for j, y := range sequences {
			for l := range lags {
				if ctx.Err() != nil {
					return nil, context.Cause(ctx)
				}
				sum, at := 0.0, l%n
				for _, v := range x {
					sum += v * y[at]
					if at++; at == n {
						at = 0
					}
				}
				c.power[(i*w+j)*lags+l] = sum / float64(n)
			}
		}
	}
	d, err := newDFT(ctx, n)
	if err != nil {
		return nil, err
	}
	for _, x := range sequences {
		y, err := d.real(ctx, x)
		if err != nil {
			return nil, err
		}
		for k := range y {
			y[k] /= complex(float64(n), 0)
		}
		c.coef = append(c.coef, y)
	}
	return c, nil
}

// means is the comb of the process's mean.
func (p *process) means(ctx context.Context, lags int) (*comb, error) {
	sequences := vectors(p.width, p.period*p.length)
	for n, mean := range p.mean {
		for c, v := range mean {
			sequences[n%p.width][c*p.length+n/p.width] = v
		}
	}
	return newComb(ctx, sequences, lags)
}

// square is the mean square of component j, sum what its tones over one period of k add up to: the same, if all is well.
func (c *comb) square(j int) float64 {
	return c.power[(j*len(c.coef)+j)*c.lags]
}

func (c *comb) sum(j int) float64 {
	sum := 0.0
	for k := range c.coef[j] {
		power := square(c.coef[j][k])
		if k > 0 && 2*k != c.period {
			power *= 2
		}
		sum += power
	}
	return sum
}

// at is the coefficient of component j for any k >= 0: the sequence is real and its series repeats.
func (c *comb) at(j, k int) complex128 {
	k %= c.period
	if 2*k > c.period {
		v := c.coef[j][c.period-k]
		return complex(real(v), -imag(v))
	}
	return c.coef[j][k]
}

// tone is the one-sided power of tone k in units of the drive's volts, squared.
func (p *PSD) tone(c *comb, k int) float64 {
	nu := float64(k) / float64(c.period)
	var power float64
	if len(p.basis) == 1 {
		power = square(c.at(0, k))
		if power != 0 {
			power *= p.basis[0].Energy(nu)
		}
	} else {
		var sum complex128
		for j := range p.basis {
			if v := c.at(j, k); v != 0 {
				sum += v * p.basis[j].Transform(nu)
			}
		}
		power = square(sum)
	}
	if k > 0 {
		power *= 2
	}
	return power
}

// absent is the part of the mean square below which a tone is none.
const absent = 1e-14

// frequency is tone k of a comb in Hz: the exact k/period symbol rates, rounded once, and so the same number however far
// the fraction is reduced. Product and quotient leave their errors to a fused multiplication.
func (p *PSD) frequency(c *comb, k int) float64 {
	n, d, rate := float64(k), float64(c.period), p.drive.SymbolRate
	product := n * rate
	q := product / d
	missing := math.FMA(-q, d, product) + math.FMA(n, rate, -product)
	return q + missing/d
}

// from is the first tone of a comb with f <= frequency: no number that is ever come to where tones are too many to tell
// their frequencies apart.
func (p *PSD) from(c *comb, f float64) int {
	about := math.Floor(f / p.drive.SymbolRate * float64(c.period))
	if about > 1<<52 {
		return math.MaxInt
	}
	k := int(math.Max(0, about-1))
	for p.frequency(c, k) < f {
		k++
	}
	return k
}

// each calls f for every tone of a comb with lo <= frequency < hi, in rising order: those that are absent too.
func (p *PSD) each(ctx context.Context, c *comb, lo, hi float64, f func(k int, power float64)) {
	for k, end := p.from(c, lo), p.from(c, hi); k < end; k++ {
		if k%1024 == 0 {
			stop(ctx)
		}
		f(k, p.tone(c, k))
	}
}

// A Line is a tone: a discrete component of a spectrum.
type Line struct {
	Freq  float64 // Hz
	Power float64 // V^2; of the mean, squared, at 0 Hz
}

// Lines returns the tones from 0 Hz up to and including fmax, in rising frequency. Tones with less than 1e-14 of the
// mean square are not there: they stand on nulls. It panics unless fmax is finite and at least 0.
func (p *PSD) Lines(fmax float64) []Line {
	if !(fmax >= 0) || math.IsInf(fmax, 0) {
		panic(fmt.Errorf("spectrum: Lines(%v): give the highest frequency in Hz, finite and at least 0", fmax))
	}
	ctx := current()
	least := absent * p.made().total / p.volts2()
	var lines []Line
	for _, part := range p.parts {
		p.each(ctx, part.tones, 0, math.Nextafter(fmax, math.Inf(1)), func(k int, power float64) {
			if power *= part.prob; power > least {
				lines = append(lines, Line{p.frequency(part.tones, k), power * p.volts2()})
			}
		})
	}
	if len(p.parts) == 1 {
		return lines
	}
	slices.SortStableFunc(lines, func(a, b Line) int { return cmp.Compare(a.Freq, b.Freq) })
	merged := lines[:0]
	for _, l := range lines {
		if n := len(merged); n > 0 && merged[n-1].Freq == l.Freq {
			merged[n-1].Power += l.Power
		} else {
			merged = append(merged, l)
		}
	}
	return merged
}
