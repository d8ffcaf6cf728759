package sim

import (
	"fmt"

	"yearflow/profiles"
	"yearflow/sim/feeder"
	"yearflow/sim/powerflow"
	"yearflow/sim/tables"
)

// reverseRisk is a unit whose reverse mode takes power that flows back for a source
// at the other end.
type reverseRisk struct {
	settings *feeder.TapSettings
	name     string
	weight   []float64 // by injection: its share in the unit's phase
	generate float64   // kW at the step where most flows back, as is load
	load     float64
	least    float64 // kW, the least load of all steps
	worst    float64
	step     int
}

// ReverseRisks lists the regulators that are set for a source at the other end, by
// reverse `follow`, `reverse only` or `neutral`, though none stands there, and behind
// which generation exceeds load in some step of the period. Of the units of one row of
// settings the one that sees most is told. Losses and voltages are not counted.
//
// It reads every step of the profiles once where there is such a unit.
func (e *Engine) ReverseRisks() []tables.Fault {
	risks := e.reverseRisks()
	if len(risks) == 0 {
		return nil
	}
	power := powerflow.Input{Source: make([]complex128, len(e.in.fixed)), Power: make([]complex128, len(e.in.injections))}
	for step := range e.in.axis.Steps() {
		e.inputOf(step, &power)
		for _, r := range risks {
			r.see(step, &power, e.in)
		}
	}
	var out tables.Faults
	for i, r := range risks {
		if r.worst > 0 && !worseInRow(risks, i) {
			start, _ := e.in.axis.Bounds(r.step)
			out.Add(r.settings.ReverseAt, "%s", r.text(profiles.Format(start, e.in.axis.Zone)))
		}
	}
	out.Sort()
	return out
}

func (e *Engine) reverseRisks() (risks []*reverseRisk) {
	m := e.net.Model
	for i := range m.Regulators {
		g := &m.Regulators[i]
		var behind *feeder.Behind
		for u := range g.Units {
			unit := &g.Units[u]
			s := unit.Settings
			if s == nil || s.Held || g.Ganged && !unit.Watched || !presumesSource(s.Reverse) {
				continue
			}
			if behind == nil {
				behind = m.Behind(i)
			}
			if behind.Fed {
				break
			}
			r := &reverseRisk{settings: s, name: "regulator " + fmt.Sprintf("%q", g.Name) + " " + unit.Name(g.Connection), weight: make([]float64, len(e.in.injections))}
			for k := range r.weight {
				if l := e.in.loadOf[k]; l >= 0 {
					x := &m.Loads[l]
					r.weight[k] = behind.Share(x.Node, x.Phases, x.Pairs, unit.Phase)
				} else if n := e.in.generator[k]; n >= 0 {
					x := &m.Generators[n]
					r.weight[k] = behind.Share(x.Node, x.Phases, x.Pairs, unit.Phase)
				}
			}
			risks = append(risks, r)
		}
	}
	return risks
}

// presumesSource tells whether a mode takes reverse flow for a source at the other end.
func presumesSource(m feeder.ReverseMode) bool {
	return m == feeder.ReverseFollow || m == feeder.ReverseOnly || m == feeder.ReverseNeutral
}

func (r *reverseRisk) see(step int, power *powerflow.Input, in *inputs) {
	load, generate := 0.0, 0.0
	for k, w := range r.weight {
		if w == 0 {
			continue
		}
		if kw := w * real(power.Power[k]) / 1000; in.loadOf[k] >= 0 {
			load += kw
		} else {
			generate -= kw
		}
	}
	if step == 0 || load < r.least {
		r.least = load
	}
	if generate-load > r.worst {
		r.worst, r.generate, r.load, r.step = generate-load, generate, load, step
	}
}

// worseInRow tells whether another unit of the same row of settings sees more, or as
// much and stands before it.
func worseInRow(risks []*reverseRisk, i int) bool {
	for j, o := range risks {
		if o.settings.At == risks[i].settings.At && (o.worst > risks[i].worst || o.worst == risks[i].worst && j < i) {
			return true
		}
	}
	return false
}

func (r *reverseRisk) text(at string) string {
	does := "takes the source's side for the one to regulate, which its taps hardly move, and runs to a tap limit"
	if r.settings.Reverse == feeder.ReverseNeutral {
		does = "goes to neutral and leaves its load side alone while the source still stands before it"
	}
	return fmt.Sprintf("%s: reverse is %s, for a source at the other end, and none stands behind it; at %s generation behind it in its phase is %.5g kW, load %.5g kW "+
		"(the least of the period: %.5g kW): power flows back, and the control %s; usual with generation: stay, or none", r.name, r.settings.Reverse, at, r.generate, r.load, r.least, does)
}
