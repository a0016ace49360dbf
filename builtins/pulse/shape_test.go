package pulse

import (
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"gonum.org/v1/gonum/integrate/quad"
	"pgregory.net/rapid"
)

func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	return math.Sin(math.Pi*x) / (math.Pi * x)
}

func phase(turns float64) complex128 { return cmplx.Exp(complex(0, 2*math.Pi*turns)) }

// The closed forms are standard transform pairs (R. N. Bracewell, The Fourier Transform and Its Applications, from
// memory), written so that they keep their digits at the frequencies below.
func TestTransformClosedForms(t *testing.T) {
	tests := []struct {
		name  string
		shape Shape
		want  func(nu float64) complex128
	}{
		{"zero value", Shape{}, func(nu float64) complex128 { return phase(-nu/2) * complex(sinc(nu), 0) }},
		{"rectangle of 30 %", Rect(0.3), func(nu float64) complex128 { return phase(-0.15*nu) * complex(0.3*sinc(0.3*nu), 0) }},
		{"rectangle with an offset", Delayed(Rect(0.5), 0.25), func(nu float64) complex128 { return phase(-nu/2) * complex(0.5*sinc(0.5*nu), 0) }},
		{"triangle", Trapezoid(0.5, 0, 0.5), func(nu float64) complex128 {
			return phase(-nu/2) * complex(0.5*sinc(nu/2)*sinc(nu/2), 0)
		}},
		{"trapezoid", Trapezoid(0.25, 0.5, 0.25), func(nu float64) complex128 { // rect(0.75) convolved with rect(0.25)
			return phase(-nu/2) * complex(0.75*sinc(0.75*nu)*sinc(0.25*nu), 0)
		}},
		{"raised cosine", RaisedCosine(2), func(nu float64) complex128 {
			return phase(-nu) * complex(sinc(2*nu)+0.5*sinc(2*nu-1)+0.5*sinc(2*nu+1), 0)
		}},
		{"half sine", HalfSine(1), func(nu float64) complex128 {
			// Half the sum of two rectangles shifted by a quarter of the sine's period in frequency.
			return phase(-nu/2) * complex(0.5*sinc(nu-0.5)+0.5*sinc(nu+0.5), 0)
		}},
		{"exponential fall", Sum(Exponential(0.5, 0, 0.2), Scaled(Rect(0.5), -1)), func(nu float64) complex128 {
			return phase(-nu/2) / complex(5, 2*math.Pi*nu)
		}},
		{"settling", Settle(1, -1, 0.1), func(nu float64) complex128 {
			s := complex(10, 2*math.Pi*nu)
			return -phase(-nu/2)*complex(sinc(nu), 0) + 2*(1-cmplx.Exp(-s))/s
		}},
	}
	frequencies := []float64{0, 1e-12, 1e-8, 1e-4, 0.03, 0.07, 0.1, 0.25, 0.4999999, 0.5, 0.5000001, 0.77, 1, 1.000001, 1.5, 2, 3.7, 10.2, 55.5}
	for _, test := range tests {
		for _, nu := range frequencies {
			for _, nu := range []float64{nu, -nu} {
				got, want := test.shape.Transform(nu), test.want(nu)
				if cmplx.Abs(got-want) > 1e-15*(1+math.Abs(nu)) {
					t.Errorf("%s: Transform(%v) = %v, want %v", test.name, nu, got, want)
				}
				if e := test.shape.Energy(nu); math.Abs(e-real(want)*real(want)-imag(want)*imag(want)) > 4e-15 {
					t.Errorf("%s: Energy(%v) = %v, want |%v|^2", test.name, nu, e, want)
				}
			}
		}
	}
}

// Rectangles vanish exactly at their nulls, and stay accurate relative to themselves right beside them.
func TestTransformNulls(t *testing.T) {
	for _, nu := range []float64{1, 2, 7, 1000, 123456789} {
		if got := Rect(1).Transform(nu); got != 0 {
			t.Errorf("Rect(1).Transform(%v) = %v, want 0", nu, got)
		}
		if got := Rect(0.5).Energy(2 * nu); got != 0 {
			t.Errorf("Rect(0.5).Energy(%v) = %v, want 0", 2*nu, got)
		}
	}
	const d = 1.0 / (1 << 40)
	want := d / (1 + d) // sin(pi (1+d)) / (pi (1+d)), relative error d^2
	if got := cmplx.Abs(Rect(1).Transform(1 + d)); math.Abs(got/want-1) > 1e-14 {
		t.Errorf("|Rect(1).Transform(1+2^-40)| = %v, want %v", got, want)
	}
}

