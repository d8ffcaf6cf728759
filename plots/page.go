package plots

import (
	"bufio"
	"image"
	"image/color"
	stddraw "image/draw"
	"image/png"
	"io"
	"math"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
)

// pageWidth is the width of every figure: 17 cm, the text width of a report.
const pageWidth = 17 * vg.Centimeter

const pageMargin = vg.Length(9)

// page is one figure while it is drawn: a canvas with its head and foot in place, and
// the body that is left for panels.
type page struct {
	*style
	canvas *vgimg.Canvas
	c      draw.Canvas
	body   vg.Rectangle
	height vg.Length
}

// foot is what stands under every figure.
type foot struct {
	lines [2]string // what was studied; when and how
	tag   string    // "" for none
}

// newPage begins a figure whose body has the given height.
func (s *style) newPage(bodyHeight vg.Length, title, finding string, f foot) *page {
	titleText := s.bold(titleSize, black)
	findingText := s.text(findingSize, inkGrey)
	width := pageWidth - 2*pageMargin
	lines := wrap(findingText, finding, width, 3)
	const titleLine, findingLine, footLine = vg.Length(20), vg.Length(14.5), vg.Length(31)
	head := titleLine + findingLine*vg.Length(len(lines)) + 7
	height := pageMargin + head + bodyHeight + footLine + 3
	p := &page{style: s, height: height}
	p.canvas = vgimg.NewWith(vgimg.UseWH(pageWidth, height), vgimg.UseDPI(s.dpi), vgimg.UseBackgroundColor(color.White))
	p.c = draw.New(p.canvas)
	y := height - pageMargin
	p.c.FillText(aligned(titleText, text.XLeft, text.YTop), vg.Point{X: pageMargin, Y: y}, fit(titleText, title, width))
	y -= titleLine
	for _, l := range lines {
		p.c.FillText(aligned(findingText, text.XLeft, text.YTop), vg.Point{X: pageMargin, Y: y}, l)
		y -= findingLine
	}
	p.foot(f, width)
	p.body = vg.Rectangle{
		Min: vg.Point{X: pageMargin, Y: height - pageMargin - head - bodyHeight},
		Max: vg.Point{X: pageWidth - pageMargin, Y: height - pageMargin - head},
	}
	return p
}

// foot writes the case on the left and the tag of an invented study, framed, on the right.
func (p *page) foot(f foot, width vg.Length) {
	small := p.text(smallSize-0.5, inkGrey)
	base := vg.Length(7)
	if f.tag != "" {
		w := small.Width(f.tag)
		right := pageWidth - pageMargin
		p.label(small, right-5, base, text.XRight, text.YBottom, f.tag)
		box := vg.Rectangle{Min: vg.Point{X: right - w - 10, Y: base - 4}, Max: vg.Point{X: right, Y: base + 10}}
		p.outline(box, draw.LineStyle{Color: axisGrey, Width: vg.Points(0.6)})
		width -= w + 20
	}
	p.label(small, pageMargin, base, text.XLeft, text.YBottom, fit(small, f.lines[1], width))
	p.label(small, pageMargin, base+12, text.XLeft, text.YBottom, fit(small, f.lines[0], pageWidth-2*pageMargin))
}

// label writes one line of text at a point.
func (p *page) label(t text.Style, x, y vg.Length, ax text.XAlignment, ay text.YAlignment, txt string) {
	if txt == "" {
		return
	}
	if ay == text.YCenter {
		// The library centres the line with its descent; the eye centres the capitals.
		y += t.Font.Size * 0.16
	}
	p.c.FillText(aligned(t, ax, ay), vg.Point{X: x, Y: y}, txt)
}

// haloed writes a text on a white rim, so that it reads on top of lines.
func (p *page) haloed(t text.Style, x, y vg.Length, ax text.XAlignment, ay text.YAlignment, txt string) {
	rim := t
	rim.Color = white
	for i := 0; i < 8; i++ {
		a := float64(i) * math.Pi / 4
		p.label(rim, x+vg.Length(1.2*math.Cos(a)), y+vg.Length(1.2*math.Sin(a)), ax, ay, txt)
	}
	p.label(t, x, y, ax, ay, txt)
}

