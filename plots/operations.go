package plots

import (
	"fmt"
	"math"
	"sort"

	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
)

// opsRow is a device's operations by column of the calendar.
type opsRow struct {
	name   string
	counts []int
	total  int
}

// mostDevices is how many devices the table of operations names.
const mostDevices = 20

func drawOperations(s *survey, st *style) (*page, Figure) {
	cal := s.span.calendar()
	rows := s.operationRows(cal)
	fig := Figure{Title: "Operations by device and " + cal.word}
	fig.Finding = s.operationsFinding(rows, cal)
	rows = lump(rows, mostDevices, len(cal.starts))
	fig.Alt = "Table of the number of operations, devices down and each " + cal.word + " across, darker where there are more. " + fig.Finding
	const rowHeight = vg.Length(19)
	height := 44 + rowHeight*vg.Length(len(rows))
	if len(rows) == 0 {
		height = 60
	}
	p := st.newPage(height, fig.Title, fig.Finding, s.foot())
	if len(rows) == 0 {
		p.label(p.text(labelSize, inkGrey), p.body.Min.X, (p.body.Min.Y+p.body.Max.Y)/2, text.XLeft, text.YCenter, "The feeder has no regulator, tap changer or capacitor.")
		return p, fig
	}
	name, value := p.text(labelSize, black), p.text(smallSize, black)
	left := vg.Length(0)
	for _, r := range rows {
		left = max(left, name.Width(r.name))
	}
	left = p.body.Min.X + min(left, 130) + 8
	totals := vg.Length(46)
	right := p.body.Max.X - totals
	w := min((right-left)/vg.Length(len(cal.starts)), 70)
	right = left + w*vg.Length(len(cal.starts))
	top := p.body.Max.Y - 22
	most := 1
	for _, r := range rows {
		for _, c := range r.counts {
			most = max(most, c)
		}
	}
	every := 1
	for vg.Length(every)*w < name.Width(widest(name, cal.labels))+4 {
		every++
	}
	for i, l := range cal.labels {
		if i%every == 0 {
			p.label(p.text(labelSize, inkGrey), left+w*(vg.Length(i)+0.5), top+6, text.XCenter, text.YBottom, l)
		}
	}
	p.label(p.bold(labelSize, black), right+totals, top+6, text.XRight, text.YBottom, "total")
	numbers := w > value.Width(number(float64(most), 0))+3
	for k, r := range rows {
		y := top - rowHeight*vg.Length(k+1)
		mid := y + rowHeight/2
		p.label(name, left-6, mid, text.XRight, text.YCenter, fit(name, r.name, left-6-p.body.Min.X))
		for i, c := range r.counts {
			x := left + w*vg.Length(i)
			col := mix(white, blue, 0.08+0.92*math.Pow(float64(c)/float64(most), 0.8))
			if c == 0 {
				col = white
			}
			p.fill(vg.Rectangle{Min: vg.Point{X: x + 0.6, Y: y + 0.6}, Max: vg.Point{X: x + w - 0.6, Y: y + rowHeight - 0.6}}, col)
			if !numbers {
				continue
			}
			t := value
			t.Color = inkOn(col)
			txt := number(float64(c), 0)
			if c == 0 {
				txt, t.Color = "·", inkGrey
			}
			p.label(t, x+w/2, mid, text.XCenter, text.YCenter, txt)
		}
		p.label(p.bold(smallSize, black), right+totals, mid, text.XRight, text.YCenter, number(float64(r.total), 0))
	}
	p.label(p.text(smallSize, inkGrey), left, p.body.Min.Y+4, text.XLeft, text.YBottom, "Number of operations in each "+cal.word+"; one tap or one switching is one operation.")
	return p, fig
}

func widest(t text.Style, labels []string) string {
	best := ""
	for _, l := range labels {
		if best == "" || t.Width(l) > t.Width(best) {
			best = l
		}
	}
	return best
}

// operationRows counts by device, in the order of duty.csv.
func (s *survey) operationRows(cal calendar) []opsRow {
	var rows []opsRow
	index := map[string]int{}
	row := func(device, phase string) *opsRow {
		name := device
		if phase != "" {
			name += "." + phase
		}
		i, ok := index[name]
		if !ok {
			i = len(rows)
			index[name] = i
			rows = append(rows, opsRow{name: name, counts: make([]int, len(cal.starts))})
		}
		return &rows[i]
	}
	for _, d := range s.Duty {
		row(d.Device, d.Phase)
	}
	for _, o := range s.Operations {
		r := row(o.Device, o.Phase)
		r.counts[cal.at(o.Time)]++
		r.total++
	}
	return rows
}

// lump keeps the devices that move most, in their order, and adds up the others.
func lump(rows []opsRow, most, columns int) []opsRow {
	if len(rows) <= most {
		return rows
	}
	order := make([]int, len(rows))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool { return rows[order[i]].total > rows[order[j]].total })
	keep := append([]int(nil), order[:most-1]...)
	sort.Ints(keep)
	var out []opsRow
	for _, i := range keep {
		out = append(out, rows[i])
	}
	rest := opsRow{name: fmt.Sprintf("%d others", len(rows)-len(keep)), counts: make([]int, columns)}
	for _, i := range order[most-1:] {
		for c, n := range rows[i].counts {
			rest.counts[c] += n
		}
		rest.total += rows[i].total
	}
	return append(out, rest)
}

func (s *survey) operationsFinding(rows []opsRow, cal calendar) string {
	if len(rows) == 0 {
		return "There is nothing that moves."
	}
	total, best := 0, 0
	by := make([]int, len(cal.starts))
	for i, r := range rows {
		total += r.total
		if r.total > rows[best].total {
			best = i
		}
		for c, n := range r.counts {
			by[c] += n
		}
	}
	if total == 0 {
		return "No device operates."
	}
	b := rows[best]
	txt := fmt.Sprintf("%s in all; %s leads with %s", count(total, "operation", "operations"), b.name, number(float64(b.total), 0))
	if days := s.span.days(); days >= 2 {
		txt += fmt.Sprintf(", %s a day", number(float64(b.total)/days, 1))
	}
	if len(by) > 1 {
		top := 0
		for c := range by {
			if by[c] > by[top] {
				top = c
			}
		}
		txt += fmt.Sprintf("; the busiest %s is %s with %s", cal.word, cal.name(top), number(float64(by[top]), 0))
	}
	return txt + "."
}
