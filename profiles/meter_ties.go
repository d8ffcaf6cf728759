package profiles

import (
	"io/fs"

	"yearflow/sim/tables"
)

// Tie says which load a meter measures.
type Tie struct {
	At          tables.Pos // of the row
	Meter, Load string
	Multiplier  float64 // the load has so many times what the meter counted; more than 0
	Net         bool    // the meter counts what flows back as negative
	ServiceKW   float64 // NaN: not known
}

// tieRow is a row of meters.csv.
type tieRow struct {
	Row        tables.Row    `csv:"@"`
	Meter      tables.Text   `csv:"meter" is:"required"`
	Load       tables.Text   `csv:"load" is:"required"`
	Multiplier tables.Number `csv:"multiplier" is:">0" default:"1"`
	Net        tables.Flag   `csv:"net" default:"no"`
	Service    tables.Number `csv:"service" unit:"kW" is:">0"`
}

// ReadTies reads a table that ties meters to loads: **meter**, **load**,
// multiplier = 1, net (yes | no) = no, service [kW]. Without such a file there are none.
func ReadTies(fsys fs.FS, name string, faults *tables.Faults) []Tie {
	sheet := tables.Read[tieRow](fsys, name, faults)
	var ties []Tie
	for _, row := range sheet.Rows(faults) {
		if row.Row.Bad {
			continue
		}
		ties = append(ties, Tie{row.Row.At, row.Meter.Value, row.Load.Value, row.Multiplier.Value, row.Net.Value, row.Service.Value})
	}
	return ties
}

// With returns the rules with what the ties know of their meters, for OpenMeters.
func (r MeterRules) With(ties []Tie) MeterRules {
	net, service := make(map[string]bool), make(map[string]float64)
	for name, yes := range r.Net {
		net[name] = yes
	}
	for name, size := range r.ServiceKW {
		service[name] = size
	}
	for _, t := range ties {
		if t.Net {
			net[t.Meter] = true
		}
		if t.ServiceKW == t.ServiceKW {
			service[t.Meter] = t.ServiceKW
		}
	}
	r.Net, r.ServiceKW = net, service
	return r
}

// CheckTies holds the ties against the loads of a feeder and, where set is not nil,
// against the meters that have data. Faults are an unknown load, a meter without data and
// a meter tied twice; warnings a meter that belongs to no load. Loads without a meter
// are Unmetered's.
func CheckTies(ties []Tie, loads []string, set *MeterSet) (faults, warnings tables.Faults) {
	known := make(map[string]bool)
	for _, l := range loads {
		known[l] = true
	}
	first := make(map[string]Tie)
	for _, t := range ties {
		if !known[t.Load] {
			faults.Add(t.At, "meter %q: there is no load %q%s", t.Meter, t.Load, tables.Hint(t.Load, loads))
		}
		if other, ok := first[t.Meter]; ok {
			if other.Load == t.Load {
				faults.Add(t.At, "meter %q is tied to load %q twice, see %s; take one row away", t.Meter, t.Load, other.At)
			} else {
				faults.Add(t.At, "meter %q is tied to load %q here and to %q at %s: its energy would count twice; tie it to one", t.Meter, t.Load, other.Load, other.At)
			}
			continue
		}
		first[t.Meter] = t
	}
	if set == nil {
		return faults, warnings
	}
	for _, t := range ties {
		if _, ok := set.Lookup(t.Meter); !ok && first[t.Meter].At == t.At {
			faults.Add(t.At, "meter %q has no data in the files of [[meters]]%s", t.Meter, tables.Hint(t.Meter, set.names()))
		}
	}
	for _, m := range set.meters {
		if _, ok := first[m.Name]; !ok {
			warnings.Add(m.Pos, "meter %q belongs to no load; its %.0f kWh are left out", m.Name, m.After)
		}
	}
	return faults, warnings
}

// Unmetered returns the loads that no tie names, in their order.
func Unmetered(ties []Tie, loads []string) []string {
	tied := make(map[string]bool)
	for _, t := range ties {
		tied[t.Load] = true
	}
	var out []string
	for _, l := range loads {
		if !tied[l] {
			out = append(out, l)
		}
	}
	return out
}

func (s *MeterSet) names() []string {
	out := make([]string, len(s.meters))
	for i, m := range s.meters {
		out[i] = m.Name
	}
	return out
}
