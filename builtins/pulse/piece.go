package pulse

import (
	"math"
	"math/cmplx"
)

// A piece is Re[(c0 + c1 u/width) exp((rate + 2 pi j turns) u)] with u = x - from, over from <= x < from + width. That c1
// is what the straight line gains over the width, and no slope, keeps the steepest edges finite.
type piece struct {
	from, width float64
	c0, c1      complex128
	rate, turns float64
}

// real tells whether the Re of the piece's definition has nothing to do.
func (p *piece) real() bool { return p.turns == 0 && imag(p.c0) == 0 && imag(p.c1) == 0 }

// at is the piece's function at u = x - from, wherever u lies.
func (p *piece) at(u float64) float64 {
	if p.real() {
		v := real(p.c0) + real(p.c1)*(u/p.width)
		if p.rate != 0 {
			v *= math.Exp(p.rate * u)
		}
		return v
	}
	cos, sin := cis(p.turns * u)
	return real((p.c0 + p.c1*complex(u/p.width, 0)) * complex(math.Exp(p.rate*u), 0) * complex(cos, sin))
}

// restrict is the part of p over lo <= x < hi, which must lie within it.
func (p *piece) restrict(lo, hi float64) piece {
	d := lo - p.from
	cos, sin := cis(p.turns * d)
	grow := complex(math.Exp(p.rate*d), 0) * complex(cos, sin)
	return piece{
		from: lo, width: hi - lo,
		c0: (p.c0 + p.c1*complex(d/p.width, 0)) * grow, c1: p.c1 * complex((hi-lo)/p.width, 0) * grow,
		rate: p.rate, turns: p.turns,
	}
}

// transform is the integral of the piece times exp(-2 pi j nu x).
//
// A real function is half the sum of (c0, c1, s) and its conjugate, and each half is an integral of
// (c0 + c1 u/width) exp(sigma u) over 0 <= u < width with sigma = s - 2 pi j nu or its like.
func (p *piece) transform(nu float64) complex128 {
	var sum complex128
	if p.real() {
		sum = linear(p.c0, p.c1, p.rate, -nu, p.width)
	} else {
		sum = (linear(p.c0, p.c1, p.rate, p.turns-nu, p.width) +
			linear(cmplx.Conj(p.c0), cmplx.Conj(p.c1), p.rate, -p.turns-nu, p.width)) / 2
	}
	if p.from == 0 {
		return sum
	}
	cos, sin := cis(-nu * p.from)
	return sum * complex(cos, sin)
}

// overlap is the integral of p(x) q(x) over x. With P and Q the complex functions of both,
// Re P Re Q = Re[P Q + P conj(Q)] / 2.
func overlap(p, q *piece) float64 {
	lo, hi := max(p.from, q.from), min(p.from+p.width, q.from+q.width)
	if !(lo < hi) {
		return 0
	}
	a, b := p.restrict(lo, hi), q.restrict(lo, hi)
	rate := a.rate + b.rate
	w := complex(a.width, 0)
	product := func(q0, q1 complex128, turns float64) complex128 {
		e0, e1, e2 := powers(rate*a.width, turns*a.width)
		return w * (a.c0*q0*e0 + (a.c0*q1+a.c1*q0)*e1 + a.c1*q1*e2)
	}
	return real(product(b.c0, b.c1, a.turns+b.turns)+
		product(cmplx.Conj(b.c0), cmplx.Conj(b.c1), a.turns-b.turns)) / 2
}

// linear is the integral of (c0 + c1 u/width) exp((rate + 2 pi j turns) u) over 0 <= u < width.
func linear(c0, c1 complex128, rate, turns, width float64) complex128 {
	w := complex(width, 0)
	if c1 == 0 {
		return c0 * w * power0(rate*width, turns*width)
	}
	e0, e1, _ := powers(rate*width, turns*width)
	return w * (c0*e0 + c1*e1)
}

// power0 is the integral of exp(z t) over 0 <= t < 1, z = x + 2 pi j turns: (exp(z) - 1)/z. Its numerator is taken
// without cancellation, exactly 0 at whole turns, and near z = 0 the power series takes over.
func power0(x, turns float64) complex128 {
	z := complex(x, 2*math.Pi*turns)
	if math.Abs(x)+math.Abs(imag(z)) < 0.5 {
		return series(z, 1)
	}
	cos, sin := cis(turns)
	_, half := cis(turns / 2) // 1 - cos(2 pi turns) = 2 sin(pi turns)^2
	if x == 0 {
		return complex(-2*half*half, sin) / z
	}
	return complex(math.Expm1(x)*cos-2*half*half, math.Exp(x)*sin) / z
}

// powers are the integrals of t^n exp(z t) over 0 <= t < 1 for n = 0, 1, 2: by the recursion
// E_n = (exp(z) - n E_(n-1))/z, which loses no more than z^-2, or by the power series for small z.
func powers(x, turns float64) (e0, e1, e2 complex128) {
	z := complex(x, 2*math.Pi*turns)
	if math.Abs(x)+math.Abs(imag(z)) < 2 {
		return series(z, 1), series(z, 2), series(z, 3)
	}
	cos, sin := cis(turns)
	exp := complex(math.Exp(x), 0) * complex(cos, sin)
	e0 = power0(x, turns)
	e1 = (exp - e0) / z
	e2 = (exp - 2*e1) / z
	return e0, e1, e2
}

// series is the sum of z^n / (n! (n+k)) over n = 0, 1, ...: the integral of t^(k-1) exp(z t) over 0 <= t < 1.
func series(z complex128, k int) complex128 {
	term := complex(1, 0)
	sum := complex(1/float64(k), 0)
	for n := 1; n < 40; n++ {
		term *= z / complex(float64(n), 0)
		add := term / complex(float64(n+k), 0)
		sum += add
		if math.Abs(real(add))+math.Abs(imag(add)) < 1e-18 {
			break
		}
	}
	return sum
}

// cis is the cosine and sine of an angle in turns. The angle is reduced without error, and the four quarters of the
// circle are exact, so that transforms vanish where they should.
func cis(turns float64) (cos, sin float64) {
	r := turns - math.Round(turns)
	switch r {
	case 0:
		return 1, 0
	case 0.5, -0.5:
		return -1, 0
	case 0.25:
		return 0, 1
	case -0.25:
		return 0, -1
	}
	sin, cos = math.Sincos(2 * math.Pi * r)
	return cos, sin
}
