package linecode

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"reflect"
	"strings"
	"testing"

	"linewright/builtins/source"
)

// A reference is one definition of testdata/reference.json: codes as state tables with figures that an independent
// program worked out, by at least two methods each. Where a definition is from is said in ReferenceSource.
type reference struct {
	ID              string
	ReferenceSource string `json:"reference_source"`
	Definition      struct {
		M, N int
		Next [][]int
		Out  [][][]float64
	}
	Source struct {
		Type     string
		P1       float64
		P01, P10 float64
		Bits     []byte
	}
	Chain *struct {
		States, Edges    int
		RecurrentClasses []struct {
			States, Period int
			AbsorptionProb float64 `json:"absorption_prob"`
		} `json:"recurrent_classes"`
	}
	BitsPerSymbol    float64 `json:"bits_per_symbol"`
	MeanSquareSymbol float64 `json:"mean_square_symbol"`
	Symbols          []float64
}

func references(t testing.TB) map[string]reference {
	t.Helper()
	text, err := os.ReadFile("testdata/reference.json")
	if err != nil {
		t.Fatal(err)
	}
	var list []reference
	if err := json.Unmarshal(text, &list); err != nil {
		t.Fatal(err)
	}
	byID := make(map[string]reference)
	for _, r := range list {
		byID[r.ID] = r
	}
	return byID
}

// spec returns the definition as a scripted code.
func (r reference) spec() Spec {
	return Spec{Name: r.ID, Bits: r.Definition.M, Start: 0, Step: func(s any, w uint) (any, []float64) {
		return r.Definition.Next[s.(int)][w], r.Definition.Out[s.(int)][w]
	}}
}

func (r reference) data() source.Model {
	switch r.Source.Type {
	case "markov1":
		return source.Markov(r.Source.P01, r.Source.P10)
	case "periodic":
		return source.Repeating(r.Source.Bits)
	}
	return source.Biased(r.Source.P1)
}

// The catalogue's codes send what the reference definitions send, or, where a line starts at the other level, its
// negative.
func TestCatalogueAgainstReferenceDefinitions(t *testing.T) {
	byID := references(t)
	for id, tt := range map[string]struct {
		code *Code
		sign float64
	}{
		"nrz_p50":           {PolarNRZ(), 1},
		"unipolar_p50":      {UnipolarNRZ(), 1},
		"unipolar_rz50_p50": {UnipolarNRZ(), 1},
		"nrzi_p50":          {NRZM(), -1},
		"ami_p50":           {AMI(), 1},
		"biphase_l_p50":     {BiphaseL(), 1},
		"biphase_m_p50":     {BiphaseM(), -1},
		"biphase_s_p70":     {BiphaseS(), -1},
		"miller_p50":        {DelayModulation(), -1},
		"cmi_p50":           {CMI(), 1},
		"mlt3_p50":          {MLT3(), 1},
		"2b1q":              {Code2B1Q(), 1},
		"hdb3_p50":          {HDB3(), 1},
		"4b5b_nrzi":         {Code4B5B(), -1},
		"8b10b_p50":         {Code8b10b(), 1},
	} {
		r, ok := byID[id]
		if !ok {
			t.Fatalf("no reference %s", id)
		}
		if got, want := tt.code.States(), r.Chain.States; got != want {
			t.Errorf("%s: %d states, want %d", id, got, want)
		}
		// The raw machines, without HDB3's delay line taken out.
		raw := func(c *Code) []float64 {
			m := c.machine
			var sym []float64
			bits := source.Random().Bits(4000*m.bits, 1)
			s := 0
			for i := 0; i < len(bits); i += m.bits {
				w := 0
				for _, b := range bits[i : i+m.bits] {
					w = w<<1 | int(b)
				}
				sym = append(sym, m.outputs.levelsOf(m.output[s<<m.bits|w])...)
				s = int(m.next[s<<m.bits|w])
			}
			return sym
		}
		want := raw(must(t, r.spec()))
		for i := range want {
			want[i] *= tt.sign
		}
		if got := raw(tt.code); !reflect.DeepEqual(got, want) {
			t.Errorf("%s is not the definition of %s (%s)", tt.code, id, r.ReferenceSource)
		}
	}
}

