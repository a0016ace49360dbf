// Package subset cuts a TrueType font down to the glyphs of a few characters, so that a drawing can carry its own
// fonts in some kilobytes.
//
// The tables are those of the OpenType specification 1.9 (ISO/IEC 14496-22). Hints are dropped: a drawing is scaled
// freely and shown with smoothing, where they do nothing. So are kerning and all layout features.
package subset

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"slices"
	"unicode/utf16"

	"golang.org/x/image/font/sfnt"
)

// Cut returns a TrueType font that has the glyphs of the given characters and the "missing glyph" box, under another
// family name. Characters that the font lacks and those beyond U+FFFF are left out. The result depends on nothing but
// the arguments; the order of the characters does not matter.
//
// It refuses fonts without TrueType outlines, for instance those with PostScript outlines.
func Cut(font *sfnt.Font, family string, characters []rune) ([]byte, error) {
	var source bytes.Buffer
	var buf sfnt.Buffer
	if _, err := font.WriteSourceTo(&buf, &source); err != nil {
		return nil, fmt.Errorf("subset: %w", err)
	}
	src, err := open(source.Bytes())
	if err != nil {
		return nil, err
	}

	// New glyph numbers: 0 is the box, then the characters' glyphs in the order of the characters, then what composite
	// glyphs are made of.
	characters = slices.Clone(characters)
	slices.Sort(characters)
	glyphs, number := []uint16{0}, map[uint16]uint16{0: 0}
	add := func(g uint16) uint16 {
		if _, ok := number[g]; !ok {
			number[g] = uint16(len(glyphs))
			glyphs = append(glyphs, g)
		}
		return number[g]
	}
	var cmap []mapping
	for _, r := range slices.Compact(characters) {
		g, err := font.GlyphIndex(&buf, r)
		if err != nil || g == 0 || r > 0xFFFE {
			continue
		}
		cmap = append(cmap, mapping{uint16(r), add(uint16(g))})
	}
	var glyf, loca, hmtx []byte
	for i := 0; i < len(glyphs); i++ { // glyphs grows while composite glyphs are met
		loca = binary.BigEndian.AppendUint32(loca, uint32(len(glyf)))
		outline, err := src.outline(glyphs[i], add)
		if err != nil {
			return nil, err
		}
		glyf = append(glyf, outline...)
		for len(glyf)%4 != 0 {
			glyf = append(glyf, 0)
		}
		metric, err := src.metric(glyphs[i])
		if err != nil {
			return nil, err
		}
		hmtx = append(hmtx, metric...)
	}
	loca = binary.BigEndian.AppendUint32(loca, uint32(len(glyf)))

	head, hhea, maxp := bytes.Clone(src.head), bytes.Clone(src.hhea), bytes.Clone(src.maxp)
	binary.BigEndian.PutUint32(head[8:], 0)                    // checkSumAdjustment, set by assemble
	binary.BigEndian.PutUint16(head[50:], 1)                   // indexToLocFormat: long
	binary.BigEndian.PutUint16(hhea[34:], uint16(len(glyphs))) // numberOfHMetrics
	binary.BigEndian.PutUint16(maxp[4:], uint16(len(glyphs)))
	post := make([]byte, 32)
	binary.BigEndian.PutUint32(post, 0x00030000) // version 3: no glyph names
	return assemble([]table{
		{"OS/2", src.os2}, {"cmap", format4(cmap)}, {"glyf", glyf}, {"head", head}, {"hhea", hhea},
		{"hmtx", hmtx}, {"loca", loca}, {"maxp", maxp}, {"name", names(family)}, {"post", post},
	}), nil
}

// A source is the font that is cut.
type source struct {
	head, hhea, maxp, os2, hmtx, loca, glyf []byte
	long                                    bool // loca has 32-bit offsets
	metrics                                 int  // full entries of hmtx
}

