package spectrum

import "math"

// A series is a finite trigonometric series: a[0] + a[1] cos t + a[2] cos 2t + ..., or of sines, with t = 2 pi nu.
type series struct {
	a    []float64
	flip []float64 // a with every odd coefficient negated
}

func newSeries(a []float64) series {
	flip := append([]float64(nil), a...)
	for k := 1; k < len(flip); k += 2 {
		flip[k] = -flip[k]
	}
	return series{a, flip}
}

// An angle is a place on the symbol's unit circle: t = 2 pi nu, nu reduced to within 1/2 of 0 without error.
type angle struct {
	nu       float64
	cos, sin float64
	half     float64 // sin(t/2)
	other    float64 // cos(t/2)
}

func newAngle(nu float64) angle {
	r := nu - math.Round(nu)
	sin, cos := math.Sincos(math.Pi * r)
	return angle{nu: r, cos: 1 - 2*sin*sin, sin: 2 * sin * cos, half: sin, other: cos}
}

// even is the sum of a[k] cos kt, odd that of a[k] sin kt.
//
// They share Reinsch's form of Clenshaw's recurrence (J. Stoer and R. Bulirsch, Introduction to Numerical Analysis,
// 2nd ed., section 2.3.3, from memory), which does not lose digits near t = 0; in the half circle around pi the
// odd coefficients change sign and t is counted from pi.
func (s series) even(t angle) float64 {
	d, b, k := s.reinsch(t)
	return d + k/2*b
}

func (s series) odd(t angle) float64 {
	_, b, _ := s.reinsch(t)
	if t.cos < 0 {
		return -t.sin * b
	}
	return t.sin * b
}

// reinsch returns d[0], b[1] and the factor k = 2 cos t - 2 of
//
//	b[k] = d[k] + b[k+1],   d[k-1] = a[k-1] + factor b[k] + d[k].
func (s series) reinsch(t angle) (d, b, factor float64) {
	a := s.a
	if t.cos < 0 {
		a = s.flip
		factor = -4 * t.other * t.other
	} else {
		factor = -4 * t.half * t.half
	}
	for k := len(a) - 1; k > 0; k-- {
		d += a[k] + factor*b
		b += d
	}
	return a[0] + d, b, factor
}

// evens sets dst[i] to the sum of a[k] cos k t[i].
//
// Away from t = 0 and pi the plain recurrence of Clenshaw (1955), b[k] = a[k] + 2 cos(t) b[k+1] - b[k+2], loses no
// more than 1/sin(t) in digits and is the fastest; six angles at a time keep the processor's
// units busy.
func (s series) evens(dst []float64, t []angle) {
	const enough = 0.05 // least sine for the plain recurrence
	if len(s.a) == 1 {
		for i := range dst {
			dst[i] = s.a[0]
		}
		return
	}
	i := 0
	for ; i+6 <= len(t); i += 6 {
		s.clenshaw(dst[i:i+6], t[i:i+6])
		for n := i; n < i+6; n++ {
			if math.Abs(t[n].sin) < enough {
				dst[n] = s.even(t[n])
			}
		}
	}
	for ; i < len(t); i++ {
		dst[i] = s.even(t[i])
	}
}

// clenshaw does six angles. Steps come in pairs, so that no value has to change its place.
func (s series) clenshaw(dst []float64, t []angle) {
	t = t[:6]
	c0, c1, c2, c3, c4, c5 := 2*t[0].cos, 2*t[1].cos, 2*t[2].cos, 2*t[3].cos, 2*t[4].cos, 2*t[5].cos
	var p0, p1, p2, p3, p4, p5 float64 // b[k+1]
	var q0, q1, q2, q3, q4, q5 float64 // b[k+2]
	a := s.a
	k := len(a) - 1
	if k%2 == 1 { // an odd number of steps: the first one has nothing before it
		p0, p1, p2, p3, p4, p5 = a[k], a[k], a[k], a[k], a[k], a[k]
		k--
	}
	for ; k > 1; k -= 2 {
		v, w := a[k], a[k-1]
		q0 = c0*p0 + (v - q0)
		q1 = c1*p1 + (v - q1)
		q2 = c2*p2 + (v - q2)
		q3 = c3*p3 + (v - q3)
		q4 = c4*p4 + (v - q4)
		q5 = c5*p5 + (v - q5)
		p0 = c0*q0 + (w - p0)
		p1 = c1*q1 + (w - p1)
		p2 = c2*q2 + (w - p2)
		p3 = c3*q3 + (w - p3)
		p4 = c4*q4 + (w - p4)
		p5 = c5*q5 + (w - p5)
	}
	dst = dst[:6]
	dst[0] = a[0] + c0/2*p0 - q0
	dst[1] = a[0] + c1/2*p1 - q1
	dst[2] = a[0] + c2/2*p2 - q2
	dst[3] = a[0] + c3/2*p3 - q3
	dst[4] = a[0] + c4/2*p4 - q4
	dst[5] = a[0] + c5/2*p5 - q5
}
