// Package slices is the generic code of the standard package slices, in a form that the interpreter runs. Every function does
// what its namesake does; sorting, down to the order of equal elements, is left to the namesake itself.
package slices

import (
	"cmp"
	"iter"

	"linewright/kernel/cell/generic/compiled"
)

// Equal is slices.Equal.
func Equal[S ~[]E, E comparable](s1, s2 S) bool {
	if len(s1) != len(s2) {
		return false
	}
	for i := range s1 {
		if s1[i] != s2[i] {
			return false
		}
	}
	return true
}

// EqualFunc is slices.EqualFunc.
func EqualFunc[S1 ~[]E1, S2 ~[]E2, E1, E2 any](s1 S1, s2 S2, eq func(E1, E2) bool) bool {
	if len(s1) != len(s2) {
		return false
	}
	for i := range s1 {
		if !eq(s1[i], s2[i]) {
			return false
		}
	}
	return true
}

// Compare is slices.Compare.
func Compare[S ~[]E, E cmp.Ordered](s1, s2 S) int { return CompareFunc(s1, s2, cmp.Compare[E]) }

// CompareFunc is slices.CompareFunc.
func CompareFunc[S1 ~[]E1, S2 ~[]E2, E1, E2 any](s1 S1, s2 S2, compare func(E1, E2) int) int {
	for i := range s1 {
		if i >= len(s2) {
			return 1
		}
		if c := compare(s1[i], s2[i]); c != 0 {
			return c
		}
	}
	if len(s1) < len(s2) {
		return -1
	}
	return 0
}

// Index is slices.Index.
func Index[S ~[]E, E comparable](s S, v E) int {
	for i := range s {
		if s[i] == v {
			return i
		}
	}
	return -1
}

// IndexFunc is slices.IndexFunc.
func IndexFunc[S ~[]E, E any](s S, f func(E) bool) int {
	for i := range s {
		if f(s[i]) {
			return i
		}
	}
	return -1
}

// Contains is slices.Contains.
func Contains[S ~[]E, E comparable](s S, v E) bool { return Index(s, v) >= 0 }

// ContainsFunc is slices.ContainsFunc.
func ContainsFunc[S ~[]E, E any](s S, f func(E) bool) bool { return IndexFunc(s, f) >= 0 }

// Insert is slices.Insert.
func Insert[S ~[]E, E any](s S, i int, v ...E) S {
	_ = s[i:]
	if len(v) == 0 {
		return s
	}
	values := append([]E(nil), v...) // v may lie in s, or behind it
	whole := append(s, values...)
	tail := append([]E(nil), s[i:]...)
	copy(whole[i:], values)
	copy(whole[i+len(values):], tail)
	return whole
}

// Delete is slices.Delete.
func Delete[S ~[]E, E any](s S, i, j int) S {
	_ = s[i:j:len(s)]
	if i == j {
		return s
	}
	n := i + copy(s[i:], s[j:])
	clear(s[n:])
	return s[:n]
}

// DeleteFunc is slices.DeleteFunc.
func DeleteFunc[S ~[]E, E any](s S, del func(E) bool) S {
	n := IndexFunc(s, del)
	if n < 0 {
		return s
	}
	for j := n + 1; j < len(s); j++ {
		if v := s[j]; !del(v) {
			s[n] = v
			n++
		}
	}
	clear(s[n:])
	return s[:n]
}

// Replace is slices.Replace.
func Replace[S ~[]E, E any](s S, i, j int, v ...E) S {
	_ = s[i:j]
	tail := append([]E(nil), s[j:]...)
	values := append([]E(nil), v...)
	old := len(s)
	whole := append(append(s[:i], values...), tail...)
	if len(whole) < old {
		clear(s[len(whole):old])
	}
	return whole
}

// Clone is slices.Clone.
func Clone[S ~[]E, E any](s S) S {
	if s == nil {
		return nil
	}
	return append(S{}, s...)
}

// Compact is slices.Compact.
func Compact[S ~[]E, E comparable](s S) S {
	return CompactFunc(s, func(x, y E) bool { return x == y })
}

// CompactFunc is slices.CompactFunc.
func CompactFunc[S ~[]E, E any](s S, eq func(E, E) bool) S {
	if len(s) < 2 {
		return s
	}
	n := 1
	for k := 1; k < len(s); k++ {
		if !eq(s[k], s[k-1]) {
			s[n] = s[k]
			n++
		}
	}
	clear(s[n:])
	return s[:n]
}

// Grow is slices.Grow.
func Grow[S ~[]E, E any](s S, n int) S {
	if n < 0 {
		panic("cannot be negative")
	}
	if n <= cap(s)-len(s) {
		return s
	}
	return append(s, make([]E, n)...)[:len(s)]
}

// Clip is slices.Clip.
func Clip[S ~[]E, E any](s S) S { return s[:len(s):len(s)] }

// Reverse is slices.Reverse.
func Reverse[S ~[]E, E any](s S) {
	for i, j := 0, len(s)-1; i < j; i, j = i+1, j-1 {
		s[i], s[j] = s[j], s[i]
	}
}

// Concat is slices.Concat.
func Concat[S ~[]E, E any](slices ...S) S {
	var all S
	for _, s := range slices {
		all = append(all, s...)
	}
	return all
}

// Repeat is slices.Repeat.
func Repeat[S ~[]E, E any](x S, count int) S {
	if count < 0 {
		panic("cannot be negative")
	}
	all := S{}
	for range count {
		all = append(all, x...)
	}
	return all
}