func open(font []byte) (*source, error) {
	if len(font) < 12 {
		return nil, errors.New("subset: the font is shorter than its header")
	}
	tables := map[string][]byte{}
	for i := range int(binary.BigEndian.Uint16(font[4:])) {
		at := 12 + 16*i
		if at+16 > len(font) {
			return nil, errors.New("subset: the font ends within its table directory")
		}
		offset, length := int(binary.BigEndian.Uint32(font[at+8:])), int(binary.BigEndian.Uint32(font[at+12:]))
		if offset > len(font) || length > len(font)-offset {
			return nil, fmt.Errorf("subset: table %q reaches beyond the end of the font", font[at:at+4])
		}
		tables[string(font[at:at+4])] = font[offset : offset+length]
	}
	for tag, least := range map[string]int{"head": 54, "hhea": 36, "maxp": 6, "OS/2": 1, "hmtx": 4, "loca": 4, "glyf": 1} {
		if len(tables[tag]) < least {
			return nil, fmt.Errorf("subset: the font has no whole table %q, so it has no TrueType outlines to cut", tag)
		}
	}
	return &source{
		head: tables["head"], hhea: tables["hhea"], maxp: tables["maxp"], os2: tables["OS/2"],
		hmtx: tables["hmtx"], loca: tables["loca"], glyf: tables["glyf"],
		long:    binary.BigEndian.Uint16(tables["head"][50:]) == 1,
		metrics: int(binary.BigEndian.Uint16(tables["hhea"][34:])),
	}, nil
}

// metric returns the advance and the left bearing of glyph g. The last glyphs of a font may share one advance.
func (s *source) metric(g uint16) ([]byte, error) {
	full, bearing := 4*int(g), 0
	if int(g) >= s.metrics {
		full, bearing = 4*(s.metrics-1), 4*s.metrics+2*(int(g)-s.metrics)
		if bearing+2 > len(s.hmtx) {
			return nil, fmt.Errorf("subset: the font has no metrics for glyph %d", g)
		}
		return append(bytes.Clone(s.hmtx[full:full+2]), s.hmtx[bearing:bearing+2]...), nil
	}
	if full+4 > len(s.hmtx) {
		return nil, fmt.Errorf("subset: the font has no metrics for glyph %d", g)
	}
	return s.hmtx[full : full+4], nil
}

// Flags of a composite glyph's components.
const (
	argumentsAreWords = 1 << 0
	haveScale         = 1 << 3
	moreComponents    = 1 << 5
	haveTwoScales     = 1 << 6
	haveTwoByTwo      = 1 << 7
	haveInstructions  = 1 << 8
)

// outline returns the description of glyph g without its hints; add gives the new number of each component.
func (s *source) outline(g uint16, add func(uint16) uint16) ([]byte, error) {
	bad := func() ([]byte, error) {
		return nil, fmt.Errorf("subset: the font's outline of glyph %d is not whole", g)
	}
	var from, to int
	switch i := int(g); {
	case s.long && 4*i+8 <= len(s.loca):
		from, to = int(binary.BigEndian.Uint32(s.loca[4*i:])), int(binary.BigEndian.Uint32(s.loca[4*i+4:]))
	case !s.long && 2*i+4 <= len(s.loca):
		from, to = 2*int(binary.BigEndian.Uint16(s.loca[2*i:])), 2*int(binary.BigEndian.Uint16(s.loca[2*i+2:]))
	default:
		return bad()
	}
	if from > to || to > len(s.glyf) {
		return bad()
	}
	data := s.glyf[from:to]
	if len(data) == 0 {
		return nil, nil // a blank
	}
	if len(data) < 10 {
		return bad()
	}
	if contours := int(int16(binary.BigEndian.Uint16(data))); contours >= 0 {
		ends := 10 + 2*contours
		if ends+2 > len(data) {
			return bad()
		}
		hints := int(binary.BigEndian.Uint16(data[ends:]))
		if ends+2+hints > len(data) {
			return bad()
		}
		return slices.Concat(data[:ends], []byte{0, 0}, data[ends+2+hints:]), nil
	}
	out := bytes.Clone(data[:10])
	for at := 10; ; {
		if at+4 > len(data) {
			return bad()
		}
		flags := binary.BigEndian.Uint16(data[at:])
		size := 4 + 2
		if flags&argumentsAreWords != 0 {
			size += 2
		}
		switch {
		case flags&haveScale != 0:
			size += 2
		case flags&haveTwoScales != 0:
			size += 4
		case flags&haveTwoByTwo != 0:
			size += 8
		}
		if at+size > len(data) {
			return bad()
		}
		out = binary.BigEndian.AppendUint16(out, flags&^haveInstructions)
		out = binary.BigEndian.AppendUint16(out, add(binary.BigEndian.Uint16(data[at+2:])))
		out = append(out, data[at+4:at+size]...)
		if at += size; flags&moreComponents == 0 {
			return out, nil
		}
	}
}

