package sim

import (
	"math"

	"yearflow/profiles"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// metering is the interval data of a study's meters, added up to loads.
type metering struct {
	set   *profiles.MeterSet
	loads map[string]*profiles.MeteredLoad
	all   []profiles.MeteredLoad
}

// newMetering reads, checks and mends the meters of a study; without [[meters]] there
// is none. cache is a folder of the machine, or blank.
func newMetering(st *feeder.Study, axis profiles.Axis, cache string, faults, odd *tables.Faults) *metering {
	m := st.Model
	if len(st.Settings.Meters) == 0 {
		if len(m.Meters) > 0 {
			faults.Add(m.Meters[0].At, "meter %q is tied to load %q, but study.toml names no files of meters: [[meters]] with files = [...]", m.Meters[0].Meter, m.Meters[0].Load)
		}
		return nil
	}
	ties := make([]profiles.Tie, len(m.Meters))
	for i, t := range m.Meters {
		ties[i] = profiles.Tie{At: t.At, Meter: t.Meter, Load: t.Load, Multiplier: t.Multiplier, Net: t.Net, ServiceKW: t.ServiceKW}
	}
	blocks := make([]profiles.MeterBlock, len(st.Settings.Meters))
	for i, b := range st.Settings.Meters {
		blocks[i] = profiles.MeterBlock{Pos: b.At, Files: b.Files, Layout: b.Layout, Values: b.Values, Stamped: b.Stamped, Zone: b.Zone, Unit: b.Unit, Net: b.Net}
	}
	set, err := profiles.OpenMeters(st.FS, blocks, cache, profiles.MeterRules{Zone: axis.Zone}.With(ties))
	if !take(err, blocks[0].Pos, faults) {
		return nil
	}
	names := make([]string, len(m.Loads))
	for i := range m.Loads {
		names[i] = m.Loads[i].Name
	}
	wrong, warn := profiles.CheckTies(ties, names, set)
	*odd = append(append(*odd, set.Warnings...), warn...)
	if len(wrong) > 0 {
		*faults = append(*faults, wrong...)
		return nil
	}
	all, err := set.Loads(ties, axis)
	if !take(err, blocks[0].Pos, faults) {
		return nil
	}
	x := &metering{set: set, all: all, loads: map[string]*profiles.MeteredLoad{}}
	for i := range all {
		x.loads[all[i].Load] = &all[i]
	}
	return x
}

// take adds an error to faults and tells whether there was none.
func take(err error, at tables.Pos, faults *tables.Faults) bool {
	if err == nil {
		return true
	}
	if list, ok := err.(tables.Faults); ok {
		*faults = append(*faults, list...)
	} else {
		faults.Add(at, "%v", err)
	}
	return false
}

// of returns the series of a metered load, and nil where it has none; what the load
// table says beside it is compared.
func (x *metering) of(l *feeder.Load, odd *tables.Faults) *profiles.Series {
	if x == nil {
		return nil
	}
	metered, ok := x.loads[l.Name]
	if !ok {
		return nil
	}
	claim := profiles.EnergyClaim{Load: l.Name, At: l.At, Step: metered.Series.StepLength(), MeteredKWh: metered.KWh, MeteredKW: metered.PeakKW, TableKW: l.KW}
	if len(l.EnergyKWh) > 0 {
		claim.TableKWh = 0
		for _, e := range l.EnergyKWh {
			claim.TableKWh += e.KWh
		}
	}
	if f, is := profiles.EnergyCheck(claim); is {
		*odd = append(*odd, f)
	}
	return metered.Series
}

// mended lists what was edited, for the results.
func (x *metering) mended() (out []results.MendedRow) {
	if x == nil {
		return nil
	}
	add := func(m profiles.Mended) {
		out = append(out, results.MendedRow{Meter: m.Meter, Rule: m.Rule, From: m.From, To: m.To, Count: m.Count, Energy: math.Round(m.Energy*1e6) / 1e6})
	}
	for _, m := range x.set.Totals() {
		add(m)
	}
	for i := range x.all {
		for _, m := range x.all[i].Outside {
			add(m)
		}
	}
	return out
}
