package study

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"

	"yearflow/sim"
	"yearflow/sim/feeder"
)

// Mitigation is a remedy, run over the period as a case of its own.
type Mitigation struct {
	Name, What string
	Why        string // why it was not tried; blank where it was
	Criteria   []Criterion
	// Failed is how many criteria fail; Mended those that fail without the remedy and
	// pass with it, New those that it makes fail.
	Failed, Mended, New int
}

// mitigating is a Mitigation while it is made. apply changes the case's model and
// returns why it cannot.
type mitigating struct {
	Mitigation
	settings   bool // it changes controls of the feeder, and not the units alone
	study      *feeder.Study
	run        *trial
	log        activity
	loss, back *jump
}

// mitigations prepares the remedies: in memory, from the case's model.
func (im *impacting) mitigations() []mitigating {
	// units changes every generator and battery of the case.
	units := func(m *feeder.Model, generator func(*feeder.Generator) string, battery func(*feeder.Battery)) string {
		for i := range m.Generators {
			if g := &m.Generators[i]; im.own.generators[g.Name] {
				if why := generator(g); why != "" {
					return why
				}
			}
		}
		for i := range m.Batteries {
			if b := &m.Batteries[i]; im.own.batteries[b.Name] {
				battery(b)
			}
		}
		return ""
	}
	// A battery's inverter has its power factor by a function, a generator's by its row.
	function := func(f feeder.InverterFunction) func(*feeder.Model) string {
		return func(m *feeder.Model) string {
			m.Functions = append(m.Functions, f)
			k := len(m.Functions) - 1
			return units(m, func(g *feeder.Generator) string { g.PF, g.Function = 1, k; return "" }, func(b *feeder.Battery) { b.Function = k })
		}
	}
	factor := func(pf float64) func(*feeder.Model) string {
		return func(m *feeder.Model) string {
			f := blankFunction("constant power factor", false)
			f.PowerFactor = -pf
			m.Functions = append(m.Functions, f)
			k := len(m.Functions) - 1
			return units(m, func(g *feeder.Generator) string { g.PF, g.Function = -pf, -1; return "" }, func(b *feeder.Battery) { b.Function = k })
		}
	}
	size := func(share float64) func(*feeder.Model) string {
		return func(m *feeder.Model) string {
			return units(m, func(g *feeder.Generator) string { return im.resize(g, share) }, func(b *feeder.Battery) {
				b.EnergyKWh, b.KVA = share*b.EnergyKWh, share*b.KVA
				limitDispatch(b, share)
			})
		}
	}
	dispatch := func(share float64) func(*feeder.Model) string {
		return func(m *feeder.Model) string {
			if len(im.own.batteries) == 0 {
				return "the case has no battery of its own"
			}
			return units(m, func(*feeder.Generator) string { return "" }, func(b *feeder.Battery) { limitDispatch(b, share) })
		}
	}
	controls := func(change func(*feeder.TapSettings)) func(*feeder.Model) string {
		return func(m *feeder.Model) string {
			any := false
			for i := range m.Regulators {
				for u := range m.Regulators[i].Units {
					if s := m.Regulators[i].Units[u].Settings; s != nil && !s.Held {
						any = true
						change(s)
					}
				}
			}
			if !any {
				return "the feeder has no tap changer that acts"
			}
			return ""
		}
	}
	lower := func(v float64) func(*feeder.Model) string {
		return controls(func(s *feeder.TapSettings) { s.Set, s.ReverseSet = s.Set-v, s.ReverseSet-v })
	}
	var out []mitigating
	for _, x := range []struct {
		name, what string
		settings   bool
		apply      func(*feeder.Model) string
	}{
		{"power factor 0.98", "the generators and batteries of the case absorb reactive power at a power factor of 0.98, batteries when they charge too", false, factor(0.98)},
		{"power factor 0.95", "the same at a power factor of 0.95", false, factor(0.95)},
		{"volt-var", "voltage-reactive power of category B with the default points of IEEE Std 1547-2018, table 8: 0.92, 0.98, 1.02, 1.08 p.u., 44 %, of generators and batteries; none while a battery rests", false, function(blankFunction("voltage-reactive power", false))},
		{"volt-watt", "voltage-active power with the default points of IEEE Std 1547-2018, table 10: 1.06 and 1.10 p.u.; it limits what is delivered, not what a battery draws", false, function(blankFunction("constant power factor", true))},
		{"75 % of the size", "three quarters of the rating, and of a battery's energy", false, size(0.75)},
		{"50 % of the size", "half of the rating, and of a battery's energy", false, size(0.50)},
		{"dispatch at most 50 %", "the batteries of the case deliver and draw at most half of their power, with the energy that they have", false, dispatch(0.50)},
		{"set voltages 1 V lower", "every tap changer regulates 1 V lower", true, lower(1)},
		{"set voltages 2 V lower", "every tap changer regulates 2 V lower", true, lower(2)},
		{"reverse mode stay", "every tap changer stays with the load side on reverse power, by its forward settings where it has no others", true, controls(stay)},
	} {
		m := mitigating{Mitigation: Mitigation{Name: x.name, What: x.what}, settings: x.settings}
		m.study = variant(im.with, im.with.Case+", "+x.name, func(model *feeder.Model) { m.Why = x.apply(model) })
		out = append(out, m)
	}
	return out
}

