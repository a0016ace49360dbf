package canvas

import (
	"image/color"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// line returns a path through points in cells, columns from the left and rows from the bottom.
func line(points ...[2]float64) (p vg.Path) {
	for i, at := range points {
		to := vg.Point{X: vg.Length(at[0]) * CellWidth, Y: vg.Length(at[1]) * CellHeight}
		if i == 0 {
			p.Move(to)
		} else {
			p.Line(to)
		}
	}
	return p
}

func TestTerminal(t *testing.T) {
	for _, tt := range []struct {
		name string
		draw func(c *Terminal)
		want []string
	}{
		{"box lines", func(c *Terminal) {
			c.Stroke(line([2]float64{0, 1.5}, [2]float64{6, 1.5}))
			c.Stroke(line([2]float64{2.5, 0}, [2]float64{2.5, 3}))
		}, []string{"  │", "──┼───", "  │"}},
		{"a slope", func(c *Terminal) {
			c.Stroke(line([2]float64{0, 0}, [2]float64{6, 3}))
		}, []string{"    ⡠⠊", "  ⡠⠊", "⡠⠊"}},
		{"a dashed slope", func(c *Terminal) {
			c.SetLineDash([]vg.Length{6, 6}, 0)
			c.Stroke(line([2]float64{0, 0.4}, [2]float64{3, 0.41}, [2]float64{6, 0.4}))
		}, []string{"", "", "⠤ ⠤ ⠤"}},
		{"light lines are left out", func(c *Terminal) {
			c.SetColor(color.Gray{0xee})
			c.Stroke(line([2]float64{0, 1.5}, [2]float64{6, 1.5}))
			c.Fill(line([2]float64{0, 0}, [2]float64{6, 0}, [2]float64{6, 3}))
		}, []string{"", "", ""}},
		{"a mark", func(c *Terminal) {
			c.Fill(line([2]float64{3.2, 1.4}, [2]float64{3.8, 1.4}, [2]float64{3.5, 1.6}))
		}, []string{"", "   •", ""}},
		{"a filled square", func(c *Terminal) {
			c.Fill(line([2]float64{1, 0}, [2]float64{4, 0}, [2]float64{4, 2}, [2]float64{1, 2}))
		}, []string{"", " ⣿⣿⣿", " ⣿⣿⣿"}},
		{"text over lines", func(c *Terminal) {
			c.Stroke(line([2]float64{0, 1.5}, [2]float64{6, 1.5}))
			c.FillString(font.Face{}, vg.Point{X: 1 * CellWidth, Y: 1 * CellHeight}, "µ Ω")
		}, []string{"", "─µ─Ω──", ""}},
		{"what leaves the picture", func(c *Terminal) {
			c.Stroke(line([2]float64{-5, 1.5}, [2]float64{50, 1.5}))
			c.FillString(font.Face{}, vg.Point{X: 4 * CellWidth, Y: 0}, "long text")
			c.FillString(font.Face{}, vg.Point{X: 0, Y: 9 * CellHeight}, "above")
		}, []string{"", "──────", "    lo"}},
		{"moved, pushed and popped", func(c *Terminal) {
			c.Push()
			c.Translate(vg.Point{X: 2 * CellWidth, Y: CellHeight})
			c.Scale(2, 1)
			c.Stroke(line([2]float64{0, 0.5}, [2]float64{1, 0.5}))
			c.Pop()
			c.Stroke(line([2]float64{0, 0.5}, [2]float64{1, 0.5}))
		}, []string{"", "  ──", "─"}},
	} {
		t.Run(tt.name, func(t *testing.T) {
			c := NewTerminal(6, 3)
			tt.draw(c)
			if diff := cmp.Diff(tt.want, strings.Split(c.Picture(""), "\n")); diff != "" {
				t.Errorf("picture (-want +got):\n%s", diff)
			}
		})
	}
}

// TestTerminalHeader: texts that stand sideways elsewhere are in the line above, the right one at the right.
func TestTerminalHeader(t *testing.T) {
	c := NewTerminal(20, 1)
	sty := text.Style{Color: color.Black, Rotation: math.Pi / 2, XAlign: draw.XCenter, Handler: Characters{text.Plain{}}}
	sty.Handler.Draw(c, "tones", sty, vg.Point{X: 19 * CellWidth, Y: 6})
	if got, want := c.Picture("density"), "density        tones\n"; got != want {
		t.Errorf("picture %q, want %q", got, want)
	}
}

// TestCharacters: text is aligned by whole cells.
func TestCharacters(t *testing.T) {
	for _, tt := range []struct {
		x    text.XAlignment
		y    text.YAlignment
		want string
	}{
		{draw.XLeft, draw.YBottom, "\n    ab\n\n"}, {draw.XRight, draw.YBottom, "\n  ab\n\n"},
		{draw.XCenter, draw.YBottom, "\n   ab\n\n"}, {draw.XLeft, draw.YTop, "\n\n    ab\n"},
	} {
		c := NewTerminal(8, 4)
		sty := text.Style{Color: color.Black, XAlign: tt.x, YAlign: tt.y, Handler: Characters{text.Plain{}}}
		sty.Handler.Draw(c, "ab", sty, vg.Point{X: 4 * CellWidth, Y: 2 * CellHeight})
		if got := c.Picture(""); got != tt.want {
			t.Errorf("aligned %g, %g: %q, want %q", tt.x, tt.y, got, tt.want)
		}
	}
}