// Scripted codes of the reference definitions have the reference's states, edges, rates, classes and mean squares.
func TestReferenceFigures(t *testing.T) {
	for id, r := range references(t) {
		c := must(t, r.spec()).Fed(r.data())
		if r.Source.Type == "periodic" {
			sym, err := c.Encode(r.Source.Bits)
			wantEqual(t, id, sym, r.Symbols[:len(sym)])
			if err != nil {
				t.Error(err)
			}
			continue
		}
		chain := c.Chain()
		if chain.States != r.Chain.States || len(chain.Edges) != r.Chain.Edges {
			t.Errorf("%s: %d states and %d edges, want %d and %d", id, chain.States, len(chain.Edges), r.Chain.States, r.Chain.Edges)
		}
		near(t, id+": rate", c.Rate(), r.BitsPerSymbol, 1e-15)
		g := chain.graph()
		closed := g.Closed()
		if len(closed) != len(r.Chain.RecurrentClasses) {
			t.Fatalf("%s: %d closed classes", id, len(closed))
		}
		for i, class := range closed {
			sub := g.Sub(class)
			period, _ := sub.Period()
			if want := r.Chain.RecurrentClasses[i]; len(class) != want.States || period != want.Period {
				t.Errorf("%s: class of %d states and period %d, want %d and %d", id, len(class), period, want.States, want.Period)
			}
			pi, err := sub.Stationary(t.Context())
			if err != nil {
				t.Fatal(err)
			}
			p := make(map[int]float64)
			for k, s := range class {
				p[s] = pi[k]
			}
			var square, symbols float64
			for _, e := range chain.Edges {
				for _, a := range e.Levels {
					square += p[e.From] * e.P * a * a
					symbols += p[e.From] * e.P
				}
			}
			near(t, id+": mean square", square/symbols, r.MeanSquareSymbol, 1e-14)
		}
	}
}

func near(t testing.TB, what string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)) {
		t.Errorf("%s = %.17g, want %.17g", what, got, want)
	}
}

// pulses writes symbols as the trade does: + 0 -.
func pulses(symbols []float64) string {
	var b strings.Builder
	for _, a := range symbols {
		b.WriteByte("-0+"[int(a)+1])
	}
	return b.String()
}

func TestWorkedExamples(t *testing.T) {
	for _, tt := range []struct {
		code       *Code
		bits, want string
		source     string
	}{
		{UnipolarNRZ(), "0110", "0++0", "definition"},
		{PolarNRZ(), "0110", "-++-", "definition"},
		{NRZM(), "0110", "-+--", "IRIG 106 chapter 4: a change of level for a 1 (from memory)"},
		{NRZS(), "0110", "+++-", "IRIG 106 chapter 4: a change of level for a 0 (from memory)"},
		{UnipolarRZ(0.5), "0110", "00+0+000", "IRIG 106 chapter 4 (from memory)"},
		{UnipolarRZ(2. / 3), "01", "000++0", "definition"},
		{UnipolarRZ(1), "01", "0+", "definition"},
		{PolarRZ(0.5), "01", "-0+0", "definition"},
		{PolarRZ(0.1), "1", "+000000000", "definition"},
		{AMI(), "1011001", "+0-+00-", "ITU-T G.701 (from memory)"},
		{Pseudoternary(), "1011001", "0+00-+0", "ITU-T I.430 (from memory)"},
		{BiphaseL(), "10", "+--+", "IRIG 106 chapter 4: a 1 is high then low (from memory); so does common practice"},
		{Manchester8023(), "10", "-++-", "IEEE 802.3 clause 7: a 1 is low then high (from memory)"},
		{BiphaseM(), "0110", "++" + "-+" + "-+" + "--", "a change at the start of every bit, a 1 changes in its middle too"},
		{BiphaseS(), "0110", "+-" + "++" + "--" + "+-", "likewise for a 0"},
		{DelayModulation(), "1000110", "-+" + "++" + "--" + "++" + "+-" + "-+" + "++", "Hecht and Guida 1969 (from memory)"},
		{CMI(), "0110101", "-+" + "--" + "++" + "-+" + "--" + "-+" + "++", "ITU-T G.703 Annex A"},
		{MLT3(), "1101111", "+00-0+0", "ANSI X3.263 (from memory)"},
		{HDB3(), "10000110", "+000+-+0", "an encyclopedia's worked example (from memory)"},
		{HDB3(), "0000", "+00+", "B00V, as no mark before the first violation counts as even"},
		{HDB3(), "110000", "+-+00+", "B00V after an even number of marks"},
		{HDB3(), "1000000000000", "+000+-00-+00+", "000V, then B00V twice: the violations alternate"},
		{HDB3(), "100010001000", "+000-000+000", "three zeros stay"},
		{HDB3(), "", "", "nothing is owed for nothing"},
		{HDB3(), "1", "+", "in place"},
		{HDB3(), "01", "0+", "in place"},
		{BitStuffing(3), "1111110", "+++-+++--", "a 0 after every three 1s"},
		{HDLC(), "1111101111110", "-----+" + "-" + "-----+" + "+-", "ISO/IEC 13239: a 0 after every five 1s; a 0 changes the level (from memory)"},
		// FDDI symbols 0 = 11110, 5 = 01011 (ANSI X3.166), through NRZ-M from -1.
		{Code4B5B(), "00000101", "+-+--" + "-++-+", "ANSI X3.166"},
		// IEEE 802.3 table 36-1 (from memory).
		{Code8b10b(), octet(10, 2), "-+-+-+-+-+", "D10.2"},
		{Code8b10b(), octet(21, 5), "+-+-+-+-+-", "D21.5"},
		{Code8b10b(), octet(0, 0) + octet(0, 0), "+--+++-+--" + "+--+++-+--", "D0.0 keeps a negative disparity: 100111 0100"},
		{Code8b10b(), octet(3, 0) + octet(0, 0), "++---+" + "+-++" + "-++---" + "+-++", "D3.0- 110001 1011 turns it: D0.0+ 011000 1011"},
		{Code8b10b(), octet(17, 7), "+---++" + "-+++", "D17.7- 100011 0111, the alternate .7"},
		{Code8b10b(), octet(3, 0) + octet(11, 7), "++---+" + "+-++" + "++-+--" + "+---", "D11.7+ 110100 1000, the alternate .7"},
		{Code8b10b(), octet(31, 7), "+-+-++" + "---+", "D31.7- 101011 0001"},
	} {
		sym, err := tt.code.Encode(bitsOf(tt.bits))
		if got := pulses(sym); got != tt.want || err != nil {
			t.Errorf("%s of %s: got %s, want %s (%s) %v", tt.code, tt.bits, got, tt.want, tt.source, err)
		}
	}
	sym, err := Code2B1Q().Encode(bitsOf("10110100"))
	wantEqual(t, "2B1Q, ANSI T1.601", sym, []float64{3, 1, -1, -3})
	if err != nil {
		t.Error(err)
	}
}

