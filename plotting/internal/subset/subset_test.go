package subset

import (
	"bytes"
	"encoding/binary"
	"testing"

	"codeberg.org/go-fonts/liberation/liberationsansbold"
	"codeberg.org/go-fonts/liberation/liberationsansregular"
	"github.com/google/go-cmp/cmp"
	"golang.org/x/image/font"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
)

// characters holds plain letters, composite glyphs (Ä, é), a blank and signs from far apart.
const characters = "AMI 2.048 Mbit/s: V²/Hz, Äé µΩ − ×·"

// TestCutKeepsGlyphs reads a cut font with the parser of golang.org/x/image, as the independent judge: every character
// keeps its outline and its advance.
func TestCutKeepsGlyphs(t *testing.T) {
	for name, ttf := range map[string][]byte{"regular": liberationsansregular.TTF, "bold": liberationsansbold.TTF} {
		t.Run(name, func(t *testing.T) {
			whole, err := sfnt.Parse(ttf)
			if err != nil {
				t.Fatal(err)
			}
			small, err := Cut(whole, "lw-test", []rune(characters))
			if err != nil {
				t.Fatal(err)
			}
			if len(small) > 10_000 {
				t.Errorf("%d characters take %d bytes, want at most 10 kB", len([]rune(characters)), len(small))
			}
			cut, err := sfnt.Parse(small)
			if err != nil {
				t.Fatalf("the cut font does not parse: %v", err)
			}
			if got, err := cut.Name(nil, sfnt.NameIDFamily); err != nil || got != "lw-test" {
				t.Errorf("family %q, %v; want lw-test", got, err)
			}
			ppem := fixed.Int26_6(whole.UnitsPerEm())
			for _, r := range characters {
				a, b := glyph(t, whole, r), glyph(t, cut, r)
				if b == 0 {
					t.Errorf("%q is missing", r)
					continue
				}
				if diff := cmp.Diff(outline(t, whole, a, ppem), outline(t, cut, b, ppem)); diff != "" {
					t.Errorf("outline of %q (-whole +cut):\n%s", r, diff)
				}
				wa, _ := whole.GlyphAdvance(nil, a, ppem, font.HintingNone)
				wb, err := cut.GlyphAdvance(nil, b, ppem, font.HintingNone)
				if err != nil || wa != wb {
					t.Errorf("advance of %q is %v, %v; want %v", r, wb, err, wa)
				}
			}
			if g := glyph(t, cut, 'Z'); g != 0 {
				t.Errorf("Z was not asked for and has glyph %d", g)
			}
		})
	}
}

func glyph(t *testing.T, f *sfnt.Font, r rune) sfnt.GlyphIndex {
	t.Helper()
	g, err := f.GlyphIndex(nil, r)
	if err != nil {
		t.Fatalf("%q: %v", r, err)
	}
	return g
}

func outline(t *testing.T, f *sfnt.Font, g sfnt.GlyphIndex, ppem fixed.Int26_6) sfnt.Segments {
	t.Helper()
	var buf sfnt.Buffer
	s, err := f.LoadGlyph(&buf, g, ppem, nil)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// TestCutSums checks the sums that the OpenType specification prescribes ("Calculating checksums"): each table's own,
// and 0xB1B0AFBA for the whole font.
func TestCutSums(t *testing.T) {
	whole, err := sfnt.Parse(liberationsansregular.TTF)
	if err != nil {
		t.Fatal(err)
	}
	b, err := Cut(whole, "lw-test", []rune(characters))
	if err != nil {
		t.Fatal(err)
	}
	if got := checksum(b); got != 0xB1B0AFBA {
		t.Errorf("the font's sum is %#x, want 0xB1B0AFBA", got)
	}
	for i := range int(binary.BigEndian.Uint16(b[4:])) {
		e := b[12+16*i:]
		offset, length := binary.BigEndian.Uint32(e[8:]), binary.BigEndian.Uint32(e[12:])
		data := bytes.Clone(b[offset : (offset+length+3)&^3])
		if string(e[:4]) == "head" {
			binary.BigEndian.PutUint32(data[8:], 0)
		}
		if got, want := checksum(data), binary.BigEndian.Uint32(e[4:]); got != want {
			t.Errorf("table %s: sum %#x, the directory says %#x", e[:4], got, want)
		}
	}
}

// TestCutIsStable: neither order nor repetition of the characters changes a byte.
func TestCutIsStable(t *testing.T) {
	whole, err := sfnt.Parse(liberationsansregular.TTF)
	if err != nil {
		t.Fatal(err)
	}
	a, err := Cut(whole, "lw", []rune("HDB3"))
	if err != nil {
		t.Fatal(err)
	}
	b, err := Cut(whole, "lw", []rune("3BBDHH\U0001F600"))
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(a, b) {
		t.Error("the same characters in another order give another font")
	}
}

// TestOpenRefuses feeds broken fonts to the reader: it says what is wrong and does not panic.
func TestOpenRefuses(t *testing.T) {
	ttf := liberationsansregular.TTF
	for name, b := range map[string][]byte{
		"empty":               {},
		"header only":         ttf[:12],
		"cut directory":       ttf[:40],
		"cut tables":          ttf[:2000],
		"no TrueType outline": append(append([]byte("OTTO\x00\x01"), make([]byte, 6)...), append([]byte("CFF "), make([]byte, 12)...)...),
	} {
		if _, err := open(b); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}
