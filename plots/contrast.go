package plots

import (
	"image/color"
	"math"
)

// textContrast is the least contrast of text on its ground: W3C, Web Content Accessibility
// Guidelines (WCAG) 2.1, success criterion 1.4.3, level AA.
const textContrast = 4.5

// luminance is the relative luminance of a colour, 0 for black to 1 for white (W3C, WCAG
// 2.1, definition of relative luminance):
//
//	L = 0.2126·R + 0.7152·G + 0.0722·B
//
// with each channel c in 0..1 made linear: c/12.92 up to 0.03928, ((c + 0.055)/1.055)^2.4
// above. (Between 0.03928 and the 0.04045 of sRGB lies no colour of eight bits.)
func luminance(c color.NRGBA) float64 {
	linear := func(x uint8) float64 {
		v := float64(x) / 255
		if v <= 0.03928 {
			return v / 12.92
		}
		return math.Pow((v+0.055)/1.055, 2.4)
	}
	return 0.2126*linear(c.R) + 0.7152*linear(c.G) + 0.0722*linear(c.B)
}

// contrast is the contrast ratio of two opaque colours, 1 to 21 (W3C, WCAG 2.1, definition
// of contrast ratio): (L1 + 0.05)/(L2 + 0.05), L1 that of the lighter one.
func contrast(a, b color.NRGBA) float64 {
	x, y := luminance(a), luminance(b)
	return (math.Max(x, y) + 0.05) / (math.Min(x, y) + 0.05)
}

// inkOn is the colour of text on a ground: black or white, whichever stands out more. It
// is never below √(1.05/0.05) = 4.58 to 1.
func inkOn(ground color.NRGBA) color.NRGBA {
	pure := color.NRGBA{A: 0xff}
	if contrast(white, ground) > contrast(pure, ground) {
		return white
	}
	return pure
}
