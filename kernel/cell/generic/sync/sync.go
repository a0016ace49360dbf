// Package sync is the generic functions of the standard package sync, in a form that the interpreter runs.
package sync

import "sync"

// OnceValue is sync.OnceValue.
func OnceValue[T any](f func() T) func() T {
	var v T
	once := sync.OnceFunc(func() { v = f() })
	return func() T {
		once()
		return v
	}
}

// OnceValues is sync.OnceValues.
func OnceValues[T1, T2 any](f func() (T1, T2)) func() (T1, T2) {
	var v T1
	var w T2
	once := sync.OnceFunc(func() { v, w = f() })
	return func() (T1, T2) {
		once()
		return v, w
	}
}