// A pulse without area: the transform keeps its digits as nu goes to 0, because both halves are exact there.
func TestTransformWithoutArea(t *testing.T) {
	s := Sum(Rect(0.5), Scaled(Delayed(Rect(0.5), 0.5), -1))
	for _, nu := range []float64{1e-3, 1e-6, 1e-9} {
		want := 0.5 * sinc(nu/2) * 2 * math.Sin(math.Pi*nu/2) // rect(1/2) (1 - exp(-pi j nu))
		if got := cmplx.Abs(s.Transform(nu)); math.Abs(got/want-1) > 1e-16/nu {
			t.Errorf("|Transform(%v)| = %v, want %v", nu, got, want)
		}
	}
}

// draw makes a shape of any kind.
func draw(t *rapid.T) Shape {
	x := func(name string, lo, hi float64) float64 { return rapid.Float64Range(lo, hi).Draw(t, name) }
	var s Shape
	switch rapid.IntRange(0, 7).Draw(t, "kind") {
	case 0:
		s = Rect(x("duty", 0.01, 1))
	case 1:
		s = Points([]float64{-0.3, 0.2, 0.2, 1.4}, []float64{x("v0", -2, 2), x("v1", -2, 2), x("v2", -2, 2), x("v3", -2, 2)})
	case 2:
		s = Trapezoid(x("rise", 0, 0.5), x("top", 0.01, 1), x("fall", 0, 0.5))
	case 3:
		s = HalfSine(x("width", 0.1, 3))
	case 4:
		s = RaisedCosine(x("width", 0.1, 3))
	case 5:
		s = Exponential(x("on", 0.1, 1), x("rise", 0.03, 0.5), x("fall", 0.03, 0.1))
	case 6:
		s = Settle(x("from", -1, 1), x("to", -1, 1), x("tau", 0.03, 0.5))
	}
	return Scaled(Delayed(s, x("delay", -1, 1)), x("factor", -2, 2))
}

// numeric integrates f over the support of s, split where the pieces of s and others begin and end.
func numeric(f func(x float64) float64, shapes ...Shape) float64 {
	var cuts []float64
	for _, s := range shapes {
		for _, p := range s.parts() {
			for k := range 65 { // 64 panels of a Gauss rule resolve what the tests draw
				cuts = append(cuts, p.from+p.width*float64(k)/64)
			}
		}
	}
	sum := 0.0
	sorted := append([]float64(nil), cuts...)
	for i := range sorted {
		for j := i; j > 0 && sorted[j] < sorted[j-1]; j-- {
			sorted[j], sorted[j-1] = sorted[j-1], sorted[j]
		}
	}
	for i := 1; i < len(sorted); i++ {
		if sorted[i] > sorted[i-1] {
			sum += quad.Fixed(f, sorted[i-1], sorted[i], 12, quad.Legendre{}, 0)
		}
	}
	return sum
}

func TestTransformAgainstQuadrature(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := draw(t)
		nu := rapid.Float64Range(-8, 8).Draw(t, "nu")
		re := numeric(func(x float64) float64 { return s.At(x) * math.Cos(2*math.Pi*nu*x) }, s)
		im := numeric(func(x float64) float64 { return -s.At(x) * math.Sin(2*math.Pi*nu*x) }, s)
		if got := s.Transform(nu); cmplx.Abs(got-complex(re, im)) > 1e-12 {
			t.Errorf("Transform(%v) = %v, want %v", nu, got, complex(re, im))
		}
		for n := range 4 {
			want := numeric(func(x float64) float64 { return s.At(x) * math.Pow(x, float64(n)) }, s)
			if got := s.Moment(n); math.Abs(got-want) > 1e-11 {
				t.Errorf("Moment(%d) = %v, want %v", n, got, want)
			}
		}
	})
}

func TestOverlapAgainstQuadrature(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		a, b := draw(t), draw(t)
		shift := float64(rapid.IntRange(-3, 3).Draw(t, "shift"))
		want := numeric(func(x float64) float64 { return a.At(x) * b.At(x-shift) }, a, Delayed(b, shift))
		if got := a.Overlap(b, shift); math.Abs(got-want) > 1e-11 {
			t.Errorf("Overlap(%v) = %v, want %v", shift, got, want)
		}
	})
}

