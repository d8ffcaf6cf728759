package study

import (
	"math"
	"strings"
	"time"

	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// summaryRow is a row of summary.csv that the comparison shows as it is.
type summaryRow struct{ group, name string }

// summaryRows are they, by group, in the order of reading.
func summaryRows() []summaryRow {
	var out []summaryRow
	for _, g := range []struct{ group, rows string }{
		{"voltage", "hours with a place below A;hours with a place above A;hours with a place below B;hours with a place above B;" +
			"customer-hours below A;customer-hours above A;customer-hours below B;customer-hours above B;customers ever outside A;" +
			"place-hours outside A;settling place-hours outside A;" +
			"lowest judged voltage;lowest judged voltage place;lowest judged voltage time;" +
			"highest judged voltage;highest judged voltage place;highest judged voltage time;highest unbalance"},
		{"energy", "source energy;load energy;generation energy;losses energy;losses share of energy supplied;line losses energy;transformer load losses energy;" +
			"transformer no-load losses energy;regulator losses energy;peak demand;peak demand time;lowest demand;peak losses;load factor;loss factor"},
		{"operations", "operations;tap operations;capacitor operations;device of most operations;device-hours at a stop;device-hours hunting"},
		{"run", "steps;low steps;unsolved steps;settling share"},
	} {
		for _, r := range strings.Split(g.rows, ";") {
			out = append(out, summaryRow{g.group, r})
		}
	}
	return out
}

// quantities fills compare.csv.
func (c *Comparison) quantities() {
	for _, r := range summaryRows() {
		q := Quantity{Group: r.group, Name: r.name}
		for _, x := range c.Cases {
			cell, unit := x.value(r.name)
			q.Cells = append(q.Cells, cell)
			if unit != "" {
				q.Unit = unit
			}
		}
		c.Quantities = append(c.Quantities, q)
		switch r.name {
		case "customer-hours above A":
			c.sum("customer-hours outside A", "customer-hours below A", "customer-hours above A")
		case "customer-hours above B":
			c.sum("customer-hours outside B", "customer-hours below B", "customer-hours above B")
		case "peak demand time":
			c.each("energy", "sum of monthly peaks", "kW", monthlyPeaks)
			c.each("energy", "power factor at peak demand", "1", peakFactor)
			c.each("energy", "power factor of the period", "1", periodFactor)
		case "device of most operations":
			c.devices()
		}
	}
	c.money()
}

func (c *Comparison) each(group, name, unit string, of func(*Case) float64) {
	q := Quantity{Group: group, Name: name, Unit: unit}
	for _, x := range c.Cases {
		q.Cells = append(q.Cells, results.FigureText(of(x)))
	}
	c.Quantities = append(c.Quantities, q)
}

// sum adds a row that is the sum of two others, which were rounded before.
func (c *Comparison) sum(name, a, b string) {
	p, q := c.Quantity(a), c.Quantity(b)
	s := Quantity{Group: p.Group, Name: name, Unit: p.Unit}
	for i := range c.Cases {
		s.Cells = append(s.Cells, results.FigureText(parse(p.Cells[i])+parse(q.Cells[i])))
	}
	c.Quantities = append(c.Quantities, s)
}

// monthlyPeaks is Σ of the source's highest real power of each month, kW: what a demand
// charge by the month counts.
func monthlyPeaks(x *Case) float64 {
	total, source := 0.0, x.Results.Steps.Column("source real [kW]")
	for _, m := range peaksOf(x, x.Peak) {
		kw := m.kw
		if math.IsNaN(kw) && m.row >= 0 {
			kw = source[m.row]
		}
		if !math.IsNaN(kw) {
			total += math.Max(0, kw)
		}
	}
	return total
}

// peakFactor is P/|S| at the source in the row of steps.csv that holds the peak demand.
func peakFactor(x *Case) float64 {
	text, _ := x.value("peak demand time")
	t, err := time.Parse(time.RFC3339, text)
	if err != nil {
		return math.NaN()
	}
	s := &x.Results.Steps
	row := rowAt(s, t.UnixNano())
	p, q := s.Column("source real [kW]")[row], s.Column("source reactive [kvar]")[row]
	return math.Abs(p) / math.Hypot(p, q)
}

// periodFactor is ΣP/√((ΣP)²+(ΣQ)²) over the rows that are ok, of the powers at their
// ends: what a meter of kWh and kvarh gives.
func periodFactor(x *Case) float64 {
	s := &x.Results.Steps
	p, q := s.Column("source real [kW]"), s.Column("source reactive [kvar]")
	kwh, kvarh := 0.0, 0.0
	for i := range p {
		if s.Status[i] == results.OK && !math.IsNaN(p[i]) && !math.IsNaN(q[i]) {
			kwh, kvarh = kwh+p[i], kvarh+q[i]
		}
	}
	return math.Abs(kwh) / math.Hypot(kwh, kvarh)
}

// devices adds the operations of each device, and the years that its expected life
// lasts at that pace.
func (c *Comparison) devices() {
	type key struct{ device, phase string }
	var keys []key
	seen := map[key]bool{}
	for _, x := range c.Cases {
		for _, d := range x.Results.Duty {
			if k := (key{d.Device, d.Phase}); !seen[k] {
				seen[k] = true
				keys = append(keys, k)
			}
		}
	}
	title := func(k key) string {
		if k.phase == "" {
			return k.device
		}
		return k.device + "." + k.phase
	}
	of := func(x *Case, k key) (operations float64) {
		for _, d := range x.Results.Duty {
			if d.Device == k.device && d.Phase == k.phase {
				return float64(d.Operations)
			}
		}
		return math.NaN()
	}
	years := periodYears(c.Cases[0].Study.Settings.Period)
	for _, k := range keys {
		q := Quantity{Group: "operations", Name: "operations of " + title(k), Unit: "1"}
		for _, x := range c.Cases {
			cell := ""
			if n := of(x, k); !math.IsNaN(n) {
				cell = whole(n)
			}
			q.Cells = append(q.Cells, cell)
		}
		c.Quantities = append(c.Quantities, q)
	}
	for _, k := range keys {
		c.each("operations", "expected life of "+title(k), "years", func(x *Case) float64 {
			n := of(x, k)
			if n == 0 {
				return math.NaN() // no operation wears nothing out
			}
			return c.lifeOf(x.Study.Model, k.device) / (n / years)
		})
	}
}

// lifeOf is the expected operations of a device: a ganged bank is a load tap changer.
func (c *Comparison) lifeOf(m *feeder.Model, device string) float64 {
	for i := range m.Regulators {
		if m.Regulators[i].Name == device {
			if m.Regulators[i].Ganged {
				return c.Life.LoadTapChanger
			}
			return c.Life.TapChanger
		}
	}
	return c.Life.Capacitor
}

// periodYears is the length of a period in years of 8,760 h.
func periodYears(p feeder.Period) float64 { return float64(p.End-p.Start) / 3.6e12 / 8760 }

func whole(x float64) string {
	s := results.FigureText(math.Round(x))
	s, _, _ = strings.Cut(s, ".")
	return s
}

// money adds what the period costs at the base's prices; nothing where there are none.
func (c *Comparison) money() {
	p := &c.Cases[0].Study.Settings.Prices
	bills := make([]bill, len(c.Cases))
	any := bill{}
	for i, x := range c.Cases {
		bills[i] = billOf(x, p, c.Cases[0].Price, c.Cases[0].Peak)
		any = bills[i]
	}
	add := func(name string, of func(bill) float64) {
		if math.IsNaN(of(any)) {
			return
		}
		q := Quantity{Group: "money", Name: name, Unit: c.Currency}
		for _, b := range bills {
			q.Cells = append(q.Cells, money(of(b)))
		}
		c.Quantities = append(c.Quantities, q)
	}
	add("cost of energy supplied", func(b bill) float64 { return b.Energy })
	add("cost of losses energy", func(b bill) float64 { return b.Losses })
	add("cost of peak demand", func(b bill) float64 { return b.Demand })
	add("cost of operations", func(b bill) float64 { return b.Operations })
	add("cost of losses energy, peak demand and operations", func(b bill) float64 { return sum(b.Losses, b.Demand, b.Operations) })
}