func (p *page) outline(r vg.Rectangle, l draw.LineStyle) {
	p.c.StrokeLines(l, []vg.Point{r.Min, {X: r.Max.X, Y: r.Min.Y}, r.Max, {X: r.Min.X, Y: r.Max.Y}, r.Min})
}

func (p *page) dot(x, y vg.Length, r float64, c color.Color) {
	p.c.DrawGlyphNoClip(draw.GlyphStyle{Color: c, Radius: vg.Points(r), Shape: draw.CircleGlyph{}}, vg.Point{X: x, Y: y})
}

// pixel is the size of a device pixel.
func (p *page) pixel() vg.Length { return vg.Inch / vg.Length(p.dpi) }

// pixels returns the device pixels of a rectangle, edges rounded.
func (p *page) pixels(r vg.Rectangle) image.Rectangle {
	px := func(l vg.Length) int { return int(math.Round(float64(l / p.pixel()))) }
	h := p.canvas.Image().Bounds().Dy()
	return image.Rect(px(r.Min.X), h-px(r.Max.Y), px(r.Max.X), h-px(r.Min.Y))
}

// snap moves the edges of a rectangle onto device pixels.
func (p *page) snap(r vg.Rectangle) vg.Rectangle {
	s := func(l vg.Length) vg.Length { return vg.Length(math.Round(float64(l/p.pixel()))) * p.pixel() }
	return vg.Rectangle{Min: vg.Point{X: s(r.Min.X), Y: s(r.Min.Y)}, Max: vg.Point{X: s(r.Max.X), Y: s(r.Max.Y)}}
}

// fill paints a rectangle on exactly its device pixels: hard edges, no seams between
// neighbours, and cheap enough for one a pixel column.
func (p *page) fill(r vg.Rectangle, c color.Color) {
	stddraw.Draw(p.canvas.Image(), p.pixels(r), image.NewUniform(c), image.Point{}, stddraw.Over)
}

// bar paints a rectangle that is at least a pixel wide and high.
func (p *page) bar(x0, y0, x1, y1 vg.Length, c color.Color) {
	r := p.pixels(vg.Rectangle{Min: vg.Point{X: min(x0, x1), Y: min(y0, y1)}, Max: vg.Point{X: max(x0, x1), Y: max(y0, y1)}})
	if r.Dx() == 0 {
		r.Max.X++
	}
	if r.Dy() == 0 {
		r.Min.Y--
	}
	stddraw.Draw(p.canvas.Image(), r, image.NewUniform(c), image.Point{}, stddraw.Over)
}

// writeTo writes the page as a PNG.
func (p *page) writeTo(w io.Writer) error {
	b := bufio.NewWriter(w)
	enc := png.Encoder{CompressionLevel: png.DefaultCompression}
	if err := enc.Encode(b, compact(p.canvas.Image())); err != nil {
		return err
	}
	return b.Flush()
}

// compact returns the image with a palette where 256 colours hold it, else as it is:
// the same pixels in a smaller file.
func compact(img image.Image) image.Image {
	rgba, ok := img.(*image.RGBA)
	if !ok {
		return img
	}
	index := make(map[color.RGBA]uint8, 256)
	var palette color.Palette
	out := image.NewPaletted(rgba.Bounds(), nil)
	var last color.RGBA
	var at uint8
	for i, n := 0, len(rgba.Pix)/4; i < n; i++ {
		c := color.RGBA{rgba.Pix[4*i], rgba.Pix[4*i+1], rgba.Pix[4*i+2], rgba.Pix[4*i+3]}
		if i == 0 || c != last {
			k, ok := index[c]
			if !ok {
				if len(palette) == 256 {
					return img
				}
				k = uint8(len(palette))
				palette = append(palette, c)
				index[c] = k
			}
			last, at = c, k
		}
		out.Pix[i] = at
	}
	out.Palette = palette
	return out
}
