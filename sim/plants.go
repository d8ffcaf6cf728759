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
	wants     []float64
}

// inverter is a generator or a battery with a function.
type inverter struct {
	law       *inverterLaw
	group     int // into the solver's groups
	generator int // into Model.Generators; −1 for a battery
	battery   int // into plants.batteries; −1 for a generator
	lags      bool
	started   bool
	state     devices.InverterState
	target    devices.InverterState
}

// inverterLaw is what an inverter draws: by its functions, or, while its lag is
// followed, what it holds.
type inverterLaw struct {
	sheet devices.Inverter
	held  bool
	out   devices.Output
}

var _ powerflow.Law = (*inverterLaw)(nil)

// Draws takes the available power as the real part of −s.
func (l *inverterLaw) Draws(s complex128, v float64) (power, slope complex128) {
	o := l.out
	if !l.held {
		o = l.sheet.Power(-real(s)/1000, v)
	}
	power = complex(-o.P*1000, -o.Q*1000)
	if !l.held {
		slope = complex(-o.DP*1000, -o.DQ*1000)
	}
	return power, slope
}

// battery is a storage unit in the run.
type battery struct {
	sheet     devices.Battery
	state     devices.BatteryState
	kW        float64 // delivered at present
	profile   int     // series of its profile, −1 none
	scale     float64 // kW per unit of the profile
	branches  []int   // injections
	watched   []watchedPhase
	inverter  bool
	exchanged devices.Exchange
}

// charger is a charging point in the run.
type charger struct {
	sheet    devices.Charger
	state    devices.ChargerState
	kW       float64 // drawn at present
	tangent  float64 // kvar per kW
	branches []int
}

// share is a group of chargers with a common limit.
type share struct {
	members []int
	power   []float64 // kW, by member
	limit   float64   // kW
}

// settled is the power, kW, below which a battery that follows a flow is not moved
// again within one instant (the contract asks for 0.1 kW).
const dispatchSettled = 0.02

// dispatchRounds bounds the solutions of one instant that batteries ask for.
const dispatchRounds = 50

// preparePlants builds the plants of a model; in has their injections.
func (e *Engine) preparePlants(in *inputs) error {
	m := e.net.Model
	var faults tables.Faults
	p := &e.plants
	step := e.Study.Settings.Period.Step
	add := func(f int, rating float64, at tables.Pos, what string, group int) *inverter {
		sheet := inverterSheet(&m.Functions[f], rating)
		for _, err := range sheet.Check() {
			faults.Add(m.Functions[f].At, "function %q, used by %s: %v", m.Functions[f].Name, what, err)
		}
		law := in.laws[group]
		law.sheet = sheet
		v := &inverter{law: law, group: group, generator: -1, battery: -1, lags: sheet.Lags(step)}
		p.inverters = append(p.inverters, v)
		return v
	}
	for i := range m.Generators {
		g := &m.Generators[i]
		if g.Function >= 0 {
			add(g.Function, g.KVA, g.At, "generator "+g.Name, in.groupOfGenerator[i]).generator = i
		}
	}
	for i := range m.Batteries {
		b := &m.Batteries[i]
		x := &battery{profile: in.batterySeries[i], scale: in.batteryScale[i], branches: in.batteryBranches[i], inverter: b.Function >= 0}
		x.sheet = batterySheet(b, e.Study.Settings.Period.Zone)
		for _, err := range x.sheet.Check() {
			faults.Add(b.At, "battery %q: %v", b.Name, err)
		}
		if b.Watched != nil {
			x.watched = e.watch(b.Watched, nil)
		}
		if b.Function >= 0 {
			add(b.Function, b.KVA, b.At, "battery "+b.Name, in.groupOfBattery[i]).battery = len(p.batteries)
		}
		p.batteries = append(p.batteries, x)
	}
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
	p.wants = make([]float64, len(p.chargers))
	return faults.Err()
}

// reset puts every plant back to its start.
func (p *plants) reset(now devices.Time) {
	for _, v := range p.inverters {
		v.started, v.law.held = false, false
	}
	for _, b := range p.batteries {
		b.state, b.kW, b.exchanged = b.sheet.Start(), 0, devices.Exchange{}
	}
	for _, c := range p.chargers {
		c.state, c.kW = c.sheet.Start(now), 0
	}
}

// set puts the power of every plant into the solver's input, for an instant.
func (e *Engine) setPlants(now devices.Time) {
	p := &e.plants
	for _, b := range p.batteries {
		if len(b.watched) == 0 {
			r := devices.BatteryReading{}
			if b.profile >= 0 {
				r.Profile = e.in.values[b.profile] * b.scale
			}
			b.kW = b.sheet.Request(b.state, r, now)
		} else {
			b.kW = b.sheet.Allowed(b.state, b.kW)
		}
		e.putBattery(b)
	}
	for i, c := range p.chargers {
		c.state = c.sheet.Observe(c.state, now)
		p.wants[i] = c.sheet.Wants(c.state, now)
		c.kW = p.wants[i]
	}
	for _, s := range p.shares {
		for k, i := range s.members {
			s.power[k] = p.wants[i]
		}
		devices.Share(s.power, s.power, s.limit)
		for k, i := range s.members {
			p.chargers[i].kW = s.power[k]
		}
	}
	for _, c := range p.chargers {
		for _, k := range c.branches {
			e.input.Power[k] = complex(c.kW, c.kW*c.tangent) * complex(1000/float64(len(c.branches)), 0)
		}
	}
	for _, v := range p.inverters {
		if v.law.held {
			v.law.out = v.law.sheet.Held(e.available(v), v.state)
		}
	}
}