// octet spells the data character Dx.y of 8b/10b as its octet HGFEDCBA.
func octet(x, y int) string { return fmt.Sprintf("%03b%05b", y, x) }

func TestLSBFirst(t *testing.T) {
	const d10_2 = 0x4A
	code := Code8b10b()
	reversed := code.LSBFirst()
	msb, err := code.Encode(source.Octets([]byte{d10_2}, source.MSBFirst))
	lsb, err2 := reversed.Encode(source.Octets([]byte{d10_2}, source.LSBFirst))
	if err != nil || err2 != nil {
		t.Fatal(err, err2)
	}
	wantEqual(t, "D10.2, first bit most significant", pulses(msb), "-+-+-+-+-+")
	wantEqual(t, "D10.2, first bit least significant", pulses(lsb), "-+-+-+-+-+")
	if reversed.LSBFirst() != reversed {
		t.Error("the same code once more is another")
	}
	if ami := AMI(); ami.LSBFirst() != ami {
		t.Error("a word of one bit has one order")
	}
	if reversed.Name() != "8b/10b, LSB first" || reversed.Reference() != code.Reference() || reversed.States() != code.States() {
		t.Errorf("%v: %v", reversed, reversed.Reference())
	}
	bits := source.Random().Bits(8000, 4)
	sym, _ := reversed.Encode(bits)
	back, faults, err := reversed.Decode(sym)
	if err != nil || len(faults) > 0 || !reflect.DeepEqual(back, bits) {
		t.Errorf("round trip: %d faults, %v", len(faults), err)
	}
	// Biased data tell the two apart: a word's probability is the product over its bits in time, which is the same for
	// both orders, but memory makes order matter.
	data := source.Markov(0.1, 0.4)
	if reflect.DeepEqual(Code4B5B().Fed(data).Chain().Edges, Code4B5B().LSBFirst().Fed(data).Chain().Edges) {
		t.Error("4B5B fed data with memory has the same chain in both orders")
	}
}

