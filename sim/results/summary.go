package results

import (
	"math"
)

// summary writes rows of summary.csv and keeps the first error.
type summary struct {
	w   *Writer
	f   *outFile
	err error
}

func (s *summary) close(unit string) {
	s.f.next(unit)
	if err := s.f.end(); err != nil && s.err == nil {
		s.err = err
	}
}

func (s *summary) figure(quantity string, value float64, unit string) {
	s.f.text(quantity)
	s.f.figure(value)
	s.close(unit)
}

func (s *summary) pu(quantity string, value float64) {
	s.f.text(quantity)
	s.f.pu(value)
	s.close("pu")
}

func (s *summary) count(quantity string, n int) {
	s.f.text(quantity)
	s.f.count(n)
	s.close("1")
}

func (s *summary) text(quantity, value, unit string) {
	s.f.text(quantity)
	s.f.next(value)
	s.close(unit)
}

func (s *summary) hours(quantity string, ns int64) {
	s.figure(quantity, float64(ns)/float64(hour), "h")
}

// peak writes the highest value and its time.
func (s *summary) peak(quantity string, p *peak, scale float64, unit string) {
	s.figure(quantity, p.orNaN()*scale, unit)
	s.at(quantity+" time", p.time, p.known)
}

func (s *summary) at(quantity string, ns int64, known bool) {
	s.f.text(quantity)
	s.f.at(s.w.clock, ns, known)
	s.close("time")
}

// extreme writes a voltage with its place and time.
func (s *summary) extreme(quantity string, e *extreme) {
	s.pu(quantity, e.orNaN())
	place := ""
	if e.known {
		place = s.w.meter.Points[e.point].Name
	}
	s.text(quantity+" place", place, "node.phase")
	s.at(quantity+" time", e.time, e.known)
}

// writeSummary writes what a year comes to. Energies are those of all steps that
// count; hours, peaks and voltages those of their settled intervals.
func (w *Writer) writeSummary(f *outFile) error {
	if err := f.header("quantity", "value", "unit"); err != nil {
		return err
	}
	s := &summary{w: w, f: f}
	s.energy()
	s.voltages()
	s.customers()
	s.operations()
	s.steps()
	if s.w.allocation != nil {
		s.allocation()
	}
	s.measured()
	return s.err
}

func (s *summary) energy() {
	t, st := &s.w.stats.total, s.w.stats
	s.figure("source energy", kWh(t.source), "kWh")
	s.figure("load energy", kWh(t.load), "kWh")
	s.figure("generation energy", kWh(t.generation), "kWh")
	s.figure("losses energy", kWh(t.losses), "kWh")
	s.figure("losses share of energy supplied", share(t.losses, t.source+t.generation), "%")
	for k, e := range t.byKind {
		s.figure(LossKind(k).String()+" losses energy", kWh(e), "kWh")
	}
	s.peak("peak demand", &t.peakDemand, 1e-3, "kW")
	s.figure("lowest demand", -st.leastDemand.orNaN()/1000, "kW")
	s.at("lowest demand time", st.leastDemand.time, st.leastDemand.known)
	s.hours("hours of power into the source", st.reverse)
	s.peak("peak losses", &st.lossesPeak, 1e-3, "kW")
	// Load factor is the mean over the peak of the source's real power; loss factor
	// the same of the losses; the equivalent hours of loss are those at peak losses
	// that lose the energy of the period (Gönen, Electric Power Distribution System
	// Engineering, ch. 2).
	span := float64(t.settled + t.settling)
	s.figure("load factor", ratio(t.source, span*t.peakDemand.orNaN()), "1")
	s.figure("loss factor", ratio(t.losses, span*st.lossesPeak.orNaN()), "1")
	s.figure("equivalent hours of loss", ratio(t.losses, st.lossesPeak.orNaN())/float64(hour), "h")
}

// ratio is a/b, NaN where b is nothing.
func ratio(a, b float64) float64 {
	if b == 0 {
		return math.NaN()
	}
	return a / b
}

