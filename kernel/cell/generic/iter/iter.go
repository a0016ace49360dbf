// Package iter is the generic code of the standard package iter, in a form that the interpreter runs.
package iter

import (
	"iter"

	"linewright/kernel/cell/generic/compiled"
)

// Pull is iter.Pull.
func Pull[V any](seq iter.Seq[V]) (next func() (V, bool), stop func()) {
	var v V
	more, end := compiled.Pull(func(yield func() bool) {
		seq(func(x V) bool {
			v = x
			return yield()
		})
	})
	return func() (V, bool) {
		if more() {
			return v, true
		}
		var none V
		return none, false
	}, end
}

// Pull2 is iter.Pull2.
func Pull2[K, V any](seq iter.Seq2[K, V]) (next func() (K, V, bool), stop func()) {
	var k K
	var v V
	more, end := compiled.Pull(func(yield func() bool) {
		seq(func(x K, y V) bool {
			k, v = x, y
			return yield()
		})
	})
	return func() (K, V, bool) {
		if more() {
			return k, v, true
		}
		var noKey K
		var none V
		return noKey, none, false
	}, end
}