// Rates are ratios by construction, or, with stuffing, from the mean number of inserted bits: of HDLC's at p = 1/2, 62
// data bits take 63 symbols (reference computation, "derived chain").
func TestRates(t *testing.T) {
	for _, tt := range []struct {
		code          *Code
		rate          float64
		bits, symbols int
		fixed         bool
	}{
		{PolarNRZ(), 1, 1, 1, true},
		{UnipolarRZ(0.25), 0.25, 1, 4, true},
		{BiphaseL(), 0.5, 1, 2, true},
		{HDB3(), 1, 1, 1, true},
		{Code2B1Q(), 2, 2, 1, true},
		{Code4B5B(), 0.8, 4, 5, true},
		{Code8b10b(), 0.8, 4, 5, true},
		{Code8b10b().Fed(source.Biased(0.9)), 0.8, 4, 5, true},
		{HDLC(), 62. / 63, 0, 0, false},
		{BitStuffing(5), 62. / 63, 0, 0, false},
		{HDLC().Fed(source.Biased(0.8)), 0.9111805013444358, 0, 0, false}, // reference computation, hdlc_nrzi_p80
		{HDLC().Fed(source.Biased(1)), 5. / 6, 0, 0, false},
		{HDLC().Fed(source.Biased(0)), 1, 0, 0, false},
		{HDLC().Fed(source.Repeating(bitsOf("11111110"))), 8. / 9, 0, 0, false},
	} {
		bits, symbols, fixed := tt.code.FixedRate()
		near(t, tt.code.Name()+": rate", tt.code.Rate(), tt.rate, 1e-14)
		if bits != tt.bits || symbols != tt.symbols || fixed != tt.fixed {
			t.Errorf("%s: fixed rate %d to %d, %v, want %d to %d, %v", tt.code, bits, symbols, fixed, tt.bits, tt.symbols, tt.fixed)
		}
	}
}

// A frame of words of different lengths has a fixed rate if the lengths depend on the place in the frame alone, or even
// out before a state comes back.
func TestFixedRateOfFraming(t *testing.T) {
	// A frame bit before every third bit.
	framed := must(t, Spec{Bits: 1, Start: 0, Step: func(s any, w uint) (any, []float64) {
		if s.(int) == 0 {
			return 1, []float64{1, float64(w)}
		}
		return (s.(int) + 1) % 3, []float64{float64(w)}
	}})
	// Symbols that a word saves are owed to the next.
	evened := must(t, Spec{Bits: 1, Start: 0, Step: func(s any, w uint) (any, []float64) {
		owed := make([]float64, s.(int)+2-int(w))
		for i := range owed {
			owed[i] = float64(w)
		}
		return int(w), owed
	}})
	// A start-up of another rate that data can leave, or stay in.
	startup := must(t, Spec{Bits: 1, Start: 0, Step: func(s any, w uint) (any, []float64) {
		if s.(int) == 0 && w == 0 {
			return 0, []float64{0, 0, 0}
		}
		return 1, []float64{float64(w)}
	}})
	for _, tt := range []struct {
		code          *Code
		bits, symbols int
		fixed         bool
	}{{framed, 3, 4, true}, {evened, 1, 2, true}, {startup, 0, 0, false}} {
		bits, symbols, fixed := tt.code.FixedRate()
		if bits != tt.bits || symbols != tt.symbols || fixed != tt.fixed {
			t.Errorf("%d to %d, %v, want %d to %d, %v", bits, symbols, fixed, tt.bits, tt.symbols, tt.fixed)
		}
	}
	if got := startup.Rate(); got != 1 {
		t.Errorf("the rate after start-up is %v, want 1", got)
	}
}

// Data that end in one of two classes: the rate is the mean of theirs. The first bit decides between a symbol and two
// per bit, so a quarter ends at rate 1 and the rest at 1/2.
func TestRateOfSeveralClasses(t *testing.T) {
	c := must(t, Spec{Bits: 1, Start: 0, Step: func(s any, w uint) (any, []float64) {
		switch {
		case s.(int) == 0:
			return 1 + int(w), []float64{0}
		case s.(int) == 1:
			return 1, []float64{float64(w)}
		}
		return 2, []float64{float64(w), 2}
	}})
	near(t, "rate", c.Fed(source.Biased(0.75)).Rate(), 0.25*1+0.75*0.5, 1e-15)
}

func TestLevels(t *testing.T) {
	for name, want := range map[string][]float64{
		"unipolar NRZ": {0, 1}, "polar NRZ": {-1, 1}, "AMI": {-1, 0, 1}, "HDB3": {-1, 0, 1}, "MLT-3": {-1, 0, 1},
		"2B1Q": {-3, -1, 1, 3}, "8b/10b": {-1, 1}, "CMI": {-1, 1}, "unipolar RZ 50 %": {0, 1}, "polar RZ 50 %": {-1, 0, 1},
	} {
		wantEqual(t, name, catalogued(name).Levels(), want)
	}
}

