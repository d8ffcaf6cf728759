package feeder

import (
	"time"

	"yearflow/sim/tables"
)

// MeterBlock is one [[meters]] entry of study.toml: files of interval data that are
// read alike.
type MeterBlock struct {
	At      tables.Pos
	Files   []string // glob patterns below the study's folder
	Layout  string   // long or wide
	Values  string   // interval or register
	Stamped string   // start or end
	Zone    *time.Location
	Unit    string // of value columns without one
	Net     bool   // what flows back counts negative
}

// MeterTie is a row of meters.csv: the load that a meter measures.
type MeterTie struct {
	At          tables.Pos
	Meter, Load string
	Multiplier  float64
	Net         bool
	ServiceKW   float64 // NaN: not known
}

type meterRow struct {
	Row        tables.Row    `csv:"@"`
	Meter      tables.Text   `csv:"meter" is:"key"`
	Load       tables.Text   `csv:"load" is:"required"`
	Multiplier tables.Number `csv:"multiplier" is:">0" default:"1"`
	Net        tables.Flag   `csv:"net"`
	Service    tables.Number `csv:"service" unit:"kW" is:">0"`
}

// meters reads a [[meters]] entry.
func (r *settingsReader) meters(key string, d meterDocument, zone *time.Location) MeterBlock {
	b := MeterBlock{At: r.at.of(key), Files: r.list(key+".files", d.Files), Layout: r.word(key+".layout", d.Layout, "long", "wide"),
		Values: r.word(key+".values", d.Values, "interval", "register"), Stamped: r.word(key+".stamped", d.Stamped, "start", "end"),
		Zone: zone, Net: r.flag(key+".net", d.Net)}
	b.Unit, _ = r.text(key+".unit", d.Unit)
	if d.Files == nil {
		r.fault(key+".files", "is missing; want a list such as [\"meters/*.csv\"]")
	}
	if z := r.zone(key+".zone", d.Zone); z != nil {
		b.Zone = z
	}
	return b
}

// ties reads meters.csv into the model.
func (b *builder) ties() {
	for i := range b.t.meters {
		r := &b.t.meters[i]
		if r.Row.Bad {
			continue
		}
		b.model.Meters = append(b.model.Meters, MeterTie{r.Row.At, r.Meter.Value, r.Load.Value, r.Multiplier.Value, r.Net.Value, blank(r.Service)})
	}
}

// metered tells whether a meter is tied to a load.
func (b *builder) metered(load string) bool {
	for i := range b.t.meters {
		if b.t.meters[i].Load.Value == load {
			return true
		}
	}
	return false
}
