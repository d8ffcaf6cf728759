package study

import (
	"math"
	"strconv"
	"time"

	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// A month is what a local month costs.
type month struct {
	name   string // 2025-01
	energy float64
	peak   float64 // kW, of the source
	at     time.Time
}

// bill is what a case's period costs, in the currency of [prices]. What has no price is
// NaN.
type bill struct {
	Energy     float64 // of all the energy supplied by the source
	Losses     float64 // of the losses alone
	Demand     float64 // of the monthly peaks
	LossDemand float64 // of the losses at those peaks
	Operations float64
}

// sum adds what has a price; NaN where nothing has.
func sum(parts ...float64) float64 {
	total, any := 0.0, false
	for _, x := range parts {
		if !math.IsNaN(x) {
			total, any = total+x, true
		}
	}
	if !any {
		return math.NaN()
	}
	return total
}

// billOf prices a case at the prices of the base. With a flat price the energies are
// those of summary.csv. With a price profile they are those of the rows of steps.csv
// that are ok, each at the time-weighted mean price of the row; exact where a row is a
// step. The demand is the highest real power of the source in each month (monthly.csv),
// or, where [prices] names another peak, the source's power of the row in which that
// profile is highest in the month. The losses at a peak are those of steps.csv in the
// row that holds it.
func billOf(c *Case, p *feeder.Prices, price, peak []float64) bill {
	f := c.Results
	b := bill{Energy: p.Energy * c.number("source energy"), Losses: p.Energy * c.number("losses energy"),
		Operations: p.Operation * c.number("operations")}
	if price != nil {
		b.Energy = pricedRows(c, "source energy [kWh]", price)
		b.Losses = pricedRows(c, "losses energy [kWh]", price)
	}
	if math.IsNaN(p.Demand) {
		b.Demand, b.LossDemand = math.NaN(), math.NaN()
		return b
	}
	source, losses := f.Steps.Column("source real [kW]"), f.Steps.Column("losses real [kW]")
	for _, m := range peaksOf(c, peak) {
		if m.row < 0 {
			continue
		}
		kw := m.kw
		if math.IsNaN(kw) {
			kw = source[m.row]
		}
		if !math.IsNaN(kw) {
			b.Demand += p.Demand * math.Max(0, kw)
		}
		if x := losses[m.row]; !math.IsNaN(x) {
			b.LossDemand += p.Demand * x
		}
	}
	return b
}

// monthPeak is the instant that a month's demand is charged for.
type monthPeak struct {
	month string
	kw    float64 // of the source there; NaN: that of the row
	row   int     // of steps.csv; −1: the month has none
}

// peaksOf finds the peak of each month: the feeder's own, or that of a profile by step.
func peaksOf(c *Case, peak []float64) []monthPeak {
	f := c.Results
	var out []monthPeak
	col, at := f.Monthly.Column("month"), f.Monthly.Column("peak time")
	for r, row := range f.Monthly.Rows {
		m := monthPeak{month: row[col], kw: f.Monthly.Number(r, "peak [kW]"), row: -1}
		if t, err := time.Parse(time.RFC3339, row[at]); err == nil {
			m.row = rowAt(&f.Steps, t.UnixNano())
		}
		out = append(out, m)
	}
	if peak == nil {
		return out
	}
	p := c.Study.Settings.Period
	highest := make([]float64, len(out))
	for i := range out {
		out[i].row, out[i].kw, highest[i] = -1, math.NaN(), math.Inf(-1)
	}
	for step, v := range peak {
		t := p.Start + int64(step)*p.Step
		name := time.Unix(0, t).In(p.Zone).Format("2006-01")
		for i := range out {
			if row := rowAt(&f.Steps, t); out[i].month == name && v > highest[i] && f.Steps.Status[row] == results.OK {
				highest[i], out[i].row = v, row
			}
		}
	}
	return out
}

// rowAt is the row of steps.csv that an instant lies in.
func rowAt(s *results.Steps, t int64) int {
	if len(s.Time) == 0 || s.RowLength <= 0 {
		return -1
	}
	i := int((t - s.Time[0]) / s.RowLength)
	return min(max(i, 0), len(s.Time)-1)
}

// pricedRows is Σ energy·price over the rows that are ok.
func pricedRows(c *Case, column string, price []float64) float64 {
	s, p := &c.Results.Steps, c.Study.Settings.Period
	kwh := s.Column(column)
	per := int(s.RowLength / p.Step)
	total := 0.0
	for i, e := range kwh {
		if s.Status[i] != results.OK || math.IsNaN(e) {
			continue
		}
		mean, n := 0.0, 0
		for k := i * per; k < (i+1)*per && k < len(price); k++ {
			mean += price[k]
			n++
		}
		if n > 0 {
			total += e * mean / float64(n)
		}
	}
	return total
}

// PresentWorthFactor is what a payment of 1 at the end of each of n years is worth
// today at a rate i a year, as a share (0.07 is 7 %):
//
//	PWF = ((1+i)^n − 1) / (i·(1+i)^n)
//
// and n where i is zero (Grant, Ireson, Leavenworth, Principles of Engineering Economy,
// uniform series present worth; IEEE C57.120 uses it for losses).
func PresentWorthFactor(i, n float64) float64 {
	if i == 0 {
		return n
	}
	return -math.Expm1(-n*math.Log1p(i)) / i
}

// parse reads a cell; NaN where it is blank or no number.
func parse(text string) float64 {
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		return math.NaN()
	}
	return x
}

// money writes an amount to the cent.
func money(x float64) string {
	if math.IsNaN(x) {
		return ""
	}
	s := strconv.FormatFloat(x, 'f', 2, 64)
	if s == "-0.00" {
		return "0.00"
	}
	return s
}
