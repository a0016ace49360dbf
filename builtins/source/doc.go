// Package source describes the data that a code carries: statistical models, from which spectra and rates follow
// exactly, and bit sequences for simulation and test.
//
//	source.Biased(0.7)                            // independent bits, P(1) = 0.7
//	source.Markov(0.1, 0.4)                       // P(1 after 0) = 0.1, P(0 after 1) = 0.4
//	source.Repeating(source.PRBS(7).Bits(127))    // a test pattern, for ever
//	source.Octets(frame, source.LSBFirst)         // the bits of a frame, one a byte
//
// Bits are bytes of value 0 or 1, the first in time first.
package source
