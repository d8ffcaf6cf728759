package sim

import (
	"math"
	"math/cmplx"

	"yearflow/devices"
	"yearflow/sim/feeder"
	"yearflow/sim/powerflow"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// plants are what decides on its power by itself: inverters with functions, batteries
// and chargers. Their power is constant over an interval; what ends one (a battery that
// is full, a vehicle that comes, a lag that moves) is an event.
type plants struct {
	inverters []*inverter
	batteries []*battery
	chargers  []*charger
	shares    []share // chargers by group
}

// inverter is a generator or a battery with a function.
type inverter struct {
	law       *inverterLaw
	group     int // into the solver's groups
	generator int // into Model.Generators; −1 for a battery
	lags      bool
	started   bool
	target    devices.InverterState
}

// inverterLaw is what an inverter draws: by its functions, or, while its lag is
// followed, what it holds.
type inverterLaw struct {
	sheet   devices.Inverter
	members float64 // branches that share the available power
	held    bool
	state   devices.InverterState // of the lags, while they are held
}

var _ powerflow.Law = (*inverterLaw)(nil)

// Draws takes a branch's share of the available power as the real part of −s.
func (l *inverterLaw) Draws(s complex128, v float64) (power, slope complex128) {
	o := l.output(-real(s)/1000*l.members, v)
	power = complex(-o.P*1000, -o.Q*1000)
	if !l.held {
		slope = complex(-o.DP*1000, -o.DQ*1000)
	}
	return power, slope
}

// output is what the inverter does with available kW at v p.u.
func (l *inverterLaw) output(available, v float64) devices.Output {
	if l.held {
		return l.sheet.Held(available, l.state)
	}
	return l.sheet.Power(available, math.Max(v, powerflow.Corner))
}

// preparePlants builds the plants of a model; in has their injections.
func (e *Engine) preparePlants(in *inputs) error {
	m := e.net.Model
	var faults tables.Faults
	p := &e.plants
	step := e.Study.Settings.Period.Step
	for i := range m.Functions { // shares of a rating all of them: any rating does
		sheet := InverterSheet(&m.Functions[i], 1)
		for _, err := range sheet.Check() {
			faults.Add(m.Functions[i].At, "function %q: %v", m.Functions[i].Name, err)
		}
	}
	add := func(f int, rating float64, group int) *inverter {
		sheet := InverterSheet(&m.Functions[f], rating)
		law := in.laws[group]
		law.sheet, law.members = sheet, float64(len(in.groups[group].Members))
		v := &inverter{law: law, group: group, generator: -1, lags: sheet.Lags(step)}
		p.inverters = append(p.inverters, v)
		return v
	}
	for i := range m.Generators {
		g := &m.Generators[i]
		if g.Function >= 0 {
			add(g.Function, g.KVA, in.groupOfGenerator[i]).generator = i
		}
	}
	for i := range m.Batteries {
		b := &m.Batteries[i]
		x := &battery{index: i, profile: in.batterySeries[i], scale: in.batteryScale[i], branches: in.batteryBranches[i]}
		x.sheet = batterySheet(b, e.Study.Settings.Period.Zone)
		for _, err := range x.sheet.Check() {
			faults.Add(b.At, "battery %q: %v", b.Name, err)
		}
		if b.Function >= 0 {
			x.inverter = add(b.Function, b.KVA, in.groupOfBattery[i])
		}
		p.batteries = append(p.batteries, x)
	}
	e.watchFlows()
	groups := map[string]int{}
	for i := range m.Chargers {
		c := &m.Chargers[i]
		x := &charger{branches: in.chargerBranches[i], sheet: chargerSheet(c, &e.Study.Settings)}
		if c.PF != 0 {
			x.tangent = math.Copysign(math.Sqrt(math.Max(0, 1/(c.PF*c.PF)-1)), c.PF)
		}
		for _, err := range x.sheet.Check() {
			faults.Add(c.At, "charger %q: %v", c.Name, err)
		}
		if c.Group != "" {
			k, ok := groups[c.Group]
			if !ok {
				k = len(p.shares)
				groups[c.Group] = k
				p.shares = append(p.shares, share{limit: math.Inf(1)})
			}
			p.shares[k].members = append(p.shares[k].members, i)
			p.shares[k].power = append(p.shares[k].power, 0)
			if !feeder.Unknown(c.GroupLimit) {
				p.shares[k].limit = c.GroupLimit
			}
		}
		p.chargers = append(p.chargers, x)
	}
	return faults.Err()
}

// reset puts every plant back to its start. Chargers have lived through the days
// before it, so that a vehicle that came in the evening is charged by then.
func (p *plants) reset(now devices.Time) {
	for _, v := range p.inverters {
		v.started, v.law.held = false, false
	}
	for _, b := range p.batteries {
		b.state, b.asked, b.kW, b.prescribed, b.exchanged = b.sheet.Start(), 0, 0, false, devices.Exchange{}
	}
	p.arrive(now)
}

// setPlants puts the power of every plant into the solver's input, for an instant.
func (e *Engine) setPlants(now devices.Time) {
	p := &e.plants
	for _, b := range p.batteries {
		e.ask(b, now)
	}
	p.share(now)
	for _, c := range p.chargers {
		for _, k := range c.branches {
			e.input.Power[k] = complex(c.kW, c.kW*c.tangent) * complex(1000/float64(len(c.branches)), 0)
		}
	}
}

// available is what an inverter could deliver, kW.
func (e *Engine) available(v *inverter) float64 {
	return -real(e.input.Power[e.in.groups[v.group].Members[0]]) / 1000 * v.law.members
}

// solvedPlants takes what the solution at hand means for the plants: where lags go,
// what is curtailed, and what batteries deliver.
func (e *Engine) solvedPlants() {
	for _, v := range e.plants.inverters {
		mean := e.groupVoltage(v.group)
		available := e.available(v)
		if v.lags {
			v.target = v.law.sheet.Target(available, math.Max(mean, powerflow.Corner))
			if !v.started && !e.steady {
				v.law.state, v.started, v.law.held = v.target, true, true
			}
		}
		if v.generator >= 0 {
			e.state.Curtailed[v.generator] = v.law.output(available, mean).Curtailed
		}
	}
	for i, b := range e.plants.batteries {
		b.kW = e.delivered(b)
		e.state.Stored[i] = b.state.Stored
	}
}

// groupVoltage is the mean voltage of a group's branches, p.u.
func (e *Engine) groupVoltage(g int) (mean float64) {
	members := e.in.groups[g].Members
	for _, k := range members {
		mean += e.branchVoltage(int(k))
	}
	return mean / float64(len(members))
}

// branchVoltage is the voltage across an injection, p.u.
func (e *Engine) branchVoltage(k int) float64 {
	j := &e.in.injections[k]
	return cmplx.Abs(e.between(j.From, j.To)) / j.Nominal
}

// nextPlant returns the next instant at which a plant changes its power.
func (e *Engine) nextPlant(now devices.Time) devices.Time {
	next := devices.Never
	for _, v := range e.plants.inverters {
		if v.law.held {
			next = min(next, v.law.sheet.NextMove(v.law.state, v.target, now))
		}
	}
	for _, b := range e.plants.batteries {
		if until := b.sheet.Until(b.state, b.kW); b.kW != 0 && until < devices.Never-now {
			next = min(next, now+max(until, 1))
		}
		next = min(next, b.sheet.NextSwitch(now))
	}
	return min(next, e.plants.nextCharger(now))
}

// advancePlants lets an interval pass, and reports whether any plant's power changes
// with its end.
func (e *Engine) advancePlants(from, to devices.Time) (changed bool) {
	p := &e.plants
	for _, v := range p.inverters {
		if !v.law.held {
			continue
		}
		next := v.law.sheet.Advance(v.law.state, v.target, to-from)
		changed = changed || next != v.law.state
		v.law.state = next
	}
	for i, b := range p.batteries {
		var x devices.Exchange
		b.state, x = b.sheet.Advance(b.state, b.kW, to-from)
		b.exchanged.In += x.In
		b.exchanged.Out += x.Out
		b.exchanged.Loss += x.Loss
		e.state.Stored[i] = b.state.Stored
		changed = changed || e.wanted(b, to) != b.asked
	}
	return p.charge(from, to) || changed
}

// tally adds what generators gave and did not give in an interval to the step's.
func (r *runner) tally(from, to devices.Time) {
	hours := float64(to-from) / 3.6e12
	for i := range r.state.Generation {
		r.stepGenerated[i] += real(r.state.Generation[i]) / 1000 * hours
		r.stepCurtailed[i] += r.state.Curtailed[i] * hours
	}
}

// book takes the step's tally into the run's: nothing of a step that is low or
// unsolved.
func (r *runner) book() {
	for i := range r.stepGenerated {
		if r.record.Status == results.OK {
			r.generated[i] += r.stepGenerated[i]
			r.curtailed[i] += r.stepCurtailed[i]
		}
	}
	clear(r.stepGenerated)
	clear(r.stepCurtailed)
}

// totals returns what every plant did over the run. Batteries and chargers go on in
// low steps too, so that what they hold is accounted for.
func (r *runner) totals() (out []results.PlantRow) {
	m := r.net.Model
	for i := range m.Generators {
		g := &m.Generators[i]
		out = append(out, results.PlantRow{Name: g.Name, Kind: g.Kind, Delivered: r.generated[i], Curtailed: r.curtailed[i]})
	}
	for i, b := range r.plants.batteries {
		out = append(out, results.PlantRow{Name: m.Batteries[i].Name, Kind: "battery", Delivered: b.exchanged.Out, Drawn: b.exchanged.In,
			Losses: b.exchanged.Loss, Change: b.state.Stored - b.sheet.Start().Stored})
	}
	for i, c := range r.plants.chargers {
		out = append(out, results.PlantRow{Name: m.Chargers[i].Name, Kind: "charger", Drawn: c.state.Served, Unserved: c.state.Unserved + c.state.Need})
	}
	return out
}

// plantPowers sums what batteries deliver and chargers draw, for the meter.
func (e *Engine) plantPowers() {
	clear(e.state.Storage)
	clear(e.state.Charging)
	for k, s := range e.drawn {
		if b := e.in.batteryOf[k]; b >= 0 {
			e.state.Storage[b] -= s
		} else if c := e.in.chargerOf[k]; c >= 0 {
			e.state.Charging[c] += s
		}
	}
}