// HDB3's 35 states are 3 of start-up and 32 of a delay line (reference computation); what a code needs at least is
// known for the simple ones.
func TestMinimalStates(t *testing.T) {
	byID := references(t)
	for _, tt := range []struct {
		code *Code
		want int
	}{
		{PolarNRZ(), 1}, {NRZM(), 2}, {AMI(), 2}, {BiphaseL(), 1}, {DelayModulation(), 4}, {CMI(), 2}, {MLT3(), 4}, {Code4B5B(), 2},
		{Code8b10b(), 2}, {BitStuffing(5), 5}, {HDLC(), 10}, {HDB3(), 32},
		{must(t, byID["mms43_p50"].spec()), 4},
	} {
		if got := tt.code.Minimal(); got != tt.want {
			t.Errorf("%s: %d states, want %d", tt.code, got, tt.want)
		}
	}
}

func TestNamesFindTheirCodes(t *testing.T) {
	names := Names()
	if len(names) != 21 {
		t.Errorf("%d names", len(names))
	}
	for _, name := range names {
		for _, spelling := range []string{name, strings.ToUpper(name), strings.ReplaceAll(name, "-", " ")} {
			c, err := ByName(spelling)
			if err != nil || c.Name() != name {
				t.Errorf("%q: %v, %v", spelling, c, err)
			} else if len(c.Reference()) < 20 {
				t.Errorf("%s has the reference %q", name, c.Reference())
			}
		}
	}
	for name, want := range map[string]string{
		"HDB2":      `linecode: no code is named "HDB2"; perhaps HDB3`,
		"8b10":      `linecode: no code is named "8b10"; perhaps 8b/10b`,
		"biphase":   `linecode: no code is named "biphase"; perhaps biphase-L or biphase-M or biphase-S`,
		"unipolarz": `linecode: no code is named "unipolarz"; perhaps unipolar NRZ`,
		"":          `linecode: no code is named ""; the names are unipolar NRZ, polar NRZ, NRZ-M, `,
		"Golay":     `linecode: no code is named "Golay"; the names are unipolar NRZ, `,
	} {
		if _, err := ByName(name); err == nil || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%q: got  %v\nwant %s", name, err, want)
		}
	}
}

func TestConstructorsSayWhatWouldBeRight(t *testing.T) {
	for want, f := range map[string]func(){
		"linecode: unipolar RZ with duty 0.37; give k/n above 0 and up to 1 with n up to 16, or an NRZ code and pulse.Rect(0.37)": func() { UnipolarRZ(0.37) },
		"linecode: unipolar RZ with duty 0; give k/n above 0":                                                                     func() { UnipolarRZ(0) },
		"linecode: polar RZ with duty 1.5; give k/n above 0":                                                                      func() { PolarRZ(1.5) },
		"linecode: polar RZ with duty NaN; give k/n above 0":                                                                      func() { PolarRZ(math.NaN()) },
		"linecode: BitStuffing(0); a 0 is inserted after 1 to 1000 1s":                                                            func() { BitStuffing(0) },
	} {
		if got := panicOf(t, f).Error(); !strings.HasPrefix(got, want) {
			t.Errorf("got  %s\nwant %s", got, want)
		}
	}
	wantEqual(t, "name with a duty", UnipolarRZ(1./3).Name(), "unipolar RZ 33.33 %")
	wantEqual(t, "name with the usual duty", UnipolarRZ(0.5).Reference(), catalogued("unipolar RZ 50 %").Reference())
	wantEqual(t, "name with a number", BitStuffing(6).Name(), "bit stuffing 6")
}

func TestEncodeRefusesBadBits(t *testing.T) {
	for _, tt := range []struct {
		bits []byte
		want string
	}{
		{make([]byte, 11), "linecode: 8b/10b takes 8 bits a word, and 3 of the 11 bits are over; leave them out or fill the word with 5 more"},
		{[]byte{0, 1, 0, 1, 2, 0, 1, 1}, "linecode: 8b/10b got 2 at position 4; a bit is 0 or 1, one a byte"},
		{[]byte("01010101"), "linecode: 8b/10b got 48 at position 0; a bit is 0 or 1, one a byte"},
	} {
		if _, err := Code8b10b().Encode(tt.bits); err == nil || err.Error() != tt.want {
			t.Errorf("got  %v\nwant %s", err, tt.want)
		}
	}
	sym, err := Code8b10b().Encode(nil)
	if len(sym) != 0 || err != nil {
		t.Errorf("no bits gave %v, %v", sym, err)
	}
}
