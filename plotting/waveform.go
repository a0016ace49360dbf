package plotting

import (
	"fmt"
	"image/color"
	"math"
	"slices"
	"strconv"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"linewright/builtins/linecode"
	"linewright/builtins/pulse"
)

const (
	mostSamples = 1 << 16 // of a waveform
	mostWords   = 500     // whose bits a figure tries to write

	waveformHeight = 210 * vg.Length(1)
)

// Waveform draws the voltage that a train makes of a code's symbols for the given source bits, over time from the start
// of the first symbol. Each word of bits stands above the symbols that it is sent in; vertical lines part the symbols,
// darker ones the words. Symbols are those of [linecode.Code.Encode]: the encoder starts from its start state, its delay
// is taken out, and what it still owes at the end is there. Where a code keeps its source bits for a while, a word's
// symbols are those by which the sequence grows with it.
//
// Bits are written where there is room for all of them. The ticks at the left are the code's levels in volts where
// they are few. It panics where Encode or [pulse.Train.Drive] returns an error, and without any bits.
func Waveform(c *linecode.Code, t pulse.Train, bits []byte) *Figure {
	if c == nil {
		panic(fmt.Errorf("plotting: Waveform of a nil code; give it what linecode.New returned without an error"))
	}
	return newWaveform(c, t, bits)
}

// coder is what a waveform figure asks of a code; *linecode.Code has it.
type coder interface {
	pulse.Coder
	Bits() int
	Encode(bits []byte) ([]float64, error)
}

func newWaveform(c coder, t pulse.Train, bits []byte) *Figure {
	symbols, err := c.Encode(bits)
	if err != nil {
		panic(fmt.Errorf("plotting: no waveform of %d bits: %w", len(bits), err))
	}
	if len(symbols) == 0 {
		panic(fmt.Errorf("plotting: no waveform: %d bits give no symbols; give at least one word of %d bits", len(bits), c.Bits()))
	}
	drive, err := t.Drive(c)
	if err != nil {
		panic(fmt.Errorf("plotting: no waveform: %w", err))
	}
	period := 1 / drive.SymbolRate
	v := wave(drive, symbols)
	v.style = seriesStyle(0)

	f := Of(newPlot())
	f.Height = waveformHeight
	p := f.Plot
	p.Title.Text = c.Name()
	symbol, factor := prefix(float64(len(symbols))*period, 1)
	p.X.Min, p.X.Max = 0, float64(len(symbols))*period
	p.X.Label.Text = "time (" + symbol + "s)"
	p.X.Tick.Marker = ticks{unit: factor, about: 8}

	low, high := min(0, slices.Min(v.ys)), max(0, slices.Max(v.ys))
	if low == high {
		low, high = -1, 1
	}
	symbol, factor = prefix(max(-low, high), 1)
	p.Y.Label.Text = "voltage (" + symbol + "V)"
	p.Y.Tick.Marker = ticks{unit: factor}
	if marks := levelTicks(c.Levels(), drive.Volts, factor, high-low); len(marks) > 0 {
		p.Y.Tick.Marker = marks
		low, high = min(low, marks[0].Value), max(high, marks[len(marks)-1].Value)
	}
	p.Y.Min, p.Y.Max = low-0.08*(high-low), high+0.08*(high-low)

	band := &bitBand{period: period, symbols: len(symbols), words: words(c, bits, period)}
	p.Add(band, v)
	f.fit = band.fit
	f.Alt = fmt.Sprintf("Voltage of %s over %s: %d source bits in %d symbols, from %s to %s.", c.Name(),
		quantity(p.X.Max, "s"), len(bits), len(symbols), quantity(slices.Min(v.ys), "V"), quantity(slices.Max(v.ys), "V"))
	return f
}

// wave returns the waveform as a curve. It is sampled at the middles of equal slots; an edge shows in the samples as a
// step much larger than its neighbours, and is drawn upright between its two slots. 240 slots a symbol have an edge at
// every duty k/n, n = 1..6, 8, 10, 12, 15, 16, 20, 24, ...
func wave(d *pulse.Drive, symbols []float64) *curve {
	per := 240
	for per > 16 && per*len(symbols) > mostSamples {
		per /= 5
	}
	samples := d.Wave(symbols, per)
	span := slices.Max(samples) - slices.Min(samples)
	slot := 1 / (d.SymbolRate * float64(per))
	step := func(k int) float64 {
		if k < 0 || k+1 >= len(samples) {
			return 0
		}
		return samples[k+1] - samples[k]
	}
	edge := func(k int) bool {
		return math.Abs(step(k)) > 0.02*span && math.Abs(step(k)) > 4*max(math.Abs(step(k-1)), math.Abs(step(k+1)))
	}
	slope := func(k int) float64 { // half a step, to go from the middle of a slot to its end
		if edge(k) {
			return 0
		}
		return step(k) / 2
	}
	v := &curve{}
	add := func(x, y float64) {
		// A point on the line through its neighbours adds nothing.
		if n := len(v.xs); n > 1 {
			x0, y0, x1, y1 := v.xs[n-2], v.ys[n-2], v.xs[n-1], v.ys[n-1]
			if x1 > x0 && x > x1 && math.Abs(y0+(y-y0)*(x1-x0)/(x-x0)-y1) < 1e-6*span {
				v.xs, v.ys = v.xs[:n-1], v.ys[:n-1]
			}
		}
		v.xs, v.ys = append(v.xs, x), append(v.ys, y)
	}
	add(0, samples[0]-slope(0))
	for k, y := range samples {
		add((float64(k)+0.5)*slot, y)
		if edge(k) {
			x := float64(k+1) * slot
			add(x, y+slope(k-1))
			add(x, samples[k+1]-slope(k+1))
		}
	}
	n := len(samples)
	add(float64(n)*slot, samples[n-1]+slope(n-2))
	return v
}

