package plots

import (
	"image/color"
	"math"
	"strings"

	stdfont "golang.org/x/image/font"
	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/font/liberation"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// The colours of Okabe and Ito, told apart with every kind of colour vision, and the
// greys of the page.
var (
	black     = color.NRGBA{0x1a, 0x1a, 0x1a, 0xff}
	orange    = color.NRGBA{0xe6, 0x9f, 0x00, 0xff}
	sky       = color.NRGBA{0x56, 0xb4, 0xe9, 0xff}
	green     = color.NRGBA{0x00, 0x9e, 0x73, 0xff}
	yellow    = color.NRGBA{0xf0, 0xe4, 0x42, 0xff}
	blue      = color.NRGBA{0x00, 0x72, 0xb2, 0xff}
	vermilion = color.NRGBA{0xd5, 0x5e, 0x00, 0xff}
	purple    = color.NRGBA{0xcc, 0x79, 0xa7, 0xff}

	white    = color.NRGBA{0xff, 0xff, 0xff, 0xff}
	inkGrey  = color.NRGBA{0x4d, 0x4d, 0x4d, 0xff} // second rank text
	axisGrey = color.NRGBA{0x80, 0x80, 0x80, 0xff}
	gridGrey = color.NRGBA{0xdd, 0xdd, 0xdd, 0xff}
	missing  = color.NRGBA{0xc4, 0xc4, 0xc4, 0xff} // no value here
	outsideA = color.NRGBA{0xfb, 0xea, 0xda, 0xff} // shading beyond range A
	outsideB = color.NRGBA{0xf3, 0xcd, 0xa8, 0xff} // and beyond range B
)

// Sizes of type, points on a page 482 points wide: at half size the smallest is still
// 5 points high.
const (
	titleSize   = 14.5
	findingSize = 11.5
	labelSize   = 11
	smallSize   = 10
	dataWidth   = 1.7 // points, of a line that carries data
)

// style holds what all figures share: resolution and fonts. It is read only once made.
type style struct {
	dpi   int
	fonts text.Handler
}

func newStyle(dpi int) *style {
	return &style{dpi: dpi, fonts: text.Plain{Fonts: font.NewCache(liberation.Collection())}}
}

// text returns a text style of a size in points, aligned left on its base line.
func (s *style) text(size float64, c color.Color) text.Style {
	return text.Style{
		Color:   c,
		Font:    font.Font{Typeface: "Liberation", Variant: "Sans", Size: vg.Points(size)},
		Handler: s.fonts,
	}
}

func (s *style) bold(size float64, c color.Color) text.Style {
	t := s.text(size, c)
	t.Font.Weight = stdfont.WeightBold
	return t
}

func aligned(t text.Style, x text.XAlignment, y text.YAlignment) text.Style {
	t.XAlign, t.YAlign = x, y
	return t
}

// phaseStyle is the line of a phase (or of a pair, which takes that of its first). The
// legs of services, which run close together, share one.
func phaseStyle(phase string) draw.LineStyle {
	l := draw.LineStyle{Color: inkGrey, Width: vg.Points(dataWidth)}
	if phase == "" {
		return l
	}
	switch phase[0] {
	case '1', '2':
		l.Color = purple
	case 'A':
		l.Color = blue
	case 'B':
		l.Color, l.Dashes = vermilion, []vg.Length{vg.Points(6), vg.Points(2.5)}
	case 'C':
		l.Color, l.Dashes = green, []vg.Length{vg.Points(5), vg.Points(2), vg.Points(1.5), vg.Points(2)}
	}
	return l
}

// wrap breaks a text into lines not wider than width; a last line that would be one
// too many ends in an ellipsis.
func wrap(t text.Style, txt string, width vg.Length, most int) []string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(txt) {
		next := word
		if line != "" {
			next = line + " " + word
		}
		if line != "" && t.Width(next) > width {
			lines = append(lines, line)
			next = word
		}
		line = next
	}
	lines = append(lines, line)
	if len(lines) > most {
		rest := strings.Join(lines[most-1:], " ")
		lines = append(lines[:most-1], fit(t, rest, width))
	}
	for i := range lines {
		lines[i] = fit(t, lines[i], width)
	}
	return lines
}

// fit cuts a text that is wider than width and ends it in an ellipsis.
func fit(t text.Style, txt string, width vg.Length) string {
	txt = strings.Map(func(r rune) rune {
		if r < ' ' {
			return ' '
		}
		return r
	}, txt)
	if t.Width(txt) <= width {
		return txt
	}
	runes := []rune(txt)
	for len(runes) > 0 && t.Width(string(runes)+"…") > width {
		runes = runes[:len(runes)-1]
	}
	return string(runes) + "…"
}

// mix returns a + (b−a)·x for x in 0..1, by channel.
func mix(a, b color.NRGBA, x float64) color.NRGBA {
	x = math.Max(0, math.Min(1, x))
	ch := func(p, q uint8) uint8 { return uint8(math.Round(float64(p) + (float64(q)-float64(p))*x)) }
	return color.NRGBA{ch(a.R, b.R), ch(a.G, b.G), ch(a.B, b.B), 0xff}
}

// lightness is the share of white that a colour prints in grey, 0..1 (Rec. 601 luma).
func lightness(c color.NRGBA) float64 {
	return (0.299*float64(c.R) + 0.587*float64(c.G) + 0.114*float64(c.B)) / 255
}
