package feeder

import (
	"math"
	"reflect"
	"strconv"
	"strings"
	"time"

	"yearflow/sim/tables"
)

// Difference is one cell in which two studies differ: of a table of the feeder, or a
// key of study.toml (its table is "study.toml" then and Column is blank).
type Difference struct {
	Table string // name of the table, without .csv
	Key   string // of the row: its key cells, joined by ", "
	// Column is the name of the cell's column and Unit its unit, that of the row as it
	// is held here and not as it may be written: km where the file has feet.
	Column, Unit string
	Base, Other  string     // blank where a study has no such row or cell
	At           tables.Pos // of the row in the other study, or in the base where it has none
}

// Title is the column with its unit.
func (d Difference) Title() string {
	if d.Unit == "" {
		return d.Column
	}
	return d.Column + " [" + d.Unit + "]"
}

// Differences lists every cell in which other differs from base, in the order of the
// tables and of their rows. Values that a default fills in are compared as they act:
// a cell that says what the default says anyway is no difference. Titles, notes and
// the order of rows are none either.
func Differences(base, other *Study) []Difference {
	out := settingsDifferences(&base.Settings, &other.Settings, other.Place)
	a, b := reflect.ValueOf(base.tables).Elem(), reflect.ValueOf(other.tables).Elem()
	read := tableNames()
	field := 0
	for i := range a.NumField() {
		if a.Field(i).Kind() != reflect.Slice || a.Field(i).Type().Elem().Kind() != reflect.Struct || a.Type().Field(i).Name == "assumed" {
			continue
		}
		out = append(out, tableDifferences(read[field], a.Field(i), b.Field(i))...)
		field++
	}
	return out
}

// tableDifferences compares the rows of one table.
func tableDifferences(table string, a, b reflect.Value) (out []Difference) {
	at := map[string]int{}
	for i := range b.Len() {
		at[rowKey(b.Index(i))] = i
	}
	known := map[string]bool{}
	for i := range a.Len() {
		key := rowKey(a.Index(i))
		known[key] = true
		k, there := at[key]
		if !there {
			out = append(out, Difference{Table: table, Key: key, Column: "(row)", Base: "present", At: rowAt(a.Index(i))})
			continue
		}
		out = append(out, rowDifferences(table, key, a.Index(i), b.Index(k))...)
	}
	for i := range b.Len() {
		row := b.Index(i)
		key := rowKey(row)
		if known[key] {
			continue
		}
		out = append(out, Difference{Table: table, Key: key, Column: "(row)", Other: "present", At: rowAt(row)})
		out = append(out, rowDifferences(table, key, reflect.Value{}, row)...)
	}
	return out
}

// rowDifferences compares two rows of one key; without a first one every cell that
// has a value is new.
func rowDifferences(table, key string, a, b reflect.Value) (out []Difference) {
	t := b.Type()
	for i := range t.NumField() {
		tag := t.Field(i).Tag
		if name := tag.Get("csv"); name == "" || name == "@" || isKey(tag) {
			continue
		}
		now, was := cellText(b.Field(i)), ""
		if a.IsValid() {
			was = cellText(a.Field(i))
		}
		if now != was {
			out = append(out, Difference{Table: table, Key: key, Column: tag.Get("csv"), Unit: tag.Get("unit"), Base: was, Other: now, At: rowAt(b)})
		}
	}
	return out
}

func isKey(tag reflect.StructTag) bool {
	for _, is := range strings.Split(tag.Get("is"), ",") {
		if is == "key" {
			return true
		}
	}
	return false
}

func rowKey(row reflect.Value) string {
	var parts []string
	for i := range row.NumField() {
		if isKey(row.Type().Field(i).Tag) {
			parts = append(parts, cellText(row.Field(i)))
		}
	}
	return strings.Join(parts, ", ")
}

func rowAt(row reflect.Value) tables.Pos {
	for i := range row.NumField() {
		if row.Type().Field(i).Type == reflect.TypeFor[tables.Row]() {
			at := row.Field(i).FieldByName("At")
			return tables.Pos{File: at.FieldByName("File").String(), Line: int(at.FieldByName("Line").Int()), Column: int(at.FieldByName("Column").Int())}
		}
	}
	return tables.Pos{}
}