// levelTicks returns the levels of a code in volts as ticks, none where they are many or lie close together.
func levelTicks(levels []float64, volts, unit, span float64) plot.ConstantTicks {
	if len(levels) > 9 {
		return nil
	}
	var out plot.ConstantTicks
	for i, a := range levels {
		v := a * volts
		if i > 0 && v-out[i-1].Value < 0.07*span {
			return nil
		}
		out = append(out, plot.Tick{Value: v, Label: minus(strconv.FormatFloat(v/unit, 'g', 4, 64))})
	}
	return out
}

// A word is one word of source bits and the time in which it is sent.
type word struct {
	from, to float64 // seconds
	bits     string
}

// words returns the words of the bits, each with the symbols by which the encoded sequence grows with it: the encoder
// alone knows how many, where it stuffs or frames. It returns nil where there are too many to be written.
func words(c coder, bits []byte, period float64) []word {
	n := len(bits) / c.Bits()
	if n > mostWords {
		return nil
	}
	length := func(words int) int {
		symbols, err := c.Encode(bits[:words*c.Bits()])
		if err != nil {
			panic(fmt.Errorf("plotting: no waveform of the first %d bits: %w", words*c.Bits(), err))
		}
		return len(symbols)
	}
	tail := length(0) // what the encoder owes at the end anyway
	var out []word
	grown := 0
	for i := range n {
		w := word{from: float64(grown) * period}
		grown = length(i+1) - tail
		w.to = float64(grown) * period
		for _, b := range bits[i*c.Bits() : (i+1)*c.Bits()] {
			w.bits += strconv.Itoa(int(b))
		}
		out = append(out, w)
	}
	return out
}

// bitBand draws what belongs to the symbols: their boundaries, and the bits above the axes.
type bitBand struct {
	period  float64 // seconds
	symbols int
	words   []word

	written bool // whether the bits find room
}

// fit decides whether the bits find room.
func (b *bitBand) fit(p *plot.Plot, c draw.Canvas) {
	b.written = len(b.words) > 0 // keeps their room while it measures
	data := p.DataCanvas(c)
	x, _ := p.Transforms(&data)
	for _, w := range b.words {
		if w.bits != "" && w.to > w.from && b.style(p).Width(w.bits)+1 > x(w.to)-x(w.from) {
			b.written = false
			return
		}
	}
}

func (b *bitBand) style(p *plot.Plot) text.Style {
	return text.Style{Font: font.From(sans, labelSize), Color: ink, XAlign: draw.XCenter, Handler: p.TextHandler}
}

// GlyphBoxes keeps room for the bits above the axes.
func (b *bitBand) GlyphBoxes(p *plot.Plot) []plot.GlyphBox {
	if !b.written {
		return nil
	}
	return []plot.GlyphBox{{Y: 1, Rectangle: vg.Rectangle{Max: vg.Point{Y: b.style(p).Height("0") + nameGap}}}}
}

// Plot draws the boundaries and the bits.
func (b *bitBand) Plot(c draw.Canvas, p *plot.Plot) {
	x, y := p.Transforms(&c)
	thin := draw.LineStyle{Color: faint, Width: 0.5}
	if x(b.period)-x(0) > 4 {
		for k := range b.symbols + 1 {
			at := x(float64(k) * b.period)
			c.StrokeLine2(thin, at, c.Min.Y, at, c.Max.Y)
		}
	}
	if zero := y(0); c.ContainsY(zero) {
		c.StrokeLine2(draw.LineStyle{Color: color.NRGBA{0xbb, 0xbb, 0xbb, 0xff}, Width: 0.5}, c.Min.X, zero, c.Max.X, zero)
	}
	if !b.written {
		return
	}
	sty := b.style(p)
	top := c.Max.Y + nameGap + sty.Height("0")
	parting := draw.LineStyle{Color: color.NRGBA{0xcc, 0xcc, 0xcc, 0xff}, Width: 0.5}
	for i, w := range b.words {
		if w.to <= w.from {
			continue
		}
		if i > 0 {
			c.StrokeLine2(parting, x(w.from), c.Min.Y, x(w.from), top)
		}
		c.FillText(sty, vg.Point{X: (x(w.from) + x(w.to)) / 2, Y: c.Max.Y + nameGap + sty.FontExtents().Descent}, w.bits)
	}
}
