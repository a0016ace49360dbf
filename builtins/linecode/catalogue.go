package linecode

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// A definition is one code of the catalogue: the one place that says what it is.
type definition struct {
	name string
	// reference is the standard or paper that defines the code, and the convention taken where that leaves one open.
	// "From memory" marks a source that was not at hand when the definition was written, "as quoted elsewhere" one that
	// was seen second hand.
	reference string
	spec      func() Spec // without the name
}

// definitions is the catalogue, in the order in which [Names] lists it. A code with a parameter stands with the value
// that is most in use.
var definitions = []definition{
	{"unipolar NRZ", "common practice: a 1 is the level 1 for the whole bit, a 0 is 0 (on-off keying)", func() Spec {
		return memoryless(1, []float64{0}, []float64{1})
	}},
	{"polar NRZ", "NRZ-L of IRIG 106 chapter 4 (from memory): a 1 is +1 for the whole bit, a 0 is -1", func() Spec {
		return memoryless(1, []float64{-1}, []float64{1})
	}},
	{"NRZ-M", "IRIG 106 chapter 4 (from memory): a 1 is a change of level at the start of the bit, a 0 is none; the line starts at -1", func() Spec {
		return differential(1)
	}},
	{"NRZ-S", "IRIG 106 chapter 4 (from memory): a 0 is a change of level at the start of the bit, a 1 is none; the line starts at -1", func() Spec {
		return differential(0)
	}},
	{"unipolar RZ 50 %", "RZ of IRIG 106 chapter 4 (from memory): a 1 is the level 1 for the first half of the bit, then 0; a 0 is 0", func() Spec {
		return returnToZero(0, 1, 2)
	}},
	{"polar RZ 50 %", "common practice: a 1 is +1, a 0 is -1 for the first half of the bit, then 0", func() Spec {
		return returnToZero(-1, 1, 2)
	}},
	{"AMI", "alternate mark inversion, ITU-T G.701 and G.703 (from memory): a 0 is 0, 1s are +1 and -1 by turns, the first +1", func() Spec {
		return alternating(1)
	}},
	{"pseudoternary", "ITU-T I.430 (from memory): a 1 is 0, 0s are +1 and -1 by turns, the first +1. Part of the trade calls AMI pseudoternary", func() Spec {
		return alternating(0)
	}},
	{"biphase-L", "IRIG 106 chapter 4 (from memory): a 1 is +1 then -1, a 0 is -1 then +1, half a bit each. IEEE 802.3 has it the other way round", func() Spec {
		return memoryless(1, []float64{-1, 1}, []float64{1, -1})
	}},
	{"Manchester 802.3", "IEEE 802.3 clause 7 (from memory): a 1 is -1 then +1, a 0 is +1 then -1, half a bit each; biphase-L of IRIG 106 has it the other way round", func() Spec {
		return memoryless(1, []float64{1, -1}, []float64{-1, 1})
	}},
	{"biphase-M", "the trade's FM1: a change of level at the start of every bit, a 1 changes in its middle too; the line starts at -1. Editions of IRIG 106 differ by half a bit in what they call bi-phase-M (note 2 of figure 4-1 in 106-99)", func() Spec {
		return biphaseMarked(1)
	}},
	{"biphase-S", "the trade's FM0: a change of level at the start of every bit, a 0 changes in its middle too; the line starts at -1. Editions of IRIG 106 differ by half a bit in what they call bi-phase-S (note 2 of figure 4-1 in 106-99)", func() Spec {
		return biphaseMarked(0)
	}},
	{"delay modulation", "M. Hecht and A. Guida, Proc. IEEE 57 (1969) 1314 (from memory): a 1 changes level in its middle, a 0 after a 0 at its start; the line starts at -1, after a 1", delayModulation},
	{"CMI", "ITU-T G.703 Annex A (as quoted elsewhere): a 0 is -1 then +1, half a bit each; 1s are -1 and +1 by turns for the whole bit, the first -1", codedMarkInversion},
	{"HDB3", "ITU-T G.703 Annex A (as quoted elsewhere): AMI with four 0s as 000V or B00V, so that the violations V alternate; the first mark is +1, and no mark before the first violation counts as an even number, B00V", hdb3},
	{"MLT-3", "ANSI X3.263 and IEEE 802.3 clause 25 (from memory): a 1 goes on to the next of 0, +1, 0, -1, a 0 stays; the line starts at 0 before +1", multiLevelTransmit},
	{"2B1Q", "ANSI T1.601 (as quoted elsewhere): 10 is +3, 11 is +1, 01 is -1, 00 is -3", func() Spec {
		return memoryless(2, []float64{-3}, []float64{-1}, []float64{3}, []float64{1})
	}},
	{"4B5B", "ANSI X3.166 and IEEE 802.3 clause 24 (code groups as a transceiver's data sheet prints them): data symbols 0 to F, sent as NRZ-M; the line starts at -1", code4B5B},
	{"8b/10b", "A. X. Widmer and P. A. Franaszek, IBM J. Res. Dev. 27 (1983) 440, and IEEE 802.3 clause 36 (tables from memory, confirmed by a second copy): data characters; the octet is the word HGFEDCBA, the symbols leave as abcdei fghj, the running disparity starts negative", code8b10b},
	{"bit stuffing 5", "common practice: polar NRZ with a 0 inserted after every five 1s", func() Spec {
		return stuffing(5, false)
	}},
	{"HDLC", "ISO/IEC 13239 (from memory): a 0 inserted after every five 1s, sent as NRZ-S; flags and framing are not part of it; the line starts at -1", func() Spec {
		return stuffing(5, true)
	}},
}