// cellText is the value of a cell as it acts.
func cellText(cell reflect.Value) string {
	v := cell.FieldByName("Value")
	switch v.Kind() {
	case reflect.Float64:
		return numberText(v.Float())
	case reflect.Int:
		if !cell.FieldByName("Given").Bool() && v.Int() == 0 {
			return "" // blank and without a default
		}
		return strconv.FormatInt(v.Int(), 10)
	case reflect.Bool:
		if v.Bool() {
			return "yes"
		}
		return "no"
	}
	return v.String()
}

// numberText writes a number without the last bits that a change of unit leaves.
func numberText(x float64) string {
	if math.IsNaN(x) {
		return ""
	}
	return strconv.FormatFloat(x, 'g', 12, 64)
}

// settingsDifferences compares study.toml, key by key.
func settingsDifferences(a, b *Settings, place func(string) tables.Pos) (out []Difference) {
	add := func(key, unit, was, now string) {
		if was != now {
			out = append(out, Difference{Table: "study.toml", Key: key, Unit: unit, Base: was, Other: now, At: place(key)})
		}
	}
	number := func(key, unit string, was, now float64) { add(key, unit, numberText(was), numberText(now)) }
	number("frequency", "Hz", a.Frequency, b.Frequency)
	add("period", "", a.Period.text(), b.Period.text())
	add("profiles", "", profilesText(a.Profiles), profilesText(b.Profiles))
	add("run.start", "", startText(a.Run), startText(b.Run))
	add("limits.range", "pu", a.Limits.text(), b.Limits.text())
	add("limits.judge", "", judgeText(a.Limits), judgeText(b.Limits))
	number("limits.allowance", "V", a.Limits.Allowance, b.Limits.Allowance)
	p, q := &a.Prices, &b.Prices
	add("prices.currency", "", p.Currency, q.Currency)
	add("prices.energy", "1/kWh", numberText(p.Energy)+p.EnergyProfile, numberText(q.Energy)+q.EnergyProfile)
	number("prices.demand", "1/kW", p.Demand, q.Demand)
	add("prices.peak", "", p.Peak, q.Peak)
	number("prices.operation", "", p.Operation, q.Operation)
	number("prices.rate", "", p.Rate, q.Rate)
	number("prices.years", "", p.Years, q.Years)
	add("weather.file", "", a.Weather.File, b.Weather.File)
	number("weather.latitude", "deg", a.Weather.Latitude, b.Weather.Latitude)
	number("weather.longitude", "deg", a.Weather.Longitude, b.Weather.Longitude)
	number("weather.elevation", "m", a.Weather.Elevation, b.Weather.Elevation)
	number("scale.load", "", a.ScaleLoad, b.ScaleLoad)
	number("scale.generation", "", a.ScaleGeneration, b.ScaleGeneration)
	return out
}

func (p Period) text() string {
	zone := ""
	if p.Zone != nil {
		zone = p.Zone.String()
	}
	at := func(ns int64) string {
		t := time.Unix(0, ns)
		if p.Zone != nil {
			t = t.In(p.Zone)
		}
		return t.Format("2006-01-02T15:04:05-07:00")
	}
	return at(p.Start) + " to " + at(p.End) + ", step " + time.Duration(p.Step).String() + ", " + zone
}

// Same tells whether two periods hold the same steps of the same local time.
func (p Period) Same(q Period) bool { return p.text() == q.text() }

// String returns start, end, step and zone in words.
func (p Period) String() string { return p.text() }

func profilesText(blocks []ProfileBlock) string {
	var parts []string
	for _, b := range blocks {
		t := strings.Join(b.Files, " ") + " " + b.Stamped + " repeat " + b.Repeat
		if b.Interpolate {
			t += " interpolate"
		}
		if b.Zone != nil {
			t += " " + b.Zone.String()
		}
		parts = append(parts, t)
	}
	return strings.Join(parts, "; ")
}

func startText(r RunSettings) string {
	if r.Given {
		return "given"
	}
	return "settled"
}

func (l Limits) text() string {
	if !l.Own {
		return "ANSI C84.1"
	}
	return numberText(l.OuterLow) + " " + numberText(l.Low) + " " + numberText(l.High) + " " + numberText(l.OuterHigh)
}

func judgeText(l Limits) string {
	if l.All {
		return "all"
	}
	return "customers"
}
