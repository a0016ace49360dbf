package markov

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"pgregory.net/rapid"
)

// matrix makes a graph from a transition matrix.
func matrix(rows ...[]float64) *Graph {
	n := len(rows)
	return New(n, n*n, func(i int) (int, int, float64) { return i / n, i % n, rows[i/n][i%n] })
}

// walk makes a chain on 0 .. n-1 that steps up with probability up and else down, staying at the ends, or, with
// absorb, never leaving them.
func walk(n int, up float64, absorb bool) *Graph {
	return New(n, 2*n, func(i int) (int, int, float64) {
		s, p, to := i/2, up, i/2+1
		if i%2 == 1 {
			p, to = 1-up, i/2-1
		}
		if absorb && (s == 0 || s == n-1) {
			to = s
		}
		return s, min(max(to, 0), n-1), p
	})
}

// shiftRegister is the chain of a register of k equiprobable bits: every state is equally likely.
func shiftRegister(k int) *Graph {
	n := 1 << k
	return New(n, 2*n, func(i int) (int, int, float64) { return i / 2, (i/2*2 + i%2) % n, 0.5 })
}

func near(t *testing.T, what string, got, want []float64, rel float64) {
	t.Helper()
	if len(got) != len(want) {
		t.Fatalf("%s: %d values, want %d", what, len(got), len(want))
	}
	for i := range got {
		if !(math.Abs(got[i]-want[i]) <= rel*math.Abs(want[i])) {
			t.Errorf("%s[%d] = %.17g, want %.17g", what, i, got[i], want[i])
		}
	}
}

func stationary(t *testing.T, g *Graph) []float64 {
	t.Helper()
	pi, err := g.Stationary(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	return pi
}

func TestStationary(t *testing.T) {
	// The weather in the Land of Oz: Grinstead and Snell, "Introduction to Probability" (1997), example 11.1 (from memory).
	oz := matrix([]float64{.5, .25, .25}, []float64{.5, 0, .5}, []float64{.25, .25, .5})
	near(t, "Oz", stationary(t, oz), []float64{.4, .2, .4}, 1e-15)

	// The urn of P. and T. Ehrenfest, of period 2, is binomial: Feller, "An Introduction to Probability Theory and Its
	// Applications" 1, XV.2(e) and XV.7 (from memory).
	const balls = 40
	urn := New(balls+1, 2*(balls+1), func(i int) (int, int, float64) {
		s := i / 2
		if i%2 == 0 {
			return s, min(s+1, balls), float64(balls-s) / balls
		}
		return s, max(s-1, 0), float64(s) / balls
	})
	want := make([]float64, balls+1)
	want[0] = math.Pow(2, -balls)
	for s := range balls {
		want[s+1] = want[s] * float64(balls-s) / float64(s+1)
	}
	near(t, "urn", stationary(t, urn), want, 1e-13)

	near(t, "one state", stationary(t, matrix([]float64{1})), []float64{1}, 0)
	near(t, "edges in parallel", stationary(t, New(2, 4, func(i int) (int, int, float64) {
		return i / 3, (i/3 + 1) % 2, []float64{.25, .25, .5, 1}[i]
	})), []float64{.5, .5}, 1e-15)
}

// A walk between walls that drifts has a geometric distribution (detailed balance). The smallest probabilities keep
// their digits, and those below the smallest float64 vanish without harm to the others.
func TestStationaryKeepsSmallProbabilities(t *testing.T) {
	pi := stationary(t, walk(300, 0.9, false))
	for s := range 299 {
		if r := pi[s+1] / pi[s]; math.Abs(r-9) > 1e-11 {
			t.Fatalf("pi[%d]/pi[%d] = %.15g, want 9", s+1, s, r)
		}
	}
	pi = stationary(t, walk(5000, 0.9, false))
	near(t, "end", pi[4998:], []float64{8. / 81, 8. / 9}, 1e-11)
	if pi[0] != 0 {
		t.Errorf("pi[0] = %g, want 0: 9^-4999 is no float64", pi[0])
	}
}

func TestStationaryOfLargeChains(t *testing.T) {
	const n = 200000
	ring := New(n, n, func(i int) (int, int, float64) { return i, (i + 1) % n, 1 })
	for s, p := range stationary(t, ring) {
		if math.Abs(p*n-1) > 1e-12 {
			t.Fatalf("ring: pi[%d] = %g, want 1/%d", s, p, n)
		}
	}
	g := shiftRegister(16)
	if _, err := g.eliminated(context.Background()); !errors.Is(err, errFill) {
		t.Fatalf("elimination of a long shift register gave %v; the test should reach the iteration", err)
	}
	for s, p := range stationary(t, g) {
		if math.Abs(p*65536-1) > 1e-9 {
			t.Fatalf("shift register: pi[%d] = %g, want 2^-16", s, p)
		}
	}
}

// Both methods agree on a chain without structure.
func TestIterationAgreesWithElimination(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 2))
	const n = 300
	to := make([]int, 3*n)
	for i := range to {
		to[i] = random.IntN(n)
	}
	g := New(n, 4*n, func(i int) (int, int, float64) {
		if i%4 == 3 {
			return i / 4, (i/4 + 1) % n, 0.1 // a ring, so that all states communicate
		}
		return i / 4, to[i/4*3+i%4], 0.3
	})
	a, err := g.eliminated(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	b, err := g.iterated(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	for s := range a {
		if math.Abs(a[s]-b[s]) > 1e-12 {
			t.Fatalf("pi[%d]: elimination %.17g, iteration %.17g", s, a[s], b[s])
		}
	}
}

func TestIterationRefusesWhatItCannotSettle(t *testing.T) {
	g := matrix([]float64{1 - 1e-9, 1e-9}, []float64{3e-9, 1 - 3e-9})
	if pi, err := g.iterated(context.Background()); err == nil {
		t.Errorf("a chain that moves once in 1e9 steps was said to settle at %v", pi)
	}
	near(t, "by elimination", stationary(t, g), []float64{.75, .25}, 1e-15)
}

func TestAbsorption(t *testing.T) {
	// The drunkard's walk on five corners: Grinstead and Snell, example 11.13 (from memory).
	g := walk(5, 0.5, true)
	closed := g.Closed()
	if want := [][]int{{0}, {4}}; !reflect.DeepEqual(closed, want) {
		t.Fatalf("closed classes %v, want %v", closed, want)
	}
	for s, want := range [][]float64{{1, 0}, {.75, .25}, {.5, .5}, {.25, .75}, {0, 1}} {
		start := make([]float64, 5)
		start[s] = 1
		h, err := g.Absorption(context.Background(), start, closed)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "drunkard", h, want, 1e-15)
	}

	// Gambler's ruin with an unfair coin: Feller 1, XIV.2 (from memory), ruin from z of a with chances p, q:
	// ((q/p)^a - (q/p)^z) / ((q/p)^a - 1).
	const a, z, p = 1001, 100, 0.6
	g = walk(a, p, true)
	start := make([]float64, a)
	start[z] = 1
	h, err := g.Absorption(context.Background(), start, g.Closed())
	if err != nil {
		t.Fatal(err)
	}
	r := (1 - p) / p
	ruin := (math.Pow(r, a-1) - math.Pow(r, z)) / (math.Pow(r, a-1) - 1)
	near(t, "ruin", h, []float64{ruin, 1 - ruin}, 1e-11)
}