func (s *summary) voltages() {
	st := s.w.stats
	t := &st.total
	s.extreme("lowest voltage", &t.lowestPU)
	s.extreme("highest voltage", &t.highestP)
	s.extreme("lowest judged voltage", &st.lowJudged)
	s.extreme("highest judged voltage", &st.highJudged)
	s.hours("hours with a place below A", t.belowA)
	s.hours("hours with a place above A", t.aboveA)
	s.hours("hours with a place below B", t.belowB)
	s.hours("hours with a place above B", t.aboveB)
	judged, outside := 0, 0
	var place, worst int64
	worstAt := ""
	for i := range st.points {
		if !st.judge.judged[i] {
			continue
		}
		judged++
		p := &st.points[i]
		h := p.belowA + p.aboveA
		place += h
		if h > 0 {
			outside++
		}
		if h > worst {
			worst, worstAt = h, s.w.meter.Points[i].Name
		}
	}
	s.count("places judged", judged)
	s.count("places ever outside A", outside)
	s.hours("place-hours outside A", place)
	s.hours("settling place-hours outside A", t.settlingOutside)
	s.text("place most hours outside A", worstAt, "node.phase")
	s.hours("hours outside A there", worst)
	s.peak("highest unbalance", &st.unbalance, 1, "%")
	at := ""
	if st.unbalance.known {
		at = s.w.plan.Model.Nodes[st.unbalanceAt].Name
	}
	s.text("highest unbalance place", at, "node")
	s.hours("hours with unbalance above 3 %", st.unbalanceAbove3)
	s.peak("highest negative sequence", &st.negative, 1, "%")
	s.figure("allowance from primary to meter", s.w.plan.Settings.Limits.Allowance, "V")
}

// customers counts each customer once, at the worst of its phases.
func (s *summary) customers() {
	t := &s.w.stats.total
	var all, ever, hourly, twentieth float64
	for i := range s.w.stats.judge.services {
		v := &s.w.stats.judge.services[i]
		all += v.customers
		if v.outside > 0 {
			ever += v.customers
		}
		if v.outside > hour {
			hourly += v.customers
		}
		if v.outside > t.settled/20 {
			twentieth += v.customers
		}
	}
	s.figure("customers", all, "1")
	s.figure("customers ever outside A", ever, "1")
	s.figure("customers outside A for more than 1 h", hourly, "1")
	s.figure("customers outside A for more than 5 % of the time", twentieth, "1")
	s.figure("customer-hours below A", t.customersBelow/float64(hour), "h")
	s.figure("customer-hours above A", t.customersAbove/float64(hour), "h")
	s.figure("customer-hours below B", t.customersBelowB/float64(hour), "h")
	s.figure("customer-hours above B", t.customersAboveB/float64(hour), "h")
}

func (s *summary) operations() {
	t := &s.w.stats.total
	var raises, lowers, closings, openings, most int
	var hunting, stop int64
	mostBy := ""
	for i := range s.w.duty {
		d, x := &s.w.duty[i], &s.w.plan.Devices[i]
		if x.Kind == TapDevice {
			raises += d.raises
			lowers += d.lowers
		} else {
			closings += d.raises
			openings += d.lowers
		}
		hunting += d.hours.hunting
		stop += d.hours.stop
		if d.operations > most {
			most, mostBy = d.operations, deviceName(x)
		}
	}
	s.count("operations", t.tapOperations+t.capOperations)
	s.count("tap operations", t.tapOperations)
	s.count("tap raises", raises)
	s.count("tap lowers", lowers)
	s.count("capacitor operations", t.capOperations)
	s.count("capacitor closings", closings)
	s.count("capacitor openings", openings)
	s.text("device of most operations", mostBy, "device.phase")
	s.count("operations of that device", most)
	s.hours("device-hours at a stop", stop)
	s.hours("device-hours hunting", hunting)
}

func deviceName(d *Device) string {
	if d.Phase == "" {
		return d.Name
	}
	return d.Name + "." + d.Phase
}

func (s *summary) steps() {
	t := &s.w.stats.total
	s.count("steps", t.steps)
	s.count("ok steps", t.steps-t.low-t.unsolved)
	s.count("low steps", t.low)
	s.count("unsolved steps", t.unsolved)
	s.hours("settled hours", t.settled)
	s.hours("settling hours", t.settling)
	s.figure("settling share", share(float64(t.settling), float64(t.settled+t.settling)), "%")
	overloaded := 0
	var most peak
	at := ""
	for i := range s.w.meter.loading {
		row, p := &s.w.meter.loading[i], &s.w.stats.loadPeak[i]
		if !(row.rating > 0) || !p.known {
			continue
		}
		loading := 100 * p.value / row.rating
		if loading > 100 {
			overloaded++
		}
		if !most.known || loading > most.value {
			at = row.element
			if row.phase != "" {
				at += "." + row.phase
			}
		}
		most.take(loading, p.time)
	}
	s.peak("highest loading", &most, 1, "%")
	s.text("highest loading place", at, "element.phase")
	s.count("element phases above rating", overloaded)
}
