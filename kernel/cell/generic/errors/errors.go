// Package errors is the generic function of the standard package errors, in a form that the interpreter runs.
package errors

import "errors"

// AsType is errors.AsType.
func AsType[E error](err error) (E, bool) {
	var e E
	ok := errors.As(err, &e)
	return e, ok
}