// Names returns the names of the catalogue's codes, in its order.
func Names() []string {
	names := make([]string, len(definitions))
	for i, d := range definitions {
		names[i] = d.name
	}
	return names
}

// ByName returns the code of the catalogue with that name. Case, spaces and hyphens do not matter. An unknown name is an
// error that names the codes nearest to it.
func ByName(name string) (*Code, error) {
	i := slices.IndexFunc(definitions, func(d definition) bool { return plain(d.name) == plain(name) })
	if i < 0 {
		return nil, fmt.Errorf("linecode: no code is named %q; %s", name, suggestion(name))
	}
	return build(definitions[i]), nil
}

// plain is a name without what writers differ in.
func plain(name string) string {
	return strings.Map(func(r rune) rune {
		if strings.ContainsRune(" -_/.%", r) {
			return -1
		}
		return r
	}, strings.ToLower(name))
}

// suggestion names the codes that an unknown name may mean, or all.
func suggestion(name string) string {
	best, near := 3, []string(nil) // more than two letters wrong is another word
	for _, d := range definitions {
		distance := editDistance(plain(name), plain(d.name))
		if strings.Contains(plain(d.name), plain(name)) && plain(name) != "" {
			distance = min(distance, 1)
		}
		switch {
		case distance < best:
			best, near = distance, []string{d.name}
		case distance == best && best < 3:
			near = append(near, d.name)
		}
	}
	if near != nil {
		return "perhaps " + strings.Join(near, " or ")
	}
	return "the names are " + strings.Join(Names(), ", ")
}

// editDistance is the number of letters to insert, delete or replace that makes b of a (V. I. Levenshtein, 1966).
func editDistance(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		diagonal := row[0]
		row[0] = i + 1
		for j := range len(b) {
			d := diagonal
			if a[i] != b[j] {
				d = 1 + min(diagonal, row[j], row[j+1])
			}
			diagonal, row[j+1] = row[j+1], d
		}
	}
	return row[len(b)]
}

// catalogued returns the catalogue's code of that exact name.
func catalogued(name string) *Code {
	return build(definitions[slices.IndexFunc(definitions, func(d definition) bool { return d.name == name })])
}

// build makes the code of a definition. It panics when the running cell is interrupted meanwhile.
func build(d definition) *Code {
	spec := d.spec()
	spec.Name = d.name
	c, err := New(spec)
	if err != nil {
		panic(err)
	}
	c.reference = d.reference
	return c
}

// UnipolarNRZ returns unipolar non-return-to-zero, on-off keying: a 1 is the level 1, a 0 is 0.
func UnipolarNRZ() *Code { return catalogued("unipolar NRZ") }

// PolarNRZ returns polar non-return-to-zero (NRZ-L): a 1 is +1, a 0 is -1.
func PolarNRZ() *Code { return catalogued("polar NRZ") }

// NRZM returns NRZ-M: a 1 is a change of level, a 0 is none. Part of the trade calls it NRZI.
func NRZM() *Code { return catalogued("NRZ-M") }

// NRZS returns NRZ-S: a 0 is a change of level, a 1 is none. Part of the trade calls it NRZI.
func NRZS() *Code { return catalogued("NRZ-S") }

// UnipolarRZ returns unipolar return-to-zero: a 1 is the level 1 for the part duty of the bit, then 0; a 0 is 0. The
// bit is divided into n symbols of which the first k carry the pulse, so duty is k/n with n up to 16; it panics on
// others, which are a matter of the pulse's shape: UnipolarNRZ with pulse.Rect(duty).
func UnipolarRZ(duty float64) *Code { return rz("unipolar RZ", duty, 0) }

