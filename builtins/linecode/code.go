package linecode

import (
	"errors"
	"slices"
	"sync"

	"linewright/builtins/source"
)

// A Code is a line code together with the data that feed it.
type Code struct {
	name      string
	reference string
	machine   *machine
	lsbFirst  bool
	data      source.Model

	mu    sync.Mutex
	joint *Chain // guarded by mu; nil until asked for
}

// errNil is what a method of a nil code says: a maker's error was not looked at.
var errNil = errors.New("linecode: this code is nil; look at the error that New or ByName returned")

// made returns the code. It panics if that is nil.
func (c *Code) made() *Code {
	if c == nil {
		panic(errNil)
	}
	return c
}

// Name returns the code's name.
func (c *Code) Name() string { return c.made().name }

// String returns the code's name.
func (c *Code) String() string { return c.made().name }

// Label returns the code's name and, unless they are equiprobable bits, its data.
func (c *Code) Label() string {
	if c.made().data.String() == source.Random().String() {
		return c.name
	}
	return c.name + ", " + c.data.String()
}

// Reference returns the standard or paper that defines a code of the catalogue, with the convention taken where they
// leave one open; "" for a scripted code.
func (c *Code) Reference() string { return c.made().reference }

// Bits returns the number of source bits per word.
func (c *Code) Bits() int { return c.made().machine.bits }

// States returns the number of states that can be reached from the start, start-up states too.
func (c *Code) States() int { return c.made().machine.states }

// Levels returns the levels that the code's symbols can have, in rising order, without a unit.
func (c *Code) Levels() []float64 { return slices.Clone(c.made().machine.levels) }

// Delay returns the number of symbols that leave the encoder before the first bit's own, and that [Code.Encode] leaves
// out.
func (c *Code) Delay() int { return c.made().machine.delay }

// Source returns the model of the data that feed the code: equiprobable bits unless [Code.Fed] said otherwise.
func (c *Code) Source() source.Model { return c.made().data }

// Fed returns the same code fed other data.
func (c *Code) Fed(data source.Model) *Code {
	c.made()
	return &Code{name: c.name, reference: c.reference, machine: c.machine, lsbFirst: c.lsbFirst, data: data}
}

// LSBFirst returns the same code with the first bit in time in the least significant place of each word, for standards
// that send octets that way. A code that already is so is returned as it is.
func (c *Code) LSBFirst() *Code {
	if c.made().lsbFirst || c.machine.bits == 1 {
		return c
	}
	return &Code{name: c.name + ", LSB first", reference: c.reference, machine: c.machine.reversed(), lsbFirst: true, data: c.data}
}
