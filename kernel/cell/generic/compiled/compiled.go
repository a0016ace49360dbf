// Package compiled holds what the generic packages beside it leave to compiled code.
package compiled

import (
	"fmt"
	"iter"
	"reflect"
	"slices"
	"unsafe"
)

// Sort sorts a slice of numbers or strings, of whatever named type, as slices.Sort does.
func Sort(list any) {
	v := reflect.ValueOf(list)
	switch p, n := v.UnsafePointer(), v.Len(); v.Type().Elem().Kind() {
	case reflect.Int:
		slices.Sort(unsafe.Slice((*int)(p), n))
	case reflect.Int8:
		slices.Sort(unsafe.Slice((*int8)(p), n))
	case reflect.Int16:
		slices.Sort(unsafe.Slice((*int16)(p), n))
	case reflect.Int32:
		slices.Sort(unsafe.Slice((*int32)(p), n))
	case reflect.Int64:
		slices.Sort(unsafe.Slice((*int64)(p), n))
	case reflect.Uint:
		slices.Sort(unsafe.Slice((*uint)(p), n))
	case reflect.Uint8:
		slices.Sort(unsafe.Slice((*uint8)(p), n))
	case reflect.Uint16:
		slices.Sort(unsafe.Slice((*uint16)(p), n))
	case reflect.Uint32:
		slices.Sort(unsafe.Slice((*uint32)(p), n))
	case reflect.Uint64:
		slices.Sort(unsafe.Slice((*uint64)(p), n))
	case reflect.Uintptr:
		slices.Sort(unsafe.Slice((*uintptr)(p), n))
	case reflect.Float32:
		slices.Sort(unsafe.Slice((*float32)(p), n))
	case reflect.Float64:
		slices.Sort(unsafe.Slice((*float64)(p), n))
	case reflect.String:
		slices.Sort(unsafe.Slice((*string)(p), n))
	default:
		panic(fmt.Errorf("slices: cannot sort a %T; want a slice of numbers or strings", list))
	}
}

// Order returns the order in which slices.SortFunc, or slices.SortStableFunc, puts n elements: the indices of the elements.
// Compare compares those of two indices.
func Order(n int, stable bool, compare func(i, j int) int) []int {
	order := make([]int, n)
	for i := range order {
		order[i] = i
	}
	if stable {
		slices.SortStableFunc(order, compare)
	} else {
		slices.SortFunc(order, compare)
	}
	return order
}

// Pull is iter.Pull for a sequence that leaves its values elsewhere. Next reports whether there was one.
func Pull(seq func(yield func() bool)) (next func() bool, stop func()) {
	pull, stop := iter.Pull(func(yield func(struct{}) bool) {
		seq(func() bool { return yield(struct{}{}) })
	})
	return func() bool { _, ok := pull(); return ok }, stop
}
