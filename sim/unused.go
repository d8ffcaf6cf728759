package sim

import (
	"fmt"
	"math"
	"strings"

	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// namedAtMost is how many names a line lists before it counts the rest.
const namedAtMost = 8

// Unused lists what the study does not know or does not use, and what was made of it:
// loads and generators without a profile, which are taken as constant, and profiles
// that nothing names. A profile that is named elsewhere (in a case) is left out.
func (e *Engine) Unused(elsewhere ...feeder.ProfileUse) []tables.Fault {
	var out tables.Faults
	e.constantLoads(&out)
	e.constantGenerators(&out)
	used := map[string]bool{}
	for _, u := range append(e.Study.ProfileUses(), elsewhere...) {
		used[u.Name] = true
	}
	var names []string
	var first tables.Pos
	flush := func() {
		if len(names) == 1 {
			out.Add(first, "profile %q has no user: no table names it, and it is not in the run", names[0])
		} else if len(names) > 1 {
			out.Add(first, "%d profiles of this file have no user: no table names %s, and they are not in the run", len(names), someOf(names))
		}
		names = nil
	}
	for _, name := range e.in.set.Names() { // by file
		s, ok := e.in.set.Lookup(name)
		if !ok || used[name] {
			continue
		}
		if len(names) > 0 && s.Pos.File != first.File {
			flush()
		}
		if len(names) == 0 {
			first = s.Pos
		}
		names = append(names, name)
	}
	flush()
	return out
}

// constantLoads lists the loads without a profile: those with an amount stand at it,
// those known by their energy have it spread evenly.
func (e *Engine) constantLoads(out *tables.Faults) {
	m := e.net.Model
	var steady, even []string
	var steadyAt, evenAt tables.Pos
	kw, kwh := 0.0, 0.0
	follows := e.followsMeasured()
	for i := range m.Loads {
		l := &m.Loads[i]
		switch {
		case l.Profile != "" || follows[i]:
		case len(l.EnergyKWh) > 0:
			if len(even) == 0 {
				evenAt = l.At
			}
			even = append(even, l.Name)
			for _, x := range l.EnergyKWh {
				kwh += x.KWh
			}
		default:
			if len(steady) == 0 {
				steadyAt = l.At
			}
			steady = append(steady, l.Name)
			if !math.IsNaN(l.KW) {
				kw += l.KW
			}
		}
	}
	if len(steady) > 0 {
		out.Add(steadyAt, "%s without a profile, assumed constant at %s at every step: %s", ofAll(len(steady), len(m.Loads), "load"), amountOf(kw, "kW"), someOf(steady))
	}
	if len(even) > 0 {
		out.Add(evenAt, "%s without a profile, the energy of %s assumed spread evenly over its time: %s", ofAll(len(even), len(m.Loads), "load"), amountOf(kwh, "kWh"), someOf(even))
	}
}

// followsMeasured marks the loads that need no profile of their own: those with a meter,
// and those that a measured total is shared over.
func (e *Engine) followsMeasured() []bool {
	out := make([]bool, len(e.net.Model.Loads))
	if e.in.meters != nil {
		for i := range out {
			_, out[i] = e.in.meters.loads[e.net.Model.Loads[i].Name]
		}
	}
	if e.in.shared.spec != nil {
		for _, k := range e.in.shared.injections {
			if l := e.in.loadOf[k]; l >= 0 {
				out[l] = true
			}
		}
	}
	return out
}

func (e *Engine) constantGenerators(out *tables.Faults) {
	m := e.net.Model
	var steady []string
	var at tables.Pos
	kw := 0.0
	for i := range m.Generators {
		if g := &m.Generators[i]; g.Profile == "" && !math.IsNaN(g.KW) {
			if len(steady) == 0 {
				at = g.At
			}
			steady = append(steady, g.Name)
			kw += g.KW
		}
	}
	if len(steady) > 0 {
		out.Add(at, "%s without a profile, assumed constant at %s at every step: %s", ofAll(len(steady), len(m.Generators), "generator"), amountOf(kw, "kW"), someOf(steady))
	}
}

func ofAll(n, all int, thing string) string {
	if all != 1 {
		thing += "s"
	}
	return fmt.Sprintf("%d of %d %s", n, all, thing)
}

// amountOf is a sum as messages print it.
func amountOf(x float64, unit string) string { return fmt.Sprintf("%.6g %s in all", x, unit) }

// someOf lists names, the first few of many.
func someOf(names []string) string {
	if len(names) <= namedAtMost {
		return strings.Join(names, ", ")
	}
	return fmt.Sprintf("%s and %d more", strings.Join(names[:namedAtMost], ", "), len(names)-namedAtMost)
}
