package plots

import (
	"fmt"
	"image/color"
	"math"

	"gonum.org/v1/plot/vg"
)

// lossKind is a kind of losses: its column of powers in steps.csv and its colour,
// chosen so that neighbours differ in lightness as well.
type lossKind struct {
	column, month string // of steps.csv and of monthly.csv
	name          string
	spoken        string
	color         color.NRGBA
}

var lossKinds = [...]lossKind{
	{"line losses [kW]", "line losses [kWh]", "lines", "line losses", blue},
	{"transformer load losses [kW]", "transformer load losses [kWh]", "transformers, load", "load losses of transformers", orange},
	{"transformer no-load losses [kW]", "transformer no-load losses [kWh]", "transformers, no-load", "no-load losses of transformers", yellow},
	{"regulator losses [kW]", "regulator losses [kWh]", "regulators", "losses of regulators", color.NRGBA{0x55, 0x30, 0x45, 0xff}},
}

func drawLosses(s *survey, st *style) (*page, Figure) {
	cal := s.span.calendar()
	fig := Figure{Title: "Losses by kind and " + cal.word}
	kwh := s.lossEnergies(cal)
	fig.Finding = s.lossesFinding(kwh, cal)
	fig.Alt = "Stacked bars of the energy lost in each " + cal.word + ", by kind of loss. " + fig.Finding
	p := st.newPage(250, fig.Title, fig.Finding, s.foot())
	top := 0.0
	for i := range cal.starts {
		sum := 0.0
		for k := range lossKinds {
			sum += kwh[k][i]
		}
		top = math.Max(top, sum)
	}
	divide, unit := 1.0, "kWh"
	if top >= 5000 {
		divide, unit = 1000, "MWh"
	}
	if top == 0 {
		top = 1
	}
	_, hi := roundRange(0, top/divide, 5)
	n := p.panel(vg.Rectangle{
		Min: vg.Point{X: p.body.Min.X + 44, Y: p.body.Min.Y + 42},
		Max: vg.Point{X: p.body.Max.X - 8, Y: p.body.Max.Y - 23},
	}, 0, float64(len(cal.starts)), 0, hi)
	n.yAxis(linear(0, hi, 5), "Energy lost ["+unit+"]")
	w := min(0.72, 60/float64(n.width())*float64(len(cal.starts)))
	for i := range cal.starts {
		base := 0.0
		for k, kind := range lossKinds {
			v := math.Max(kwh[k][i]/divide, 0)
			if v > 0 {
				x0, x1 := n.x(float64(i)+0.5-w/2), n.x(float64(i)+0.5+w/2)
				n.bar(x0, n.y(base), x1, n.y(base+v), kind.color)
				// A thin rim keeps neighbours apart in grey.
				if n.y(base+v)-n.y(base) > 3*n.pixel() && base > 0 {
					n.bar(x0, n.y(base), x1, n.y(base)+n.pixel(), white)
				}
			}
			base += v
		}
	}
	n.xAxis(cal.ticks(n), "")
	var items []key
	for k, kind := range lossKinds {
		if sumOf(kwh[k]) > 0 {
			items = append(items, key{fill: kind.color, text: kind.name})
		}
	}
	n.keys(items, n.rect.Min.X, n.rect.Min.Y-31)
	return p, fig
}

// ticks labels the columns of a calendar on an axis of one unit a column.
func (c calendar) ticks(n *panel) []tick {
	t := n.text(labelSize, black)
	every := 1
	for n.width()/vg.Length(len(c.labels))*vg.Length(every) < t.Width(widest(t, c.labels))+4 {
		every++
	}
	var ticks []tick
	for i, l := range c.labels {
		if i%every == 0 {
			ticks = append(ticks, tick{at: float64(i) + 0.5, label: l, bare: true})
		}
	}
	return ticks
}

func sumOf(v []float64) float64 {
	sum := 0.0
	for _, x := range v {
		sum += x
	}
	return sum
}

// lossEnergies returns kWh by kind and column of the calendar: by month those of
// monthly.csv. By day or by year they come from steps.csv, which has the energy of all
// losses of a row but only the powers of the kinds, at its end: the energy is shared
// out in the proportion of those powers.
func (s *survey) lossEnergies(cal calendar) [len(lossKinds)][]float64 {
	var out [len(lossKinds)][]float64
	if cal.word == "month" && s.monthlyLosses(cal, &out) {
		return out
	}
	var powers [len(lossKinds)][]float64
	for k, kind := range lossKinds {
		out[k] = make([]float64, len(cal.starts))
		powers[k] = s.okOnly(kind.column)
	}
	energy := s.okOnly("losses energy [kWh]")
	for i, e := range energy {
		total := 0.0
		for k := range powers {
			total += powers[k][i]
		}
		if math.IsNaN(e) || math.IsNaN(total) || total == 0 {
			continue
		}
		c := cal.at(s.At(i))
		for k := range powers {
			out[k][c] += e * powers[k][i] / total
		}
	}
	return out
}

func (s *survey) lossesFinding(kwh [len(lossKinds)][]float64, cal calendar) string {
	total, best := 0.0, 0
	for k := range kwh {
		total += sumOf(kwh[k])
		if sumOf(kwh[k]) > sumOf(kwh[best]) {
			best = k
		}
	}
	if total <= 0 {
		if s.low < 0 {
			return "No step was solved, so there are no losses to show."
		}
		return "There are no losses."
	}
	in := 0.0
	for _, column := range [...]string{"source energy [kWh]", "generation energy [kWh]"} {
		for _, v := range s.okOnly(column) {
			if !math.IsNaN(v) {
				in += v
			}
		}
	}
	txt := fmt.Sprintf("%s are lost", energy(total))
	if in > 0 {
		txt += fmt.Sprintf(", %s of the energy that enters the feeder", percent(100*total/in))
	}
	txt += fmt.Sprintf("; %s make %s of it", lossKinds[best].spoken, percent(100*sumOf(kwh[best])/total))
	if best != 2 && sumOf(kwh[2]) > 0 {
		txt += fmt.Sprintf(" and no-load losses %s", percent(100*sumOf(kwh[2])/total))
	}
	return txt + "."
}

// monthlyLosses reads the energies from monthly.csv; false where it has not all of
// them.
func (s *survey) monthlyLosses(cal calendar, out *[len(lossKinds)][]float64) bool {
	var kwh [len(lossKinds)][]float64
	month := s.Monthly.Column("month")
	for k := range lossKinds {
		kwh[k] = make([]float64, len(cal.starts))
	}
	for i, start := range cal.starts {
		found := false
		for r, row := range s.Monthly.Rows {
			if row[month] != start.Format("2006-01") {
				continue
			}
			found = true
			for k, kind := range lossKinds {
				kwh[k][i] = s.Monthly.Number(r, kind.month)
				if math.IsNaN(kwh[k][i]) {
					return false
				}
			}
		}
		if !found {
			return false
		}
	}
	*out = kwh
	return true
}
