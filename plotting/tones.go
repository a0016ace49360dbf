package plotting

import (
	"math"
	"slices"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"linewright/builtins/spectrum"
	"linewright/plotting/internal/canvas"
)

const (
	markRadius = vg.Length(2.4) // of the mark on a tone
	apart      = vg.Length(3.5) // distance of tones at one frequency
)

// tones draws discrete lines as stems with a scale of their own: a tone has a power, a density has none at any one
// frequency, so the two can share no axis.
type tones struct {
	series   []toneSeries
	min, max float64     // range of the stems' axis
	label    string      // of the axis at the right; without one the stems share the left axis
	marker   plot.Ticker // of the axis at the right
}

type toneSeries struct {
	freqs, values []float64 // values in the axis's unit
	style         draw.LineStyle
	mark          draw.GlyphDrawer
}

// tonePlaces is the number of places on the frequency axis, several a pixel, that can each show one tone of a series.
const tonePlaces = 1 << 14

// prominent returns the highest of the lines in each place on the axis from 0 to upto, all if they are no more than there
// are places: data that repeat after a million bits have millions of them.
func prominent(lines []spectrum.Line, upto float64) []spectrum.Line {
	if len(lines) <= tonePlaces {
		return lines
	}
	var out []spectrum.Line
	last := -1.0
	for _, l := range lines {
		place := math.Floor(l.Freq / upto * tonePlaces)
		switch {
		case place != last:
			out = append(out, l)
			last = place
		case l.Power > out[len(out)-1].Power:
			out[len(out)-1] = l
		}
	}
	return out
}

// A stem is one tone on the canvas.
type stem struct {
	series int
	top    vg.Point
}

// stems returns the tones that the axes show, series by series. Tones of several series at one frequency stand side by
// side around it.
func (t *tones) stems(c draw.Canvas, p *plot.Plot) []stem {
	x, _ := p.Transforms(&c)
	var all []stem
	for k, s := range t.series {
		var own []stem
		for i, f := range s.freqs {
			if f >= p.X.Min && f <= p.X.Max*(1+1e-12) && s.values[i] > t.min {
				height := math.Min(1, (s.values[i]-t.min)/(t.max-t.min))
				own = append(own, stem{k, vg.Point{X: x(f), Y: c.Y(height)}})
			}
		}
		all = append(all, highest(own)...)
	}
	place := func(s stem) int64 { return int64(math.Round(s.top.X.Points() * 100)) }
	count, seen := map[int64]int{}, map[int64]int{}
	for _, s := range all {
		count[place(s)]++
	}
	for i, s := range all {
		at := place(s)
		all[i].top.X += (vg.Length(seen[at]) - vg.Length(count[at]-1)/2) * apart
		seen[at]++
	}
	return all
}

// highest returns the highest of a series' stems in each pixel column; it covers the others. They rise in frequency.
func highest(stems []stem) []stem {
	var out []stem
	for _, s := range stems {
		n := len(out)
		if n == 0 || math.Floor(float64(out[n-1].top.X/canvas.Pixel)) != math.Floor(float64(s.top.X/canvas.Pixel)) {
			out = append(out, s)
		} else if s.top.Y > out[n-1].top.Y {
			out[n-1] = s
		}
	}
	return out
}

// avoid returns what the stems cover.
func (t *tones) avoid(c draw.Canvas, p *plot.Plot) []vg.Rectangle {
	var out []vg.Rectangle
	for _, s := range t.stems(c, p) {
		out = append(out, vg.Rectangle{
			Min: vg.Point{X: s.top.X - markRadius, Y: c.Min.Y},
			Max: vg.Point{X: s.top.X + markRadius, Y: s.top.Y + markRadius},
		})
	}
	return out
}

func (t *tones) tickStyle(p *plot.Plot) text.Style {
	return text.Style{Font: font.From(sans, tickSize), Color: ink, YAlign: draw.YCenter, Handler: p.TextHandler}
}

func (t *tones) labelStyle(p *plot.Plot) text.Style {
	return text.Style{Font: font.From(sans, labelSize), Color: ink, XAlign: draw.XCenter, Rotation: math.Pi / 2, Handler: p.TextHandler}
}

// columns returns where the parts of the right axis stand, counted from the right end of the data: its line, its tick
// labels, its label and its end.
func (t *tones) columns(p *plot.Plot) (line, ticks, label, end vg.Length) {
	line = p.Y.Padding
	ticks = line + p.Y.Tick.Length + t.tickStyle(p).Width(" ")
	label = ticks
	for _, k := range t.marker.Ticks(t.min, t.max) {
		label = max(label, ticks+t.tickStyle(p).Width(k.Label))
	}
	if p.Y.Label.Text == "" { // a terminal, which has all axis labels above the picture
		return line, ticks, label, label
	}
	label += p.Y.Label.Padding + t.labelStyle(p).FontExtents().Ascent
	return line, ticks, label, label + t.labelStyle(p).FontExtents().Descent
}

// GlyphBoxes keeps room for the right axis.
func (t *tones) GlyphBoxes(p *plot.Plot) []plot.GlyphBox {
	if t.label == "" {
		return nil
	}
	_, _, _, end := t.columns(p)
	return []plot.GlyphBox{{X: 1, Rectangle: vg.Rectangle{Max: vg.Point{X: end}}}}
}

// weight returns the width of the stems and the radius of their marks: less where they stand so close that they would
// run into one another.
func weight(stems []stem) (line, mark vg.Length) {
	at := make([]vg.Length, len(stems))
	for i, s := range stems {
		at[i] = s.top.X
	}
	slices.Sort(at)
	line, mark = 1.1, markRadius
	for i := range len(at) - 1 {
		if gap := at[i+1] - at[i]; gap > canvas.Pixel/2 {
			line, mark = min(line, max(canvas.Pixel/2, 0.35*gap)), min(mark, max(canvas.Pixel/2, 0.7*gap))
		}
	}
	return line, mark
}

// Plot draws the stems and their axis.
func (t *tones) Plot(c draw.Canvas, p *plot.Plot) {
	stems := t.stems(c, p)
	width, radius := weight(stems)
	// Series by series, first lines, then marks: an SVG holds drawings of one style that follow each other as one path.
	for k, series := range t.series {
		for _, s := range stems {
			if s.series == k {
				c.StrokeLine2(draw.LineStyle{Color: series.style.Color, Width: width}, s.top.X, c.Min.Y, s.top.X, s.top.Y)
			}
		}
		for _, s := range stems {
			if s.series == k {
				series.mark.DrawGlyph(&c, draw.GlyphStyle{Color: series.style.Color, Radius: radius}, s.top)
			}
		}
	}
	if t.label == "" {
		return
	}
	line, ticks, label, _ := t.columns(p)
	c.StrokeLine2(p.Y.LineStyle, c.Max.X+line, c.Min.Y, c.Max.X+line, c.Max.Y)
	sty := t.tickStyle(p)
	for _, k := range t.marker.Ticks(t.min, t.max) {
		y := c.Y((k.Value - t.min) / (t.max - t.min))
		length := p.Y.Tick.Length
		if k.IsMinor() {
			length /= 2
		}
		if length > 0 {
			c.StrokeLine2(p.Y.Tick.LineStyle, c.Max.X+line, y, c.Max.X+line+length, y)
		}
		c.FillText(sty, vg.Point{X: c.Max.X + ticks, Y: y + sty.FontExtents().Descent}, k.Label)
	}
	c.FillText(t.labelStyle(p), vg.Point{X: c.Max.X + label, Y: c.Center().Y}, t.label)
}
