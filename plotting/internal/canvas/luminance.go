package canvas

import (
	"image/color"
	"math"
)

// Luminance returns the relative luminance of a colour, 0 for black to 1 for white, as the Web
// Content Accessibility Guidelines 2.1 define it.
func Luminance(clr color.Color) float64 {
	c := color.NRGBAModel.Convert(clr).(color.NRGBA)
	linear := func(v uint8) float64 {
		if s := float64(v) / 255; s > 0.04045 {
			return math.Pow((s+0.055)/1.055, 2.4)
		} else {
			return s / 12.92
		}
	}
	return 0.2126*linear(c.R) + 0.7152*linear(c.G) + 0.0722*linear(c.B)
}
