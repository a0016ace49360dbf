// Package rand is the generic function of the standard package math/rand/v2, in a form that the interpreter runs.
package rand

import random "math/rand/v2"

// N is rand.N.
func N[Int interface {
	~int | ~int8 | ~int16 | ~int32 | ~int64 | ~uint | ~uint8 | ~uint16 | ~uint32 | ~uint64 | ~uintptr
}](n Int) Int {
	if n <= 0 {
		panic("invalid argument to N")
	}
	return Int(random.Uint64N(uint64(n)))
}