func (e *Engine) putBattery(b *battery) {
	n := float64(len(b.branches))
	for k, j := range b.branches {
		e.input.Power[j] = complex(-b.kW*1000/n, 0)
		if b.inverter {
			// The law reads the first member's, which stands for the whole.
			e.input.Power[j] = 0
			if k == 0 {
				e.input.Power[j] = complex(-b.kW*1000, 0)
			}
		}
	}
}

// available is what an inverter could deliver, kW.
func (e *Engine) available(v *inverter) float64 {
	return -real(e.input.Power[e.in.groups[v.group].Members[0]]) / 1000
}

// follow reads the flows that batteries follow and sets what they ask for; it reports
// whether anything moved, so that the instant has to be solved again.
func (e *Engine) follow(now devices.Time) bool {
	moved := false
	for _, b := range e.plants.batteries {
		if len(b.watched) == 0 {
			continue
		}
		kW := b.sheet.Request(b.state, devices.BatteryReading{Flow: e.flowKW(b.watched), Present: b.kW}, now)
		if math.Abs(kW-b.kW) > dispatchSettled {
			b.kW, moved = kW, true
			e.putBattery(b)
		}
	}
	return moved
}

// flowKW is the real power that enters watched phases.
func (e *Engine) flowKW(ws []watchedPhase) (kW float64) {
	for i := range ws {
		w := &ws[i]
		current := e.drawnAt(w.parts)
		for _, f := range w.flows {
			current += e.state.Flow[f]
		}
		kW += real(e.state.V[w.unknown]*cmplx.Conj(current)) / 1000
	}
	return kW
}

// solved takes what the solution at hand means for the plants: where lags go, and
// what is curtailed.
func (e *Engine) solvedPlants() {
	for _, v := range e.plants.inverters {
		mean := e.groupVoltage(v.group)
		available := e.available(v)
		if v.lags {
			v.target = v.law.sheet.Target(available, mean)
			if !v.started && !e.steady {
				v.state, v.started, v.law.held = v.target, true, true
				v.law.out = v.law.sheet.Held(available, v.state)
			}
		}
		o := v.law.out
		if !v.law.held {
			o = v.law.sheet.Power(available, math.Max(mean, powerflow.Corner))
		}
		if v.generator >= 0 {
			e.state.Curtailed[v.generator] = o.Curtailed
		}
	}
	for i, b := range e.plants.batteries {
		e.state.Stored[i] = b.state.Stored
	}
}

// groupVoltage is the mean voltage of a group's branches, p.u.
func (e *Engine) groupVoltage(g int) (mean float64) {
	members := e.in.groups[g].Members
	for _, k := range members {
		j := &e.in.injections[k]
		mean += cmplx.Abs(e.between(j.From, j.To)) / j.Nominal
	}
	return mean / float64(len(members))
}

// nextPlant returns the next instant at which a plant changes its power.
func (e *Engine) nextPlant(now devices.Time) devices.Time {
	next := devices.Never
	for _, v := range e.plants.inverters {
		if v.law.held {
			next = min(next, v.law.sheet.NextMove(v.state, v.target, now))
		}
	}
	for _, b := range e.plants.batteries {
		if until := b.sheet.Until(b.state, b.kW); b.kW != 0 && until < devices.Never-now {
			next = min(next, now+max(until, 1))
		}
		next = min(next, b.sheet.NextSwitch(now))
	}
	for _, c := range e.plants.chargers {
		if t := c.sheet.NextEvent(c.state, c.kW, now); t > now {
			next = min(next, t)
		}
	}
	return next
}

// advancePlants lets an interval pass, and reports whether any plant's power changes
// with its end.
func (e *Engine) advancePlants(from, to devices.Time, r *runner) (changed bool) {
	p := &e.plants
	for _, v := range p.inverters {
		if !v.law.held {
			continue
		}
		next := v.law.sheet.Advance(v.state, v.target, to-from)
		changed = changed || next != v.state
		v.state = next
	}
	for _, b := range p.batteries {
		var x devices.Exchange
		b.state, x = b.sheet.Advance(b.state, b.kW, to-from)
		b.exchanged.In += x.In
		b.exchanged.Out += x.Out
		b.exchanged.Loss += x.Loss
		was := b.kW
		if len(b.watched) == 0 {
			reading := devices.BatteryReading{}
			if b.profile >= 0 {
				reading.Profile = e.in.values[b.profile] * b.scale
			}
			changed = changed || b.sheet.Request(b.state, reading, to) != was
		} else {
			changed = changed || b.sheet.Allowed(b.state, was) != was
		}
	}
	for _, c := range p.chargers {
		var drawn float64
		c.state, drawn = c.sheet.Advance(c.state, c.kW, to-from)
		_ = drawn
		s := c.sheet.Observe(c.state, to)
		changed = changed || s != c.state || c.sheet.Wants(s, to) != c.kW
	}
	hours := float64(to-from) / 3.6e12
	for i := range e.state.Curtailed {
		r.curtailed[i] += e.state.Curtailed[i] * hours
	}
	for i := range e.state.Generation {
		r.generated[i] += real(e.state.Generation[i]) / 1000 * hours
	}
	return changed
}

// totals returns what every plant did over the run.
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

// standing of plants for the meter.
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
