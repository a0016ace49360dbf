// Package linecode has line codes as finite-state encoders: a catalogue of the trade's, scripted ones of the user's own,
// and what can be said of each exactly.
//
// A code reads its source bits in words of a fixed number of bits, the first bit in time in the most significant place.
// For each word its encoder emits symbols, any number of them and also none, and goes to another state:
//
//	ami := linecode.AMI()
//	sym, err := ami.Encode([]byte{1, 0, 1})     // 1 0 -1
//	bits, faults, err := ami.Decode(sym)        // 1 0 1, no faults
//	own, err := linecode.New(linecode.Spec{...}) // a code of one's own
//
// The encoder is enumerated once, when the code is made; everything after that works on its tables. Symbols are levels
// without a unit, equally spaced in time; package pulse turns them into volts. A [Code] does not change once it is made
// and may be used by several goroutines.
package linecode