// A mapping gives a character its glyph.
type mapping struct{ character, glyph uint16 }

// format4 returns a cmap table with one subtable of format 4, for Windows and Unicode's first plane.
func format4(ms []mapping) []byte {
	type segment struct{ start, end, delta uint16 }
	var segments []segment
	for _, m := range ms { // neighbours whose glyphs are neighbours too share a segment
		delta := m.glyph - m.character
		if n := len(segments); n > 0 && segments[n-1].end+1 == m.character && segments[n-1].delta == delta {
			segments[n-1].end = m.character
			continue
		}
		segments = append(segments, segment{m.character, m.character, delta})
	}
	segments = append(segments, segment{0xFFFF, 0xFFFF, 1})
	n := len(segments)
	power, log := 1, 0
	for 2*power <= n {
		power, log = 2*power, log+1
	}
	u16 := binary.BigEndian.AppendUint16
	b := []byte{0, 0, 0, 1, 0, 3, 0, 1, 0, 0, 0, 12} // version 0, one subtable: platform 3, encoding 1, at byte 12
	b = u16(b, 4)
	b = u16(b, uint16(16+8*n))
	b = u16(b, 0)
	b = u16(b, uint16(2*n))
	b = u16(b, uint16(2*power))
	b = u16(b, uint16(log))
	b = u16(b, uint16(2*(n-power)))
	for _, s := range segments {
		b = u16(b, s.end)
	}
	b = u16(b, 0)
	for _, s := range segments {
		b = u16(b, s.start)
	}
	for _, s := range segments {
		b = u16(b, s.delta)
	}
	return append(b, make([]byte, 2*n)...) // idRangeOffset: all by delta
}

// names returns a name table with the family's name alone, in the four places where programs look for it.
func names(family string) []byte {
	var text []byte
	for _, u := range utf16.Encode([]rune(family)) {
		text = binary.BigEndian.AppendUint16(text, u)
	}
	ids := []uint16{1, 3, 4, 6} // family, unique name, full name, PostScript name
	u16 := binary.BigEndian.AppendUint16
	b := u16(nil, 0)
	b = u16(b, uint16(len(ids)))
	b = u16(b, uint16(6+12*len(ids)))
	for _, id := range ids {
		for _, v := range []uint16{3, 1, 0x409, id, uint16(len(text)), 0} {
			b = u16(b, v)
		}
	}
	return append(b, text...)
}

// A table is one table of a font.
type table struct {
	tag  string
	data []byte
}

// assemble writes tables, given in the order of their tags, as a font file.
func assemble(tables []table) []byte {
	n := len(tables)
	power, log := 1, 0
	for 2*power <= n {
		power, log = 2*power, log+1
	}
	u16, u32 := binary.BigEndian.AppendUint16, binary.BigEndian.AppendUint32
	b := u32(nil, 0x00010000)
	b = u16(b, uint16(n))
	b = u16(b, uint16(16*power))
	b = u16(b, uint16(log))
	b = u16(b, uint16(16*(n-power)))
	var body []byte
	head := 0
	for _, t := range tables {
		offset := 12 + 16*n + len(body)
		if t.tag == "head" {
			head = offset
		}
		b = append(b, t.tag...)
		body = append(body, t.data...)
		for len(body)%4 != 0 {
			body = append(body, 0)
		}
		b = u32(b, checksum(body[offset-12-16*n:]))
		b = u32(b, uint32(offset))
		b = u32(b, uint32(len(t.data)))
	}
	b = append(b, body...)
	binary.BigEndian.PutUint32(b[head+8:], 0xB1B0AFBA-checksum(b))
	return b
}

// checksum adds up the 32-bit words of a table whose length is a multiple of four.
func checksum(b []byte) (sum uint32) {
	for ; len(b) >= 4; b = b[4:] {
		sum += binary.BigEndian.Uint32(b)
	}
	return sum
}
