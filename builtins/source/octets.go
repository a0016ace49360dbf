package source

import "fmt"

// BitOrder says which bit of an octet is first on the line. It has no default: standards differ.
type BitOrder int

const (
	LSBFirst BitOrder = iota + 1 // the least significant bit first, as on Ethernet and in HDLC
	MSBFirst                     // the most significant bit first, as in SDH and in the octets of ITU-T G.704
)

// Octets returns the bits of b in the order of time, eight an octet, one a byte. It panics if order is neither
// [LSBFirst] nor [MSBFirst].
func Octets(b []byte, order BitOrder) []byte {
	if order != LSBFirst && order != MSBFirst {
		panic(fmt.Errorf("source: Octets got bit order %d; say source.LSBFirst or source.MSBFirst, as the line's standard has it", order))
	}
	bits := make([]byte, 0, 8*len(b))
	for _, octet := range b {
		for k := range 8 {
			if order == MSBFirst {
				k = 7 - k
			}
			bits = append(bits, octet>>k&1)
		}
	}
	return bits
}
