// Drawlogo writes the kernel's logos, the vector and its two raster sizes, from one geometry. It is run by go generate
// in the folder above.
package main

import (
	"fmt"
	"log"
	"os"
	"strings"

	"git.sr.ht/~sbinet/gg"
)

// The drawing's unit is 1/64 of its side. A three-level step trace runs over a rounded square; the blue and the orange
// are those of M. Okabe and K. Ito's palette (2008), which colour-blind readers can tell apart.
const (
	side   = 64.0
	corner = 13.0
	stroke = 5.0
	ground = "#0072B2"
	line   = "#FFFFFF"
	mark   = "#E69F00"
)

type point struct{ x, y float64 }

// trace is the whole path; pulse is its part in the second colour.
var (
	trace = []point{{8, 32}, {18, 32}, {18, 16}, {28, 16}, {28, 48}, {38, 48}, {38, 32}}
	pulse = []point{{38, 32}, {38, 16}, {48, 16}, {48, 32}, {56, 32}}
)

func main() {
	log.SetFlags(0)
	log.SetPrefix("drawlogo: ")
	if err := os.WriteFile("logo-svg.svg", []byte(vector()), 0o644); err != nil {
		log.Fatal(err)
	}
	for _, size := range []int{32, 64} {
		if err := raster(size); err != nil {
			log.Fatal(err)
		}
	}
}

func vector() string {
	var b strings.Builder
	fmt.Fprintf(&b, `<svg xmlns="http://www.w3.org/2000/svg" width="%g" height="%[1]g" viewBox="0 0 %[1]g %[1]g">`+"\n", side)
	fmt.Fprintf(&b, ` <rect width="%g" height="%[1]g" rx="%g" fill="%s"/>`+"\n", side, corner, ground)
	fmt.Fprintf(&b, ` <g fill="none" stroke-width="%g" stroke-linejoin="round" stroke-linecap="round">`+"\n", stroke)
	for _, p := range []struct {
		path   []point
		colour string
	}{{trace, line}, {pulse, mark}} {
		fmt.Fprintf(&b, `  <polyline stroke="%s" points="`, p.colour)
		for i, q := range p.path {
			if i > 0 {
				b.WriteByte(' ')
			}
			fmt.Fprintf(&b, "%g,%g", q.x, q.y)
		}
		b.WriteString("\"/>\n")
	}
	b.WriteString(" </g>\n</svg>\n")
	return b.String()
}

func raster(size int) error {
	dc := gg.NewContext(size, size)
	dc.Scale(float64(size)/side, float64(size)/side)
	dc.SetHexColor(ground)
	dc.DrawRoundedRectangle(0, 0, side, side, corner)
	dc.Fill()
	dc.SetLineWidth(stroke * float64(size) / side) // gg does not scale the width of lines
	dc.SetLineJoinRound()
	dc.SetLineCapRound()
	draw := func(path []point, colour string) {
		dc.SetHexColor(colour)
		for _, p := range path {
			dc.LineTo(p.x, p.y)
		}
		dc.Stroke()
	}
	draw(trace, line)
	draw(pulse, mark)
	return dc.SavePNG(fmt.Sprintf("logo-%dx%[1]d.png", size))
}
