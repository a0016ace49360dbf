package plotting

import (
	"fmt"
	"image/color"
	"math"
	"slices"
	"sync"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"linewright/plotting/internal/canvas"
)

const (
	// DefaultWidth and DefaultHeight are a figure's size: 672 × 416 CSS pixels, which fits the page of a notebook and
	// a sheet of A4.
	DefaultWidth, DefaultHeight = 504 * vg.Length(1), 312 * vg.Length(1)

	margin = 7 // points between the drawing and the figure's edge

	terminalColumns, terminalRows = 72, 18 // of the picture of characters
)

// A Figure is a gonum plot that shows as a vector drawing, as a picture and as text.
//
// Whoever needs more than the figure has goes on with gonum/plot: what is changed in Plot or added to it before the
// figure is shown appears in all three forms.
type Figure struct {
	// Plot is the plot underneath.
	Plot *plot.Plot

	// Width and Height are the nominal size in points, 1/72 inch. Shown in a browser, 3/4 point is one CSS pixel.
	Width, Height vg.Length

	// Alt says in a sentence what the figure shows, for readers who cannot see it.
	Alt string

	// fit arranges what depends on the figure's size, before p is drawn on c.
	fit func(p *plot.Plot, c draw.Canvas)
	mu  sync.Mutex // held while a form is drawn: what fit arranges is shared by the forms
}

// Of makes a figure of a gonum plot. Its size is [DefaultWidth] by [DefaultHeight]; set Width and Height for another.
// It panics if p is nil.
func Of(p *plot.Plot) *Figure {
	if p == nil {
		panic(fmt.Errorf("plotting: Of(nil) has no plot; give it one, made with plot.New"))
	}
	return &Figure{Plot: p, Width: DefaultWidth, Height: DefaultHeight, Alt: p.Title.Text}
}

func (f *Figure) figure() *Figure { return f }

// pixels returns the nominal size in whole CSS pixels, of which there are 96 to the inch.
func (f *Figure) pixels() (width, height int, err error) {
	width, height = int(math.Round(f.Width.Points()*96/72)), int(math.Round(f.Height.Points()*96/72))
	if width < 100 || height < 75 || width > 4000 || height > 4000 {
		return 0, 0, fmt.Errorf("plotting: a figure of %g × %g points cannot be drawn; width and height lie from 75 × 56 to 3000 × 3000", f.Width.Points(), f.Height.Points())
	}
	return width, height, nil
}

// SVG returns the figure as an SVG document that needs nothing from outside: its fonts are in it, and its background
// is opaque. The same figure has the same bytes.
func (f *Figure) SVG() (string, error) {
	width, height, err := f.pixels()
	if err != nil {
		return "", err
	}
	// A point of the drawing is 4/3 CSS pixels exactly, so that SVG and PNG show at the same size.
	c := canvas.NewSVG(vg.Length(width)*0.75, vg.Length(height)*0.75)
	f.draw(c, *f.Plot)
	title := f.Plot.Title.Text
	if title == "" {
		title = f.Plot.Y.Label.Text + " over " + f.Plot.X.Label.Text
	}
	svg, err := c.Document(width, height, title, f.Alt)
	if err != nil {
		return "", fmt.Errorf("plotting: %w", err)
	}
	return svg, nil
}

// PNG returns the figure as a PNG picture of twice its nominal size in pixels, for sharp screens. Shown, it wants the
// size that is given beside it, in CSS pixels.
func (f *Figure) PNG() (data []byte, width, height int, err error) {
	if width, height, err = f.pixels(); err != nil {
		return nil, 0, 0, err
	}
	c := canvas.NewPNG(vg.Length(width)*0.75, vg.Length(height)*0.75, 2*96)
	f.draw(c, *f.Plot)
	data, err = c.Encode()
	return data, width, height, err
}

// String returns the figure as a picture of characters for a terminal, 72 columns wide. Curves are drawn in braille
// dots, 144 × 72 of them.
func (f *Figure) String() string {
	c := canvas.NewTerminal(terminalColumns, terminalRows)
	p, header := forTerminal(*f.Plot)
	f.draw(c, p)
	return c.Picture(header)
}

// bundle returns the figure in its three forms.
func (f *Figure) bundle() (Bundle, error) {
	svg, err := f.SVG()
	if err != nil {
		return Bundle{}, err
	}
	data, width, height, err := f.PNG()
	if err != nil {
		return Bundle{}, err
	}
	return Bundle{
		Data:     map[string]any{mimeSVG: svg, mimePNG: data, mimeText: f.String()},
		Metadata: map[string]any{mimePNG: map[string]any{"width": width, "height": height}},
	}, nil
}

// draw draws p, which is a copy of the figure's plot, on c.
func (f *Figure) draw(c vg.CanvasSizer, p plot.Plot) {
	f.mu.Lock()
	defer f.mu.Unlock()
	da := draw.New(c)
	if _, ok := c.(*canvas.Terminal); !ok {
		// Always a background, over the margin too: on a dark page a transparent figure is dark on dark.
		if p.BackgroundColor == nil {
			p.BackgroundColor = color.White
		}
		da.SetColor(p.BackgroundColor)
		da.Fill(da.Rectangle.Path())
		da = draw.Crop(da, margin, -margin, margin, -margin)
	}
	p.BackgroundColor = nil
	if f.fit != nil {
		f.fit(&p, da)
	}
	p.Draw(da)
}

// forTerminal returns p with its texts measured in characters, and the label of the left axis, which stands above the
// picture.
func forTerminal(p plot.Plot) (plot.Plot, string) {
	h := canvas.Characters{Handler: p.TextHandler}
	p.TextHandler = h
	for _, s := range []*text.Style{
		&p.Title.TextStyle, &p.Legend.TextStyle, &p.X.Label.TextStyle, &p.X.Tick.Label, &p.Y.Label.TextStyle, &p.Y.Tick.Label,
	} {
		s.Handler = h
	}
	p.Title.Padding, p.X.Label.Padding, p.Y.Label.Padding = 0, 0, 0
	p.X.Tick.Length, p.Y.Tick.Length = canvas.CellHeight/4, 0
	p.X.Tick.Marker = labelled{p.X.Tick.Marker}
	p.X.Padding, p.Y.Padding = canvas.CellHeight, canvas.CellWidth
	label := p.Y.Label.Text
	p.Y.Label.Text = ""
	return p, label
}

// labelled leaves out the unlabelled ticks, for which a row of characters has no room.
type labelled struct{ plot.Ticker }

func (l labelled) Ticks(lo, hi float64) []plot.Tick {
	return slices.DeleteFunc(slices.Clone(l.Ticker.Ticks(lo, hi)), plot.Tick.IsMinor)
}