// Sort is slices.Sort.
func Sort[S ~[]E, E cmp.Ordered](x S) { compiled.Sort([]E(x)) }

// SortFunc is slices.SortFunc.
func SortFunc[S ~[]E, E any](x S, compare func(a, b E) int) { reorder(x, false, compare) }

// SortStableFunc is slices.SortStableFunc.
func SortStableFunc[S ~[]E, E any](x S, compare func(a, b E) int) { reorder(x, true, compare) }

func reorder[S ~[]E, E any](x S, stable bool, compare func(a, b E) int) {
	old := append([]E(nil), x...)
	order := compiled.Order(len(old), stable, func(i, j int) int { return compare(old[i], old[j]) })
	for i, k := range order {
		x[i] = old[k]
	}
}

// IsSorted is slices.IsSorted.
func IsSorted[S ~[]E, E cmp.Ordered](x S) bool { return IsSortedFunc(x, cmp.Compare[E]) }

// IsSortedFunc is slices.IsSortedFunc.
func IsSortedFunc[S ~[]E, E any](x S, compare func(a, b E) int) bool {
	for i := len(x) - 1; i > 0; i-- {
		if compare(x[i], x[i-1]) < 0 {
			return false
		}
	}
	return true
}

// Min is slices.Min.
func Min[S ~[]E, E cmp.Ordered](x S) E {
	if len(x) < 1 {
		panic("slices.Min: empty list")
	}
	m := x[0]
	for i := 1; i < len(x); i++ {
		m = min(m, x[i])
	}
	return m
}

// Max is slices.Max.
func Max[S ~[]E, E cmp.Ordered](x S) E {
	if len(x) < 1 {
		panic("slices.Max: empty list")
	}
	m := x[0]
	for i := 1; i < len(x); i++ {
		m = max(m, x[i])
	}
	return m
}

// MinFunc is slices.MinFunc.
func MinFunc[S ~[]E, E any](x S, compare func(a, b E) int) E {
	if len(x) < 1 {
		panic("slices.MinFunc: empty list")
	}
	m := x[0]
	for i := 1; i < len(x); i++ {
		if compare(x[i], m) < 0 {
			m = x[i]
		}
	}
	return m
}

// MaxFunc is slices.MaxFunc.
func MaxFunc[S ~[]E, E any](x S, compare func(a, b E) int) E {
	if len(x) < 1 {
		panic("slices.MaxFunc: empty list")
	}
	m := x[0]
	for i := 1; i < len(x); i++ {
		if compare(x[i], m) > 0 {
			m = x[i]
		}
	}
	return m
}

// BinarySearch is slices.BinarySearch.
func BinarySearch[S ~[]E, E cmp.Ordered](x S, target E) (int, bool) {
	return BinarySearchFunc(x, target, cmp.Compare[E])
}

// BinarySearchFunc is slices.BinarySearchFunc.
func BinarySearchFunc[S ~[]E, E, T any](x S, target T, compare func(E, T) int) (int, bool) {
	i, j := 0, len(x)
	for i < j {
		h := int(uint(i+j) >> 1)
		if compare(x[h], target) < 0 {
			i = h + 1
		} else {
			j = h
		}
	}
	return i, i < len(x) && compare(x[i], target) == 0
}

// All is slices.All.
func All[Slice ~[]E, E any](s Slice) iter.Seq2[int, E] {
	return func(yield func(int, E) bool) {
		for i, v := range s {
			if !yield(i, v) {
				return
			}
		}
	}
}

// Backward is slices.Backward.
func Backward[Slice ~[]E, E any](s Slice) iter.Seq2[int, E] {
	return func(yield func(int, E) bool) {
		for i := len(s) - 1; i >= 0; i-- {
			if !yield(i, s[i]) {
				return
			}
		}
	}
}

// Values is slices.Values.
func Values[Slice ~[]E, E any](s Slice) iter.Seq[E] {
	return func(yield func(E) bool) {
		for _, v := range s {
			if !yield(v) {
				return
			}
		}
	}
}

// AppendSeq is slices.AppendSeq.
func AppendSeq[Slice ~[]E, E any](s Slice, seq iter.Seq[E]) Slice {
	seq(func(v E) bool {
		s = append(s, v)
		return true
	})
	return s
}

// Collect is slices.Collect.
func Collect[E any](seq iter.Seq[E]) []E { return AppendSeq([]E(nil), seq) }

// Sorted is slices.Sorted.
func Sorted[E cmp.Ordered](seq iter.Seq[E]) []E {
	s := Collect(seq)
	Sort(s)
	return s
}

// SortedFunc is slices.SortedFunc.
func SortedFunc[E any](seq iter.Seq[E], compare func(E, E) int) []E {
	s := Collect(seq)
	SortFunc(s, compare)
	return s
}

// SortedStableFunc is slices.SortedStableFunc.
func SortedStableFunc[E any](seq iter.Seq[E], compare func(E, E) int) []E {
	s := Collect(seq)
	SortStableFunc(s, compare)
	return s
}

// Chunk is slices.Chunk.
func Chunk[Slice ~[]E, E any](s Slice, n int) iter.Seq[Slice] {
	if n < 1 {
		panic("cannot be less than 1")
	}
	return func(yield func(Slice) bool) {
		for i := 0; i < len(s); i += n {
			end := i + min(n, len(s)-i)
			if !yield(s[i:end:end]) {
				return
			}
		}
	}
}
