package generic_test

import (
	stdcmp "cmp"
	"fmt"
	"math"
	stdslices "slices"
	"testing"

	"pgregory.net/rapid"

	"linewright/kernel/cell/generic/cmp"
	"linewright/kernel/cell/generic/maps"
	"linewright/kernel/cell/generic/slices"
)

// outcome is what a function returns, or its panic as a mere fact: the words may differ.
func outcome(f func() any) (s string) {
	defer func() {
		if recover() != nil {
			s = "panic"
		}
	}()
	return fmt.Sprintf("%#v", f())
}

// Every function does what its namesake in the standard library does.
func TestNamesakes(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		small := rapid.SliceOfN(rapid.IntRange(0, 4), 0, 9)
		a, b := small.Draw(t, "a"), small.Draw(t, "b")
		i, j := rapid.IntRange(0, 9).Draw(t, "i"), rapid.IntRange(0, 9).Draw(t, "j")
		odd := func(x int) bool { return x%2 == 1 }
		down := func(x, y int) int { return y/2 - x/2 }
		near := func(x, y int) bool { return x/2 == y/2 }
		with := func(f func(s []int) any) func() any {
			return func() any {
				s := stdslices.Clone(a)
				s = append(s, 8, 9)[:len(s)] // room behind the end
				return []any{f(s), s, s[:cap(s)][:len(s)]}
			}
		}
		for _, c := range []struct {
			name      string
			got, want func(s []int) any
		}{
			{"Insert", func(s []int) any { return slices.Insert(s, i, b...) }, func(s []int) any { return stdslices.Insert(s, i, b...) }},
			{"Insert of itself", func(s []int) any { return slices.Insert(s, i, s...) }, func(s []int) any { return stdslices.Insert(s, i, s...) }},
			{"Delete", func(s []int) any { return slices.Delete(s, i, j) }, func(s []int) any { return stdslices.Delete(s, i, j) }},
			{"DeleteFunc", func(s []int) any { return slices.DeleteFunc(s, odd) }, func(s []int) any { return stdslices.DeleteFunc(s, odd) }},
			{"Replace", func(s []int) any { return slices.Replace(s, i, j, b...) }, func(s []int) any { return stdslices.Replace(s, i, j, b...) }},
			{"Compact", func(s []int) any { return slices.Compact(s) }, func(s []int) any { return stdslices.Compact(s) }},
			{"CompactFunc", func(s []int) any { return slices.CompactFunc(s, near) }, func(s []int) any { return stdslices.CompactFunc(s, near) }},
			{"Compare", func(s []int) any { return slices.Compare(s, b) }, func(s []int) any { return stdslices.Compare(s, b) }},
			{"Equal", func(s []int) any { return slices.Equal(s, b) }, func(s []int) any { return stdslices.Equal(s, b) }},
			{"Index", func(s []int) any { return slices.Index(s, i) }, func(s []int) any { return stdslices.Index(s, i) }},
			{"Concat", func(s []int) any { return slices.Concat(s, b, s) }, func(s []int) any { return stdslices.Concat(s, b, s) }},
			{"Repeat", func(s []int) any { return slices.Repeat(s, i-1) }, func(s []int) any { return stdslices.Repeat(s, i-1) }},
			{"Reverse", func(s []int) any { slices.Reverse(s); return s }, func(s []int) any { stdslices.Reverse(s); return s }},
			{"Sort", func(s []int) any { slices.Sort(s); return s }, func(s []int) any { stdslices.Sort(s); return s }},
			{"SortFunc", func(s []int) any { slices.SortFunc(s, down); return s }, func(s []int) any { stdslices.SortFunc(s, down); return s }},
			{"SortStableFunc", func(s []int) any { slices.SortStableFunc(s, down); return s }, func(s []int) any { stdslices.SortStableFunc(s, down); return s }},
			{"IsSorted", func(s []int) any { return slices.IsSorted(s) }, func(s []int) any { return stdslices.IsSorted(s) }},
			{"Min", func(s []int) any { return slices.Min(s) }, func(s []int) any { return stdslices.Min(s) }},
			{"MaxFunc", func(s []int) any { return slices.MaxFunc(s, down) }, func(s []int) any { return stdslices.MaxFunc(s, down) }},
			{"Chunk", func(s []int) any { return slices.Collect(slices.Chunk(s, i)) }, func(s []int) any { return stdslices.Collect(stdslices.Chunk(s, i)) }},
			{"Sorted", func(s []int) any { return slices.Sorted(slices.Values(s)) }, func(s []int) any { return stdslices.Sorted(stdslices.Values(s)) }},
			{"All", func(s []int) any { return maps.Collect(slices.All(s)) }, func(s []int) any {
				m := map[int]int{}
				for i, v := range s {
					m[i] = v
				}
				return m
			}},
			{"BinarySearch", func(s []int) any { stdslices.Sort(s); i, ok := slices.BinarySearch(s, i); return []any{i, ok} },
				func(s []int) any { stdslices.Sort(s); i, ok := stdslices.BinarySearch(s, i); return []any{i, ok} }},
		} {
			if got, want := outcome(with(c.got)), outcome(with(c.want)); got != want {
				t.Errorf("%s of %v, %v, %d, %d gives %s; the standard library %s", c.name, a, b, i, j, got, want)
			}
		}
	})
}

func TestCompare(t *testing.T) {
	numbers := []float64{math.NaN(), math.Inf(-1), -1, math.Copysign(0, -1), 0, 1, math.Inf(1)}
	for _, x := range numbers {
		for _, y := range numbers {
			if got, want := cmp.Compare(x, y), stdcmp.Compare(x, y); got != want {
				t.Errorf("Compare(%g, %g) = %d; want %d", x, y, got, want)
			}
			if got, want := cmp.Less(x, y), stdcmp.Less(x, y); got != want {
				t.Errorf("Less(%g, %g) = %v; want %v", x, y, got, want)
			}
		}
	}
}