// A tree of shift-register states that leads into two absorbing ends: elimination and running the chain agree.
func TestAbsorptionByRunningTheChain(t *testing.T) {
	const k = 6
	n := 1 << k
	g := New(n+2, 3*n+2, func(i int) (int, int, float64) {
		switch {
		case i < 2*n:
			return i / 2, (i/2*2 + i%2) % n, 0.3
		case i < 3*n:
			return i - 2*n, n + (i-2*n)%2, 0.4
		}
		return n + i - 3*n, n + i - 3*n, 1
	})
	start := make([]float64, n+2)
	start[5], start[8] = 0.5, 0.5
	absorbing := make([]bool, n+2)
	absorbing[n], absorbing[n+1] = true, true
	a, err := g.absorbed(context.Background(), start, absorbing)
	if err != nil {
		t.Fatal(err)
	}
	b, err := g.drained(context.Background(), start, absorbing)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "ends", a[n:], b[n:], 1e-14)
	// From 5 = ...101 the next last bits are fair, so only the first step is not: 0.4 to its own parity.
	near(t, "closed form", a[n:], []float64{0.5*0.4 + 0.3, 0.5*0.4 + 0.3}, 1e-14)
}

func TestPeriod(t *testing.T) {
	ring := func(n int, chord ...[2]int) *Graph {
		return New(n, n+len(chord), func(i int) (int, int, float64) {
			if i < n {
				return i, (i + 1) % n, 0.5
			}
			return chord[i-n][0], chord[i-n][1], 0.5
		})
	}
	for _, tt := range []struct {
		g     *Graph
		d     int
		class []int
	}{
		{ring(1), 1, []int{0}},
		{ring(6), 6, []int{0, 1, 2, 3, 4, 5}},
		{ring(6, [2]int{3, 0}), 2, []int{0, 1, 0, 1, 0, 1}},               // cycles of 6 and 4
		{ring(6, [2]int{5, 3}), 3, []int{0, 1, 2, 0, 1, 2}},               // cycles of 6 and 3
		{ring(6, [2]int{2, 2}), 1, []int{0, 0, 0, 0, 0, 0}},               // a loop
		{ring(6, [2]int{3, 0}, [2]int{2, 0}), 1, []int{0, 0, 0, 0, 0, 0}}, // cycles of 6, 4 and 3
	} {
		d, class := tt.g.Period()
		if d != tt.d || !reflect.DeepEqual(class, tt.class) {
			t.Errorf("period %d, classes %v, want %d, %v", d, class, tt.d, tt.class)
		}
	}
}

