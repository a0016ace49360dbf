package spectrum

// A form is the spectral matrix of a process on the symbol clock, S_ij = sum over l of R_ij(l) exp(-j t l) with
// t = 2 pi nu and R_ij(l) the mean of c_i(n) c_j(n+l), as the quadratic form in the transforms h of the pulses that the
// components weigh:
//
//	sum over i, j of conj(h_i) h_j S_ij.
//
// R_ij(-l) = R_ji(l), so each pair i < j needs a series of cosines and one of sines.
type form struct {
	width int
	lags  [][]float64 // lags[i*width+j][l] = R_ij(l) for l >= 0, as far as it was summed
	even  []series    // of pairs i <= j, row by row
	odd   []series    // of pairs i < j in the same order; unused entries are empty
	rest  *resolvent  // what the lags leave; nil if that is nothing
	under series      // of cosines: the form is the series over this one; empty if over 1
	lift  int         // the form is that of running sums: it takes (2 sin(t/2))^2 to this power
}

func newForm(width int, lags [][]float64, rest *resolvent) *form {
	f := &form{width: width, lags: lags, rest: rest}
	for i := range width {
		for j := i; j < width; j++ {
			there, back := lags[i*width+j], lags[j*width+i]
			even := make([]float64, len(there))
			even[0] = there[0]
			var odd []float64
			if i != j {
				odd = make([]float64, len(there))
			}
			for l := 1; l < len(there); l++ {
				even[l] = there[l] + back[l]
				if i != j {
					odd[l] = there[l] - back[l]
				}
			}
			f.even = append(f.even, newSeries(even))
			f.odd = append(f.odd, newSeries(odd))
		}
	}
	return f
}

// raised is the form of a process of one component whose running sums, taken order times, have the form sums:
// differences of the lags, R(l) = 2 R'(l) - R'(l-1) - R'(l+1) each time. It needs order more lags than it gives.
func (sums *form) raised(order int) *form {
	r := sums.lags[0]
	for range order {
		at := func(l int) float64 {
			if l >= len(r) {
				return 0
			}
			return r[l]
		}
		next := make([]float64, len(r)+1)
		for l := range next {
			next[l] = 2*at(l) - at(max(l-1, 1-l)) - at(l+1)
		}
		r = next
	}
	up := *sums
	up.lags, up.lift = [][]float64{r}, order
	return &up
}

// raise is the factor of the lift at the angle t.
func (f *form) raise(t angle) float64 {
	factor := 1.0
	for range f.lift {
		factor *= 4 * t.half * t.half
	}
	return factor
}

// factor is what the series and the rest are multiplied by at the angle t.
func (f *form) factor(t angle) float64 {
	factor := f.raise(t)
	if f.under.a != nil {
		factor /= f.under.even(t)
	}
	return factor
}

// power is R_ii(0).
func (f *form) power(i int) float64 { return f.lags[i*f.width+i][0] }

// at is the value of the form for the transforms h at the angle t.
func (f *form) at(t angle, h []complex128) float64 {
	sum := 0.0
	n := 0
	for i, hi := range h {
		for j := i; j < len(h); j++ {
			c := f.even[n].even(t)
			if j == i {
				sum += square(hi) * c
			} else {
				x := h[j] * complex(real(hi), -imag(hi))
				sum += 2 * (real(x)*c + imag(x)*f.odd[n].odd(t))
			}
			n++
		}
	}
	if f.rest != nil {
		sum += f.rest.at(t, h)
	}
	return sum * f.factor(t)
}

// scalar sets dst[i] to the form of a process of one component for h = 1; work is scratch.
func (f *form) scalar(dst []float64, t []angle, work []float64) {
	f.even[0].evens(dst, t)
	if f.rest != nil {
		h := []complex128{1}
		for i := range dst {
			dst[i] += f.rest.at(t[i], h)
		}
	}
	if f.lift > 0 {
		for i := range dst {
			dst[i] *= f.raise(t[i])
		}
	}
	if f.under.a == nil {
		return
	}
	f.under.evens(work, t)
	for i, under := range work {
		dst[i] /= under
	}
}

// cost estimates the nanoseconds of one value.
func (f *form) cost() float64 {
	ns := lagCost * float64(f.width*f.width*(len(f.even[0].a)+len(f.under.a)))
	if f.rest != nil {
		ns += f.rest.cost()
	}
	return ns
}

func square(z complex128) float64 { return real(z)*real(z) + imag(z)*imag(z) }

// matrix adds prob times the spectral matrix at the angle t to column k of dst: with S_ij = C - jD, C goes to (i, j) for
// i <= j and D to (j, i).
func (f *form) matrix(t angle, dst [][]float64, k int, prob float64) {
	prob *= f.factor(t)
	n := 0
	for i := range f.width {
		for j := i; j < f.width; j++ {
			dst[i*f.width+j][k] += prob * f.even[n].even(t)
			if i != j {
				dst[j*f.width+i][k] += prob * f.odd[n].odd(t)
			}
			n++
		}
	}
	if f.rest != nil {
		f.rest.matrix(t, dst, k, prob)
	}
}
