package plots

import (
	"image/color"
	"math"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// mostLabels is how many devices of a map are named.
const mostLabels = 24

// mapDevices marks the devices and names them; it returns the kinds there are and where
// the marks stand.
func (s *survey) mapDevices(n *panel, l layout) (kinds []string, spots []vg.Point) {
	devices := s.devices(l)
	if len(devices) > 400 {
		devices = devices[:400]
	}
	spots = make([]vg.Point, len(devices))
	var taken []vg.Point
	for i, d := range devices {
		home := vg.Point{X: n.x(d.x), Y: n.y(d.y)}
		spots[i] = freeSpot(home, taken, n.rect)
		taken = append(taken, spots[i])
		if spots[i] != home {
			n.c.StrokeLine2(draw.LineStyle{Color: black, Width: vg.Points(0.6)}, home.X, home.Y, spots[i].X, spots[i].Y)
		}
		if len(kinds) == 0 || kinds[len(kinds)-1] != d.kind {
			kinds = append(kinds, d.kind)
		}
	}
	for i, d := range devices {
		n.deviceMark(d.kind, spots[i].X, spots[i].Y)
	}
	crowd := s.crowd(n, l)
	var boxes []vg.Rectangle
	for _, p := range spots {
		boxes = append(boxes, vg.Rectangle{Min: vg.Point{X: p.X - 5, Y: p.Y - 5}, Max: vg.Point{X: p.X + 5, Y: p.Y + 5}})
	}
	t := n.bold(smallSize, black)
	room := vg.Rectangle{Min: n.body.Min, Max: vg.Point{X: n.rect.Max.X + 8, Y: n.body.Max.Y}}
	for i, d := range devices {
		if i >= mostLabels {
			break
		}
		name := fit(t, d.name, 90)
		box, ax, ok := labelBox(spots[i], t.Width(name), boxes, crowd, room)
		if !ok {
			continue // better no name than two on top of each other
		}
		boxes = append(boxes, box)
		x := box.Min.X
		if ax == text.XRight {
			x = box.Max.X
		}
		n.haloed(t, x, (box.Min.Y+box.Max.Y)/2, ax, text.YCenter, name)
	}
	return kinds, spots
}

// freeSpot is home, or the nearest place around it that no mark has taken.
func freeSpot(home vg.Point, taken []vg.Point, in vg.Rectangle) vg.Point {
	free := func(p vg.Point) bool {
		for _, q := range taken {
			if math.Hypot(float64(p.X-q.X), float64(p.Y-q.Y)) < 11.5 {
				return false
			}
		}
		return true
	}
	if free(home) {
		return home
	}
	for ring := 1; ring <= 3; ring++ {
		for k := range 8 {
			a := math.Pi/2 + float64(k)*math.Pi/4
			r := 13 * float64(ring)
			p := vg.Point{X: home.X + vg.Length(r*math.Cos(a)), Y: home.Y + vg.Length(r*math.Sin(a))}
			if p.X > in.Min.X && p.X < in.Max.X && p.Y > in.Min.Y && p.Y < in.Max.Y && free(p) {
				return p
			}
		}
	}
	return home
}

// crowd samples the lines of the map, so that labels can stand beside them.
func (s *survey) crowd(n *panel, l layout) []vg.Point {
	var pts []vg.Point
	if len(s.Branches) > 2000 {
		return nil
	}
	for _, b := range s.Branches {
		a, ok1 := l.at[b.From]
		z, ok2 := l.at[b.To]
		if !ok1 || !ok2 {
			continue
		}
		x0, y0, x1, y1 := n.x(a[0]), n.y(a[1]), n.x(z[0]), n.y(z[1])
		k := int(math.Hypot(float64(x1-x0), float64(y1-y0))/4) + 1
		for i := 0; i <= k; i++ {
			f := vg.Length(i) / vg.Length(k)
			pts = append(pts, vg.Point{X: x0 + f*(x1-x0), Y: y0 + f*(y1-y0)})
		}
	}
	return pts
}

// covered is the cost of a label on top of another one.
const covered = 300

// labelBox chooses among places around a mark the one that covers least. It is not
// free where even that covers another label or leaves the page.
func labelBox(at vg.Point, width vg.Length, boxes []vg.Rectangle, crowd []vg.Point, in vg.Rectangle) (box vg.Rectangle, side text.XAlignment, free bool) {
	const h = vg.Length(11)
	best, bestAlign, least := vg.Rectangle{}, text.XLeft, math.Inf(1)
	for _, o := range [...]struct{ dx, dy vg.Length }{{8, 0}, {-8, 0}, {6, 10}, {-6, 10}, {6, -10}, {-6, -10}, {0, 13}, {0, -13}, {6, 20}, {-6, 20}, {6, -20}, {-6, -20}, {0, 24}, {0, -24}} {
		r := vg.Rectangle{Min: vg.Point{X: at.X + o.dx, Y: at.Y + o.dy - h/2}}
		ax := text.XLeft
		switch {
		case o.dx < 0:
			r.Min.X -= width
			ax = text.XRight
		case o.dx == 0:
			r.Min.X -= width / 2
		}
		r.Max = vg.Point{X: r.Min.X + width, Y: r.Min.Y + h}
		cost := math.Abs(float64(o.dy)) / 6
		for _, b := range boxes {
			if r.Min.X < b.Max.X && b.Min.X < r.Max.X && r.Min.Y < b.Max.Y && b.Min.Y < r.Max.Y {
				cost += covered
			}
		}
		for _, p := range crowd {
			if p.X > r.Min.X && p.X < r.Max.X && p.Y > r.Min.Y && p.Y < r.Max.Y {
				cost++
			}
		}
		if r.Min.X < in.Min.X || r.Max.X > in.Max.X+2 || r.Min.Y < in.Min.Y-2 || r.Max.Y > in.Max.Y+2 {
			cost += 1000
		}
		if cost < least {
			best, bestAlign, least = r, ax, cost
		}
	}
	return best, bestAlign, least < covered
}

// deviceMark draws the mark of a kind of device: shapes tell them apart in grey too.
func (p *page) deviceMark(kind string, x, y vg.Length) {
	rim := draw.LineStyle{Color: black, Width: vg.Points(1.1)}
	switch kind {
	case "source":
		p.polygon(x, y, 6, 4, math.Pi/4, black, rim)
	case "regulator":
		p.polygon(x, y, 6, 4, 0, orange, rim)
	case "transformer":
		for _, d := range [...]vg.Length{-2.6, 2.6} {
			p.dot(x+d, y, 4, white)
		}
		for _, d := range [...]vg.Length{-2.6, 2.6} {
			p.ring(x+d, y, 4)
		}
	case "capacitor":
		p.dot(x, y, 5.2, white)
		p.ring(x, y, 5.2)
		p.c.StrokeLine2(rim, x-1.4, y-3, x-1.4, y+3)
		p.c.StrokeLine2(rim, x+1.4, y-3, x+1.4, y+3)
	case "generator":
		p.polygon(x, y, 5.4, 6, math.Pi/2, yellow, rim)
	}
}

// polygon is a regular one of the given number of corners.
func (p *page) polygon(x, y vg.Length, r float64, corners int, turn float64, fill color.Color, rim draw.LineStyle) {
	pts := make([]vg.Point, 0, corners+1)
	for i := range corners {
		a := turn + 2*math.Pi*float64(i)/float64(corners)
		pts = append(pts, vg.Point{X: x + vg.Points(r*math.Cos(a)), Y: y + vg.Points(r*math.Sin(a))})
	}
	p.c.FillPolygon(fill, pts)
	p.c.StrokeLines(rim, append(pts, pts[0]))
}