// Two states share a component when each reaches the other, and edges never lead to a component of a higher number.
func TestComponentsAgainstReachability(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 12).Draw(t, "n")
		ends := rapid.SliceOfN(rapid.IntRange(0, n-1), 0, 40).Draw(t, "ends")
		m := len(ends) / 2
		g := New(n, m, func(i int) (int, int, float64) { return ends[2*i], ends[2*i+1], 1 })
		reach := make([][]bool, n)
		for s := range n {
			start := make([]float64, n)
			start[s] = 1
			reach[s] = g.Reach(start)
		}
		component, count := g.Components()
		numbers := make(map[int]bool)
		for s := range n {
			numbers[component[s]] = true
			for u := range n {
				if (component[s] == component[u]) != (reach[s][u] && reach[u][s]) {
					t.Fatalf("states %d and %d: components %v", s, u, component)
				}
				if reach[s][u] && component[u] > component[s] {
					t.Fatalf("%d reaches %d: components %v", s, u, component)
				}
			}
		}
		if len(numbers) != count {
			t.Fatalf("%d components, numbered %v", count, component)
		}
		inClosed := make([]bool, n)
		for _, class := range g.Closed() {
			for _, s := range class {
				inClosed[s] = true
			}
		}
		for s := range n {
			want := true
			for u := range n {
				want = want && (!reach[s][u] || reach[u][s])
			}
			if inClosed[s] != want {
				t.Fatalf("state %d closed: %v, want %v", s, inClosed[s], want)
			}
		}
	})
}

func TestComponentsOfADeepChain(t *testing.T) {
	const n = 300000
	_, count := New(n, n-1, func(i int) (int, int, float64) { return i, i + 1, 1 }).Components()
	if count != n {
		t.Errorf("%d components in a path of %d states", count, n)
	}
}

func TestSubKeepsTheEdgesAmongItsStates(t *testing.T) {
	g := matrix([]float64{.5, .5, 0}, []float64{0, .25, .75}, []float64{.1, .4, .5})
	sub := g.Sub([]int{2, 1})
	to, p := sub.Row(0)
	if !reflect.DeepEqual(to, []int32{1, 0}) || !reflect.DeepEqual(p, []float64{.4, .5}) {
		t.Errorf("row of state 2: to %v with %v", to, p)
	}
	to, p = sub.Row(1)
	if !reflect.DeepEqual(to, []int32{1, 0}) || !reflect.DeepEqual(p, []float64{.25, .75}) {
		t.Errorf("row of state 1: to %v with %v", to, p)
	}
}

func TestInterrupt(t *testing.T) {
	ctx, cancel := context.WithCancelCause(context.Background())
	stop := errors.New("stop")
	cancel(stop)
	g := shiftRegister(8)
	if _, err := g.Stationary(ctx); !errors.Is(err, stop) {
		t.Errorf("Stationary: %v", err)
	}
	if _, err := g.iterated(ctx); !errors.Is(err, stop) {
		t.Errorf("iteration: %v", err)
	}
	g = walk(50, 0.5, true)
	start := make([]float64, 50)
	start[20] = 1
	if _, err := g.Absorption(ctx, start, g.Closed()); !errors.Is(err, stop) {
		t.Errorf("Absorption: %v", err)
	}
}

// A run of 1s that any 0 ends: state 0 has as many predecessors as there are states. The distribution is geometric.
func TestStationaryWithAHub(t *testing.T) {
	const n = 200000
	pi := stationary(t, New(n, 2*n, func(i int) (int, int, float64) {
		if i%2 == 0 {
			return i / 2, 0, 0.5
		}
		return i / 2, (i/2 + 1) % n, 0.5
	}))
	for s, p := range pi[:1000] {
		if want := math.Pow(0.5, float64(s+1)); math.Abs(p-want) > 1e-12*want {
			t.Fatalf("pi[%d] = %g, want %g", s, p, want)
		}
	}
}
