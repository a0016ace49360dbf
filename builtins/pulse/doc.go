// Package pulse turns symbols into volts: the shapes that pulses have, each with its exact Fourier transform, and the
// train that places one pulse a symbol.
//
// Time is counted in symbols: x = t/T from the start of the symbol, where T is the symbol period; frequency is
// counted in symbol rates: nu = f T. Every [Shape] is a sum of pieces
//
//	Re[(c0 + c1 (x-a)/(b-a)) exp(s (x-a))],  a <= x < b,  c0, c1 and s complex,
//
// so rectangles, straight lines, sines, raised cosines and exponentials are all of one kind, and the transform, the
// moments and the overlap of any two shapes have closed forms (piece.go).
package pulse