// stay sets the reverse mode; a control that had another keeps its reverse settings.
func stay(s *feeder.TapSettings) {
	if s.Reverse == feeder.ReverseNone || !(s.ReverseSet > 0) {
		s.ReverseSet, s.ReverseBandwidth, s.ReverseDelay, s.ReverseR, s.ReverseX = s.Set, s.Bandwidth, s.Delay, s.R, s.X
	}
	if !(s.ReverseThreshold > 0) {
		s.ReverseThreshold = 0.02
	}
	s.Reverse = feeder.ReverseStay
}

// blankFunction is a function with the defaults of category B.
func blankFunction(reactive string, voltWatt bool) feeder.InverterFunction {
	return feeder.InverterFunction{Name: "mitigation", Reactive: reactive, PowerFactor: nan, Constant: nan, Reference: nan,
		V: [4]float64{nan, nan, nan, nan}, Q: [4]float64{nan, nan, nan, nan}, P: [3]float64{nan, nan, nan},
		VoltWatt: voltWatt, VoltWattV: [2]float64{nan, nan}, VoltWattP2: nan, Response: nan, WattTime: nan, Limit: nan}
}

// limitDispatch lets a battery deliver and draw a share of its power; a profile in p.u.
// goes with it, other dispatch is cut off there.
func limitDispatch(b *feeder.Battery, share float64) {
	b.KW *= share
	b.Windows = slices.Clone(b.Windows)
	for i := range b.Windows {
		w := &b.Windows[i]
		w.KW = math.Max(-b.KW, math.Min(b.KW, w.KW))
	}
}

// resize makes a generator a share of its size.
func (im *impacting) resize(g *feeder.Generator, share float64) string {
	if g.Profile != "" {
		if _, unit, err := im.profileUnit(g.Profile); err == nil && unit == "kW" {
			return fmt.Sprintf("generator %s follows a profile in [kW], which has no size to make smaller", g.Name)
		}
	}
	g.KVA *= share
	g.KW *= share
	if g.Solar != nil {
		g.Solar.DC *= share
	}
	return ""
}

// profileUnit tells in which unit a profile is.
func (im *impacting) profileUnit(name string) ([]float64, string, error) {
	e, err := sim.Prepare(im.with, sim.Options{})
	if err != nil {
		return nil, "", err
	}
	return e.Profile(name)
}

// tried is how many remedies are run.
func (im *impacting) tried() (n int) {
	for i := range im.variants {
		if im.variants[i].Why == "" {
			n++
		}
	}
	return n
}

// mitigate runs a remedy, with the sudden loss of the units of the case.
func (im *impacting) mitigate(ctx context.Context, m *mitigating) error {
	if m.Why != "" {
		return nil
	}
	does := im.own.delivers(m.study.Model)
	m.log.add(caseEvent, does)
	var err error
	m.run, err = runTrial(ctx, &im.walks, m.study, im.demo, im.watched(func(e *sim.Engine) ([]sim.Recorder, error) {
		j, err := newJump(ctx, &im.walks, e, variant(m.study, m.study.Case+" without", im.own.without), im.demo, does)
		m.loss = j
		return []sim.Recorder{&m.log, j}, err
	}))
	return err
}

// compareMitigations holds every remedy against the case without it.
func (im *impacting) compareMitigations() {
	for i := range im.variants {
		m := &im.variants[i]
		if m.run == nil {
			im.Mitigations = append(im.Mitigations, m.Mitigation)
			continue
		}
		rows := m.run.measures(im.life)
		of := func(j *jump) map[string]*jump { return map[string]*jump{caseEvent: j} }
		for _, x := range im.jumpMeasures(m.run, of(m.loss), of(m.back), m.back) {
			if x.group != "rapid voltage change" || strings.Contains(x.name, " of "+caseEvent+", ") {
				rows = append(rows, x)
			}
		}
		for _, x := range rows {
			k := slices.IndexFunc(im.Criteria, func(c Criterion) bool { return c.Group == x.group && c.Name == x.name })
			if k < 0 {
				continue
			}
			w := &im.Criteria[k]
			if x.name == "operations" { // its limit is that of a rise above the base's
				x.limit, x.source = w.Limit, w.Source
			}
			c := criterion(measure{value: nan, limit: nan}, x)
			c.Base, c.BaseVerdict, c.Difference = w.With, w.Verdict, difference(w.With, c.With)
			if math.IsNaN(c.Limit) && !told(c.Name) {
				continue
			}
			switch {
			case c.Verdict == Fails && w.Verdict != Fails:
				m.New++
			case c.Verdict != Fails && w.Verdict == Fails:
				m.Mended++
			}
			if c.Verdict == Fails {
				m.Failed++
			}
			m.Criteria = append(m.Criteria, c)
		}
		im.Mitigations = append(im.Mitigations, m.Mitigation)
	}
}

// told are the quantities without a limit that a remedy is chosen by.
func told(name string) bool {
	return slices.Contains([]string{"customer-hours above A", "customer-hours below A", "losses energy", "operations", "generation energy", "energy curtailed", "share of the available energy curtailed", "hours of reverse power at source"}, name)
}
