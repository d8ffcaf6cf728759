package study

import (
	"fmt"
	"math"

	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// LossFactorFormula is a usual guess of the loss factor from the load factor,
//
//	LsF = K·LF + (1−K)·LF²
//
// with LF the mean over the peak of the load.
type LossFactorFormula struct {
	K      float64
	Source string
}

// Of returns the loss factor for a load factor.
func (f LossFactorFormula) Of(lf float64) float64 { return f.K*lf + (1-f.K)*lf*lf }

// LossFactorFormulas are those in use. The coefficients are recalled from memory, and
// held against a worked example in the tests.
func LossFactorFormulas() []LossFactorFormula {
	return []LossFactorFormula{
		{0.30, "Buller and Woodrow, Load factor equivalent hour values compared, Electrical World, 1928 (transmission)"},
		{0.15, "distribution feeders: Gangel and Propst 1965; Gönen, Electric Power Distribution System Engineering"},
		{0.16, "REA / RUS bulletins"},
		{0.08, "Gustafson and Baylor, 1983 and 1988"},
	}
}

// factors is loss-factor.csv: exact factors of all losses and of the load losses, and
// beside the latter what the formulas make of the load factor.
func (l *LossEstimate) factors() NamedTable {
	t := NamedTable{Name: "loss-factor.csv", Rows: [][]string{{"losses", "method", "energy [kWh]", "peak [kW]", "peak time", "load factor", "loss factor", "equivalent hours [h]", "off by [%]", "source"}}}
	m := l.meters[0]
	sums := m.kindsSum()
	source := 0.0
	for k := range m.months {
		source += m.months[k].source
	}
	lf := loadFactor(source, m.hours, m.demand.kw)
	exact := func(name string, kwh float64, peak highest) float64 {
		factor := loadFactor(kwh, m.hours, peak.kw)
		t.Rows = append(t.Rows, []string{name, "exact", results.FigureText(kwh), results.FigureText(peak.kw), l.stamp(peak.at), results.FigureText(lf), results.FigureText(factor),
			results.FigureText(factor * m.hours), "", "Σ losses·h / (peak losses·h), over the solved intervals"})
		return factor
	}
	exact("all", sums[kinds].kwh, m.all)
	factor := exact("without no-load", m.loadEnergy, m.load)
	for _, f := range LossFactorFormulas() {
		guess := f.Of(lf)
		t.Rows = append(t.Rows, []string{"without no-load", fmt.Sprintf("%.2f LF + %.2f LF²", f.K, 1-f.K), results.FigureText(guess * m.hours * m.load.kw), results.FigureText(m.load.kw), l.stamp(m.load.at),
			results.FigureText(lf), results.FigureText(guess), results.FigureText(guess * m.hours), results.FigureText(100 * (guess/factor - 1)), f.Source})
	}
	return t
}

// NoLoadWorth is what a watt of no-load loss costs over the years, and LoadWorth a watt
// of load loss at rating, per W:
//
//	A = PWF·(12·D + 8760·E)/1000
//	B = PWF·(12·D·RF² + 8760·E·LsF)·PL²/1000
//
// with D the price of demand per kW and month, E that of energy per kWh, RF the load at
// the charged peak over the own peak, LsF the loss factor, PL the own peak over the
// rating (IEEE C57.120, recalled from memory).
func NoLoadWorth(pwf, d, e float64) float64 { return pwf * (12*d + 8760*e) / 1000 }

// LoadWorth is the worth of load losses: see NoLoadWorth.
func LoadWorth(pwf, d, e, rf, lsf, pl float64) float64 {
	return pwf * (12*d*rf*rf + 8760*e*lsf) * pl * pl / 1000
}

// worth is worth.csv.
func (l *LossEstimate) worth() NamedTable {
	t := NamedTable{Name: "worth.csv", Rows: [][]string{{"item", "value", "unit", "how"}}}
	add := func(item, value, unit, how string) {
		if value != "" {
			t.Rows = append(t.Rows, []string{item, value, unit, how})
		}
	}
	p, m := l.prices, l.meters[0]
	sums := m.kindsSum()
	all := sums[kinds]
	energy, demand := math.NaN(), math.NaN()
	price := p.Energy
	add("losses energy a year", results.FigureText(all.kwh*l.scale), "kWh", "losses-by-kind.csv, all, to a year")
	if l.priced() {
		energy = all.money * l.scale
		how := "[prices] energy"
		if p.EnergyProfile != "" {
			how = "mean of the profile " + p.EnergyProfile + " over the steps"
			price = mean(l.Cases[0].Price)
		}
		add("price of energy", results.FigureText(price), l.Currency+"/kWh", how)
		if p.EnergyProfile != "" && all.kwh != 0 {
			add("price of a kWh lost", results.FigureText(all.money/all.kwh), l.Currency+"/kWh", "mean price weighted with the losses of each step")
		}
		add("cost of losses energy a year", money(energy), l.Currency, "Σ over the steps of losses times price, to a year")
	}
	if l.demands() {
		demand = all.atPeak * p.Demand * l.scale
		of := "the feeder's own peak of each month"
		if p.Peak != "" {
			of = "the peak of the profile " + p.Peak + " in each month"
		}
		add("price of demand", results.FigureText(p.Demand), l.Currency+"/kW and month", "[prices] demand, at "+of)
		add("cost of losses at the peaks a year", money(demand), l.Currency, "Σ over the months of losses at the peak times price, to a year")
	}
	yearly := sum(energy, demand)
	if math.IsNaN(yearly) {
		return t
	}
	add("cost of losses a year", money(yearly), l.Currency, "energy and demand, where both have a price")
	if feeder.Unknown(p.Rate) {
		return t
	}
	pwf := PresentWorthFactor(p.Rate, p.Years)
	add("rate a year", trimmed(round4(100*p.Rate)), "%", "[prices] rate")
	add("years", trimmed(p.Years), "years", "[prices] years")
	add("present worth factor", results.FigureText(pwf), "years", "((1+i)^n − 1)/(i·(1+i)^n)")
	add("present worth of the losses", money(yearly*pwf), l.Currency, "cost a year times the factor; loads and prices stay as they are")
	e, d := zeroIfNone(price), zeroIfNone(p.Demand)
	lsf := loadFactor(m.loadEnergy, m.hours, m.load.kw)
	rf := math.Sqrt((all.atPeak - sums[noLoadKind].atPeak) / float64(max(1, len(m.months))) / m.load.kw)
	add("worth of 1 W of no-load loss saved (A)", results.FigureText(NoLoadWorth(pwf, d, e)), l.Currency+"/W", "PWF·(12·D + 8760·E)/1000 (IEEE C57.120)")
	if !math.IsNaN(rf) && !math.IsNaN(lsf) {
		add("peak responsibility of the load losses (RF)", results.FigureText(rf), "1", "√(mean load losses at the charged peaks / highest load losses)")
		add("loss factor of the load losses (LsF)", results.FigureText(lsf), "1", "loss-factor.csv, exact")
		add("worth of 1 W of load loss at peak saved (B)", results.FigureText(LoadWorth(pwf, d, e, rf, lsf, 1)), l.Currency+"/W", "PWF·(12·D·RF² + 8760·E·LsF)/1000, own peak as the rating (IEEE C57.120)")
	}
	return t
}

func zeroIfNone(x float64) float64 {
	if math.IsNaN(x) {
		return 0
	}
	return x
}

func mean(x []float64) float64 {
	total := 0.0
	for _, v := range x {
		total += v
	}
	return total / float64(len(x))
}