func TestBasis(t *testing.T) {
	tests := []struct {
		name   string
		shapes []Shape
		want   int
	}{
		{"none", nil, 0},
		{"zero", []Shape{Scaled(Rect(1), 0)}, 0},
		{"one pulse, three levels", []Shape{Scaled(Rect(0.5), -1), Scaled(Rect(0.5), 0), Scaled(Rect(0.5), 1.0/3)}, 1},
		{"settling driver", []Shape{Settle(-1, 1, 0.1), Settle(1, -1, 0.1), Settle(1, 1, 0.1), Settle(-1, -1, 0.1)}, 2},
		{"two pulses", []Shape{Rect(0.5), Rect(1), Scaled(Rect(1), -1)}, 2},
	}
	for _, test := range tests {
		basis, coef := Basis(test.shapes)
		if len(basis) != test.want {
			t.Errorf("%s: %d basis shapes, want %d", test.name, len(basis), test.want)
		}
		for i, s := range test.shapes {
			for _, x := range []float64{0, 0.1, 0.3, 0.6, 0.95} {
				got := 0.0
				for j, b := range basis {
					got += coef[i][j] * b.At(x)
				}
				if math.Abs(got-s.At(x)) > 1e-14 {
					t.Errorf("%s: shape %d at %v is %v from the basis, want %v", test.name, i, x, got, s.At(x))
				}
			}
		}
	}
}

func TestSupportAndValues(t *testing.T) {
	if from, to := Delayed(HalfSine(2), -0.5).Support(); from != -0.5 || to != 1.5 {
		t.Errorf("support %v to %v, want -0.5 to 1.5", from, to)
	}
	if from, to := Sum().Support(); from != 0 || to != 0 {
		t.Errorf("support of nothing is %v to %v, want 0 to 0", from, to)
	}
	points := Points([]float64{0, 0.5, 0.5, 1}, []float64{0, 1, -1, 0})
	for x, want := range map[float64]float64{-0.1: 0, 0.25: 0.5, 0.5: -1, 0.75: -0.5, 1: 0} {
		if got := points.At(x); math.Abs(got-want) > 1e-15 {
			t.Errorf("points at %v: %v, want %v", x, got, want)
		}
	}
	if got := Exponential(1, 0.5, 0.5).At(1); math.Abs(got-(1-math.Exp(-2))) > 1e-15 {
		t.Errorf("exponential at the end of its drive: %v, want 1 - exp(-2)", got)
	}
}

func TestRefusals(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	tests := []struct {
		do   func()
		want string
	}{
		{func() { Rect(0) }, "pulse: Rect(0): a duty is greater than 0 and at most 1"},
		{func() { Rect(-0.5) }, "pulse: Rect(-0.5)"},
		{func() { Rect(1.2) }, "pulse: Rect(1.2)"},
		{func() { Rect(nan) }, "pulse: Rect(NaN)"},
		{func() { Points([]float64{0}, []float64{1}) }, "1 times and 1 values"},
		{func() { Points([]float64{0, 1}, []float64{1}) }, "2 times and 1 values"},
		{func() { Points([]float64{0, 1}, []float64{1, inf}) }, "point 1 is (1, +Inf)"},
		{func() { Points([]float64{1, 0}, []float64{1, 1}) }, "time 0 of point 1 comes after 1"},
		{func() { Points([]float64{0, 0, 0, 1}, []float64{1, 2, 3, 4}) }, "time 0 stands three times (point 2)"},
		{func() { Points([]float64{1, 1}, []float64{1, 2}) }, "all 2 points are at time 1"},
		{func() { Trapezoid(-0.1, 1, 0) }, "Trapezoid(-0.1, 1, 0)"},
		{func() { Trapezoid(0, 0, 0) }, "no width"},
		{func() { HalfSine(0) }, "HalfSine(0): the width"},
		{func() { RaisedCosine(inf) }, "RaisedCosine(+Inf): the width"},
		{func() { Exponential(0, 1, 1) }, "Exponential(0, 1, 1)"},
		{func() { Exponential(1, -1, 1) }, "Exponential(1, -1, 1)"},
		{func() { Settle(nan, 1, 1) }, "Settle(NaN, 1, 1)"},
		{func() { Scaled(Rect(1), nan) }, "Scaled by NaN"},
		{func() { Delayed(Rect(1), inf) }, "Delayed by +Inf"},
	}
	for _, test := range tests {
		if got := failure(test.do); !strings.HasPrefix(got, "pulse: ") || !strings.Contains(got, test.want) {
			t.Errorf("message %q does not have %q", got, test.want)
		}
	}
}

// failure returns the message of the error that do panics with.
func failure(do func()) (message string) {
	defer func() {
		if err, ok := recover().(error); ok {
			message = err.Error()
		}
	}()
	do()
	return "no panic"
}

func ExamplePoints() {
	s := Points([]float64{0, 0.25, 0.75, 1}, []float64{0, 1, 1, 0})
	fmt.Println(s.At(0.125), s.Moment(0))
	// Output: 0.5 0.75
}