// PolarRZ returns polar return-to-zero: a 1 is +1 and a 0 is -1 for the part duty of the bit, then 0. For duty see
// [UnipolarRZ].
func PolarRZ(duty float64) *Code { return rz("polar RZ", duty, -1) }

func rz(name string, duty, zero float64) *Code {
	k, n, ok := fraction(duty)
	if !ok {
		panic(fmt.Errorf("linecode: %s with duty %v; give k/n above 0 and up to 1 with n up to %d, or an NRZ code and pulse.Rect(%v)", name, duty, maxDivision, duty))
	}
	d := definition{fmt.Sprintf("%s %.4g %%", name, 100*duty), fmt.Sprintf("common practice: a 1 is +1, a 0 is %v for the first %d of %d parts of the bit, then 0", zero, k, n),
		func() Spec { return returnToZero(zero, k, n) }}
	if i := slices.IndexFunc(definitions, func(c definition) bool { return c.name == d.name }); i >= 0 {
		d = definitions[i]
	}
	return build(d)
}

// maxDivision is the largest number of symbols that a bit is divided into.
const maxDivision = 16

// fraction returns duty as k/n in lowest terms, n up to maxDivision.
func fraction(duty float64) (k, n int, ok bool) {
	for n := 1; n <= maxDivision; n++ {
		k := math.Round(duty * float64(n))
		if k >= 1 && k <= float64(n) && math.Abs(k/float64(n)-duty) <= 1e-12 {
			return int(k), n, true
		}
	}
	return 0, 0, false
}

// AMI returns alternate mark inversion: a 0 is 0, 1s are +1 and -1 by turns.
func AMI() *Code { return catalogued("AMI") }

// Pseudoternary returns the code of ITU-T I.430: a 1 is 0, 0s are +1 and -1 by turns. Part of the trade uses the word
// for [AMI].
func Pseudoternary() *Code { return catalogued("pseudoternary") }

// BiphaseL returns biphase-L in the convention of IRIG 106: a 1 is high then low. See [Manchester8023] for the other.
func BiphaseL() *Code { return catalogued("biphase-L") }

// Manchester8023 returns biphase-L in the convention of IEEE 802.3: a 1 is low then high.
func Manchester8023() *Code { return catalogued("Manchester 802.3") }

// BiphaseM returns biphase-M: the level changes at the start of every bit, and in the middle of a 1. Some editions of
// IRIG 106 have the sure change in the middle instead, which is the same half a bit later.
func BiphaseM() *Code { return catalogued("biphase-M") }

// BiphaseS returns biphase-S: the level changes at the start of every bit, and in the middle of a 0.
func BiphaseS() *Code { return catalogued("biphase-S") }

// DelayModulation returns delay modulation, which part of the trade names after Miller or calls MFM: the level changes
// in the middle of a 1, and between two 0s.
func DelayModulation() *Code { return catalogued("delay modulation") }

// CMI returns coded mark inversion: a 0 is low then high, 1s are low and high by turns.
func CMI() *Code { return catalogued("CMI") }

// HDB3 returns high density bipolar of order 3. It answers one symbol a bit, in place.
func HDB3() *Code { return catalogued("HDB3") }

// MLT3 returns multi-level transmit with three levels: a 1 goes on to the next of 0, +1, 0, -1.
func MLT3() *Code { return catalogued("MLT-3") }

// Code2B1Q returns 2B1Q with its quaternary symbols -3, -1, +1, +3.
func Code2B1Q() *Code { return catalogued("2B1Q") }

// Code4B5B returns the data symbols of 4B5B, sent as NRZ-M.
func Code4B5B() *Code { return catalogued("4B5B") }

// Code8b10b returns the data characters of 8b/10b. A word is an octet HGFEDCBA, so D10.2 is 0x4A.
func Code8b10b() *Code { return catalogued("8b/10b") }

// BitStuffing returns polar NRZ with a 0 inserted after every run of ones 1s. It panics unless ones is from 1 to 1000.
func BitStuffing(ones int) *Code {
	if ones < 1 || ones > 1000 {
		panic(fmt.Errorf("linecode: BitStuffing(%d); a 0 is inserted after 1 to 1000 1s", ones))
	}
	d := definition{fmt.Sprintf("bit stuffing %d", ones), fmt.Sprintf("common practice: polar NRZ with a 0 inserted after every %d 1s", ones),
		func() Spec { return stuffing(ones, false) }}
	if i := slices.IndexFunc(definitions, func(c definition) bool { return c.name == d.name }); i >= 0 {
		d = definitions[i]
	}
	return build(d)
}

// HDLC returns the zero insertion of HDLC, a 0 after every five 1s, sent as NRZ-S.
func HDLC() *Code { return catalogued("HDLC") }
