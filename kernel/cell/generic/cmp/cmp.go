// Package cmp is the generic code of the standard package cmp, in a form that the interpreter runs.
package cmp

import "cmp"

// Less is cmp.Less.
func Less[T cmp.Ordered](x, y T) bool { return x != x && y == y || x < y }

// Compare is cmp.Compare.
func Compare[T cmp.Ordered](x, y T) int {
	switch {
	case x < y:
		return -1
	case x > y:
		return 1
	case x == y:
		return 0
	case x == x:
		return 1 // y is not a number
	case y == y:
		return -1
	}
	return 0
}

// Or is cmp.Or.
func Or[T comparable](vals ...T) T {
	var zero T
	for _, v := range vals {
		if v != zero {
			return v
		}
	}
	return zero
}
