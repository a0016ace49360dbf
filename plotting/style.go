package plotting

import (
	"image/color"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"linewright/plotting/internal/canvas"
)

// The look that all figures share.
const (
	labelSize = 10  // points: axis labels and names
	tickSize  = 9   // points: tick labels, the smallest text of a figure
	curveLine = 1.3 // points
)

var (
	sans  = font.Font{Typeface: "Liberation", Variant: "Sans"}
	ink   = color.NRGBA{0x22, 0x22, 0x22, 0xff} // text and axes
	faint = color.NRGBA{0xe4, 0xe4, 0xe4, 0xff} // grid
)

// palette is that of Okabe and Ito, "Color Universal Design" (2008), which colour-blind readers can tell apart; their
// yellow is left out, because a thin yellow line does not show on white.
var palette = []color.NRGBA{
	{0x00, 0x72, 0xb2, 0xff}, // blue
	{0xd5, 0x5e, 0x00, 0xff}, // vermillion
	{0x00, 0x9e, 0x73, 0xff}, // bluish green
	{0xcc, 0x79, 0xa7, 0xff}, // reddish purple
	{0xe6, 0x9f, 0x00, 0xff}, // orange
	{0x56, 0xb4, 0xe9, 0xff}, // sky blue
	{0x00, 0x00, 0x00, 0xff}, // black
}

// dashes are the patterns of the series, dash and gap in points. There is one more than there are colours, so that
// the pairs repeat after 56 series and not after 7.
var dashes = [][]vg.Length{
	nil,
	{7, 2.5},
	{2, 2},
	{8, 2, 2, 2},
	{12, 3},
	{8, 2, 2, 2, 2, 2},
	{4, 3},
	{12, 2, 4, 2},
}

var markers = []draw.GlyphDrawer{
	draw.CircleGlyph{}, draw.BoxGlyph{}, draw.PyramidGlyph{}, diamond{}, draw.SquareGlyph{}, draw.RingGlyph{}, draw.CrossGlyph{},
}

// seriesStyle returns the line of series i.
func seriesStyle(i int) draw.LineStyle {
	return draw.LineStyle{Color: palette[i%len(palette)], Width: curveLine, Dashes: dashes[i%len(dashes)]}
}

// diamond is a filled square on its corner.
type diamond struct{}

func (diamond) DrawGlyph(c *draw.Canvas, sty draw.GlyphStyle, pt vg.Point) {
	r := sty.Radius * 1.2
	c.SetColor(sty.Color)
	var p vg.Path
	p.Move(vg.Point{X: pt.X, Y: pt.Y - r})
	p.Line(vg.Point{X: pt.X + r, Y: pt.Y})
	p.Line(vg.Point{X: pt.X, Y: pt.Y + r})
	p.Line(vg.Point{X: pt.X - r, Y: pt.Y})
	p.Close()
	c.Fill(p)
}

// legible darkens the colour of a series until text in it stands out from white as the Web Content Accessibility
// Guidelines 2.1 ask of text (contrast 4.5, success criterion 1.4.3).
func legible(c color.NRGBA) color.NRGBA {
	for 1.05/(canvas.Luminance(c)+0.05) < 4.5 {
		c.R, c.G, c.B = uint8(float64(c.R)*0.95), uint8(float64(c.G)*0.95), uint8(float64(c.B)*0.95)
	}
	return c
}

// newPlot returns an empty plot in the style of the figures.
func newPlot() *plot.Plot {
	p := plot.New()
	p.Title.TextStyle.Font = font.From(sans, labelSize+1)
	p.Title.TextStyle.Color = ink
	p.Title.Padding = 6
	p.Legend.TextStyle.Font = font.From(sans, labelSize)
	p.Legend.TextStyle.Color = ink
	for _, a := range []*plot.Axis{&p.X, &p.Y} {
		a.Label.TextStyle.Font = font.From(sans, labelSize)
		a.Label.TextStyle.Color = ink
		a.Label.Padding = 3
		a.Tick.Label.Font = font.From(sans, tickSize)
		a.Tick.Label.Color = ink
		a.Tick.Length = 4
		a.Tick.LineStyle = draw.LineStyle{Color: ink, Width: 0.5}
		a.LineStyle = draw.LineStyle{Color: ink, Width: 0.5}
		a.Padding = 4
		a.Tick.Marker = ticks{unit: 1}
	}
	return p
}
