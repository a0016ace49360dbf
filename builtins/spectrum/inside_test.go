package spectrum

import (
	"context"
	"math"
	"math/cmplx"
	"testing"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
)

// Lengths of small factors, primes, products of both, and one that is split twice, against the definition.
func TestDFT(t *testing.T) {
	for _, n := range []int{1, 2, 5, 12, 67, 127, 134, 1270, 2047, 4099, 70 * 67} {
		x := make([]complex128, n)
		for i := range x {
			x[i] = complex(float64(mix(uint64(i))%1000)/500-1, float64(mix(uint64(i)+77)%1000)/500-1)
		}
		got := append([]complex128(nil), x...)
		d, err := newDFT(context.Background(), n)
		if err != nil {
			t.Fatal(err)
		}
		if err := d.transform(context.Background(), got); err != nil {
			t.Fatal(err)
		}
		for _, k := range []int{0, 1, n / 3, n / 2, n - 1} {
			var want complex128
			for i, v := range x {
				want += v * unit(-float64(i*k%n)/float64(n))
			}
			if cmplx.Abs(got[k%n]-want) > 1e-13*float64(n)+1e-11 && n > 1 {
				t.Errorf("length %d, term %d: %v, want %v", n, k, got[k], want)
			}
		}
	}
}

// A long transform keeps the energy (Parseval) and puts a rotation where it belongs.
func TestLongDFT(t *testing.T) {
	for _, n := range []int{1 << 17, 1048573, 178481 * 6} { // 1048573 and 178481 are prime
		d, err := newDFT(context.Background(), n)
		if err != nil {
			t.Fatal(err)
		}
		x := make([]complex128, n)
		const k = 12345
		for i := range x {
			x[i] = unit(float64(i*k%n) / float64(n))
		}
		if err := d.transform(context.Background(), x); err != nil {
			t.Fatal(err)
		}
		energy := 0.0
		for i, v := range x {
			if i != k {
				energy += square(v)
			}
		}
		if cmplx.Abs(x[k]-complex(float64(n), 0)) > 1e-9*float64(n) || energy > 1e-18*float64(n)*float64(n) {
			t.Errorf("length %d: term %v, want %d; %v elsewhere", n, x[k], n, energy)
		}
	}
}

// The series by both recurrences against the plain sum, close to 0 and pi too.
func TestSeries(t *testing.T) {
	a := make([]float64, 50)
	for k := range a {
		a[k] = math.Pow(0.8, float64(k)) * float64(int(mix(uint64(k))%5)-2)
	}
	s := newSeries(a)
	var t0 []angle
	for _, nu := range []float64{0, 1e-9, 0.001, 0.01, 0.2, 0.25, 0.31, 0.4, 0.49, 0.4999, 0.5, 0.51, 0.75, 0.99, 3.2} {
		t0 = append(t0, newAngle(nu))
	}
	got := make([]float64, len(t0))
	s.evens(got, t0)
	for i, x := range t0 {
		even, odd := 0.0, 0.0
		for k, v := range a {
			even += v * math.Cos(2*math.Pi*x.nu*float64(k))
			odd += v * math.Sin(2*math.Pi*x.nu*float64(k))
		}
		if math.Abs(got[i]-even) > 1e-13 || math.Abs(s.even(x)-even) > 1e-13 || math.Abs(s.odd(x)-odd) > 1e-13 {
			t.Errorf("at %v: cosines %v and %v, want %v; sines %v, want %v", x.nu, got[i], s.even(x), even, s.odd(x), odd)
		}
	}
}

// The determinant of I - yH by its coefficients, against a triangular example and one worked by hand.
func TestCharacteristic(t *testing.T) {
	tests := []struct{ h, want [][]float64 }{
		{[][]float64{{0.5}}, [][]float64{{1, -0.5}}},
		{[][]float64{{1, 2}, {3, 4}}, [][]float64{{1, -5, -2}}},                        // trace 5, determinant -2
		{[][]float64{{2, 7, 9}, {0, 3, 8}, {0, 0, 5}}, [][]float64{{1, -10, 31, -30}}}, // (1-2y)(1-3y)(1-5y)
		{[][]float64{{0, 0, 1}, {1, 0, 0}, {0, 1, 0}}, [][]float64{{1, 0, 0, -1}}},     // a rotation of three
	}
	for _, test := range tests {
		got := characteristic(test.h)
		for i, v := range test.want[0] {
			if math.Abs(got[i]-v) > 1e-14 {
				t.Errorf("%v: %v, want %v", test.h, got, test.want[0])
				break
			}
		}
	}
}

// Shift registers fed through copies of their states shrink to what they were.
func TestLump(t *testing.T) {
	const copies, n = 8, 16
	ch := &linecode.Chain{Name: "copies", States: copies * n}
	for s := range n {
		for c := range copies {
			for bit := range 2 {
				to := (s<<1 | bit) & (n - 1)
				for other := range copies { // which copy comes next says nothing about the symbols
					ch.Edges = append(ch.Edges, linecode.Edge{
						From: s*copies + c, To: to*copies + other, P: 0.5 / copies, Levels: []float64{float64(s>>3 + bit)},
					})
				}
			}
		}
	}
	d, err := pulse.Train{}.Drive(coder{ch})
	if err != nil {
		t.Fatal(err)
	}
	m, _, err := read(context.Background(), ch, d)
	if err != nil {
		t.Fatal(err)
	}
	small, err := m.lump(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	if small.states != n {
		t.Errorf("%d states are left of %d, want %d", small.states, m.states, n)
	}
}

func TestFixedRate(t *testing.T) {
	out := func(n int) []float64 { return make([]float64, n) }
	tests := []struct {
		name          string
		edges         []linecode.Edge
		bits, symbols int
		fixed         bool
	}{
		{"block", []linecode.Edge{{P: 1, Levels: out(10), Bits: 8}}, 4, 5, true},
		{"framing", []linecode.Edge{{To: 1, P: 1, Levels: out(3), Bits: 2}, {From: 1, To: 0, P: 1, Levels: out(1)}}, 1, 2, true},
		{"two ways of one ratio", []linecode.Edge{{P: 0.5, Levels: out(2), Bits: 1}, {P: 0.5, Levels: out(4), Bits: 2}}, 1, 2, true},
		{"stuffing", []linecode.Edge{{P: 0.5, Levels: out(1), Bits: 1}, {P: 0.5, Levels: out(2), Bits: 1}}, 0, 0, false},
		{"an edge that is never taken", []linecode.Edge{{P: 1, Levels: out(1), Bits: 1}, {P: 0, Levels: out(2), Bits: 1}}, 1, 1, true},
		{"start-up apart", []linecode.Edge{{To: 1, P: 1, Levels: out(7), Bits: 1}, {From: 1, To: 1, P: 1, Levels: out(2), Bits: 1}}, 1, 2, true},
	}
	for _, test := range tests {
		bits, symbols, fixed := coder{&linecode.Chain{Name: test.name, States: 2, Edges: test.edges}}.FixedRate()
		if bits != test.bits || symbols != test.symbols || fixed != test.fixed {
			t.Errorf("%s: %d bits in %d symbols, fixed %v; want %d, %d, %v", test.name, bits, symbols, fixed, test.bits, test.symbols, test.fixed)
		}
	}
}
