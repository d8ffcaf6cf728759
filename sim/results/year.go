package results

import "math"

func (w *Writer) writeDuty(f *outFile) error {
	if err := f.header("device", "phase", "operations", "raises", "lowers", "reversals", "busiest day", "operations that day",
		"lowest position", "highest position", "hours at a stop [h]", "hours out of band [h]", "hours reverse [h]", "hunting [h]"); err != nil {
		return err
	}
	for i := range w.duty {
		d, x := &w.duty[i], &w.plan.Devices[i]
		f.text(x.Name)
		f.next(x.Phase)
		for _, n := range [...]int{d.operations, d.raises, d.lowers, d.reversals} {
			f.count(n)
		}
		f.comma()
		if d.most > 0 {
			f.row = appendDay(f.row, d.busiest)
		}
		f.count(d.most)
		f.count(d.lowest)
		f.count(d.highest)
		for _, ns := range [...]int64{d.hours.stop, d.hours.out, d.hours.reverse, d.hours.hunting} {
			f.hours(ns)
		}
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}

func (w *Writer) writeNodes(f *outFile) error {
	if err := f.header("node", "phase", "nominal [kV]", "customers", "min [pu]", "min time", "max [pu]", "max time", "mean [pu]",
		"p1 [pu]", "p5 [pu]", "p50 [pu]", "p95 [pu]", "p99 [pu]", "hours below A [h]", "hours above A [h]", "hours below B [h]", "hours above B [h]",
		"customer-hours below A [h]", "customer-hours above A [h]", "settling hours outside A [h]", "lowest settling [pu]", "highest settling [pu]"); err != nil {
		return err
	}
	percentiles := w.stats.dist.percentiles()
	settled := w.stats.total.settled
	for i := range w.stats.points {
		s, p := &w.stats.points[i], &w.meter.Points[i]
		f.text(w.plan.Model.Nodes[p.Node].Name)
		f.next(p.Phase)
		f.comma()
		f.row = appendTrimmed(f.row, p.NomKV)
		f.comma()
		f.row = appendTrimmed(f.row, p.Customers)
		if settled > 0 {
			f.pu(s.min)
			f.at(w.clock, s.minTime, true)
			f.pu(s.max)
			f.at(w.clock, s.maxTime, true)
			f.pu(s.sum / float64(settled))
			for _, v := range percentiles[i] {
				f.pu(v)
			}
		} else {
			f.empty(5 + len(percents))
		}
		for _, ns := range [...]int64{s.belowA, s.aboveA, s.belowB, s.aboveB} {
			f.hours(ns)
		}
		f.figure(p.Customers * float64(s.belowA) / float64(hour))
		f.figure(p.Customers * float64(s.aboveA) / float64(hour))
		f.hours(s.settlingOutside)
		if s.lowestSettling <= s.highestSettling {
			f.pu(s.lowestSettling)
			f.pu(s.highestSettling)
		} else {
			f.empty(2)
		}
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}

// writeLosses writes the losses in the order of the tables: sections, transformers
// (load, then no-load), regulators.
func (w *Writer) writeLosses(f *outFile) error {
	if err := f.header("element", "kind", "energy [kWh]", "share [%]", "peak [kW]", "peak time"); err != nil {
		return err
	}
	for i, row := range w.meter.losses {
		f.text(row.element)
		f.next(row.kind.String())
		f.figure(kWh(w.stats.lossEnergy[i]))
		f.figure(share(w.stats.lossEnergy[i], w.stats.total.losses))
		p := &w.stats.lossPeak[i]
		f.figure(p.orNaN() / 1000)
		f.at(w.clock, p.time, p.known)
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}

// share is part of whole in %; NaN of nothing.
func share(part, whole float64) float64 {
	if whole == 0 {
		return math.NaN()
	}
	return 100 * part / whole
}

func (w *Writer) writeLoading(f *outFile) error {
	if err := f.header("element", "phase", "peak [A]", "rating [A]", "loading [%]", "peak time", "hours above rating [h]", "hours above emergency [h]"); err != nil {
		return err
	}
	for i := range w.meter.loading {
		row, p := &w.meter.loading[i], &w.stats.loadPeak[i]
		f.text(row.element)
		f.next(row.phase)
		f.figure(p.orNaN())
		f.figure(row.rating)
		f.figure(100 * p.orNaN() / row.rating)
		f.at(w.clock, p.time, p.known)
		f.hoursIf(w.stats.aboveRating[i], row.rating)
		f.hoursIf(w.stats.aboveEmergency[i], row.emergency)
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}

// hoursIf writes hours beyond a limit, nothing where the limit is not known.
func (f *outFile) hoursIf(ns int64, limit float64) {
	if math.IsNaN(limit) {
		f.comma()
		return
	}
	f.hours(ns)
}

// writeMonthly writes a row for each local month. Hours outside are those in which
// at least one judged place is; customer-hours count every customer once, at its
// worst phase.
func (w *Writer) writeMonthly(f *outFile) error {
	if err := f.header("month", "source energy [kWh]", "load energy [kWh]", "generation energy [kWh]", "losses energy [kWh]",
		"peak [kW]", "peak time", "line losses [kWh]", "transformer load losses [kWh]", "transformer no-load losses [kWh]", "regulator losses [kWh]",
		"operations", "tap operations", "capacitor operations",
		"hours below A [h]", "hours above A [h]", "hours below B [h]", "hours above B [h]", "customer-hours below A [h]", "customer-hours above A [h]",
		"settling [%]", "lowest [pu]", "highest [pu]", "low steps", "unsolved steps"); err != nil {
		return err
	}
	months := w.stats.months
	for _, i := range order(len(months), func(a, b int) int { return months[a].month - months[b].month }) {
		b := &months[i].bucket
		f.row = appendMonth(f.row, months[i].month)
		for _, e := range [...]float64{b.source, b.load, b.generation, b.losses} {
			f.figure(kWh(e))
		}
		f.figure(b.peakDemand.orNaN() / 1000)
		f.at(w.clock, b.peakDemand.time, b.peakDemand.known)
		for _, e := range b.byKind {
			f.figure(kWh(e))
		}
		f.count(b.tapOperations + b.capOperations)
		f.count(b.tapOperations)
		f.count(b.capOperations)
		for _, ns := range [...]int64{b.belowA, b.aboveA, b.belowB, b.aboveB} {
			f.hours(ns)
		}
		f.figure(b.customersBelow / float64(hour))
		f.figure(b.customersAbove / float64(hour))
		f.figure(share(float64(b.settling), float64(b.settled+b.settling)))
		f.pu(b.lowestPU.orNaN())
		f.pu(b.highestP.orNaN())
		f.count(b.low)
		f.count(b.unsolved)
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}

func (e *extreme) orNaN() float64 {
	if !e.known {
		return math.NaN()
	}
	return e.value
}
