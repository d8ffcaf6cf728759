package feeder

import (
	"bytes"
	"errors"
	"fmt"
	"io/fs"
	"reflect"
	"strings"

	"github.com/pelletier/go-toml/v2"
	"github.com/pelletier/go-toml/v2/unstable"

	"yearflow/sim/tables"
)

// document is study.toml or case.toml as it is written. The values are of any type,
// so that every key that is not known is found in one go and a value of a wrong type
// is told in our own words, with its line.
type document struct {
	Title     any               `toml:"title"`
	Feeder    any               `toml:"feeder"`
	Frequency any               `toml:"frequency"`
	Period    periodDocument    `toml:"period"`
	Profiles  []profileDocument `toml:"profiles"`
	Run       runDocument       `toml:"run"`
	Limits    limitsDocument    `toml:"limits"`
	Prices    pricesDocument    `toml:"prices"`
	Weather   weatherDocument   `toml:"weather"`
	Meters    []meterDocument   `toml:"meters"`
	Scale     scaleDocument     `toml:"scale"`

	Allocation allocationDocument `toml:"allocation"`

	Compare map[string]any `toml:"compare"`
	Tune    map[string]any `toml:"tune"`
	Hosting map[string]any `toml:"hosting"`
}

type periodDocument struct {
	Start any `toml:"start"`
	End   any `toml:"end"`
	Step  any `toml:"step"`
	Zone  any `toml:"zone"`
}

type profileDocument struct {
	Files       any `toml:"files"`
	Stamped     any `toml:"stamped"`
	Interpolate any `toml:"interpolate"`
	Repeat      any `toml:"repeat"`
	Zone        any `toml:"zone"`
}

type runDocument struct {
	Start    any `toml:"start"`
	Voltages any `toml:"voltages"`
	Flows    any `toml:"flows"`
	Log      any `toml:"log"`
	Series   any `toml:"series"`
}

type limitsDocument struct {
	Range     any `toml:"range"`
	Judge     any `toml:"judge"`
	Allowance any `toml:"allowance"`
}

type pricesDocument struct {
	Currency  any `toml:"currency"`
	Energy    any `toml:"energy"`
	Demand    any `toml:"demand"`
	Peak      any `toml:"peak"`
	Operation any `toml:"operation"`
	Rate      any `toml:"rate"`
	Years     any `toml:"years"`
}

type meterDocument struct {
	Files   any `toml:"files"`
	Layout  any `toml:"layout"`
	Values  any `toml:"values"`
	Stamped any `toml:"stamped"`
	Zone    any `toml:"zone"`
	Unit    any `toml:"unit"`
	Net     any `toml:"net"`
}

type weatherDocument struct {
	File      any `toml:"file"`
	Stamped   any `toml:"stamped"`
	Zone      any `toml:"zone"`
	Latitude  any `toml:"latitude"`
	Longitude any `toml:"longitude"`
	Elevation any `toml:"elevation"`
}

type allocationDocument struct {
	At          any `toml:"at"`
	Real        any `toml:"real"`
	Reactive    any `toml:"reactive"`
	PowerFactor any `toml:"power_factor"`
	Current     any `toml:"current"`
	By          any `toml:"by"`
	Utilization any `toml:"utilization"`
}

type scaleDocument struct {
	Load       any `toml:"load"`
	Generation any `toml:"generation"`
}

// places holds where each key stands: "period.step", "profiles[1].files".
type places map[string]tables.Pos

// readDocument reads a settings file; what it cannot make sense of is a fault. whole
// is false where the file cannot be read to its end: what it lacks is no fault then.
func readDocument(fsys fs.FS, name string, faults *tables.Faults) (d document, at places, whole bool) {
	data, unreadable := tables.ReadText(fsys, name)
	if unreadable != nil {
		*faults = append(*faults, *unreadable)
		return d, places{}, false
	}
	at, err := keyPlaces(name, data)
	if err == nil {
		err = toml.NewDecoder(bytes.NewReader(data)).DisallowUnknownFields().Decode(&d)
	}
	var strict *toml.StrictMissingError
	var wrong *toml.DecodeError
	var syntax fault
	switch {
	case err == nil:
		whole = true
	case errors.As(err, &syntax):
		faults.Add(syntax.at, "%s", syntax.text)
	case errors.As(err, &strict):
		whole = true
		for i := range strict.Errors {
			e := &strict.Errors[i]
			line, column := e.Position()
			key := e.Key()
			faults.Add(tables.Pos{File: name, Line: line, Column: column}, "unknown key %q%s", strings.Join(key, "."), keyHint(key))
		}
	case errors.As(err, &wrong):
		line, column := wrong.Position()
		text := strings.TrimPrefix(wrong.Error(), "toml: ")
		if strings.Contains(text, "Go") || strings.Contains(text, "feeder.") {
			text = "want a table here"
			if k := strings.Join(wrong.Key(), "."); k != "" {
				text = fmt.Sprintf("want [%s] with its keys below it", k)
			}
		}
		faults.Add(tables.Pos{File: name, Line: line, Column: column}, "%s", text)
	default:
		faults.Add(tables.Pos{File: name}, "%v", strings.TrimPrefix(err.Error(), "toml: "))
	}
	return d, at, whole
}

// keyHint names the nearest key to the last part of an unknown one.
func keyHint(key []string) string {
	if len(key) == 0 {
		return ""
	}
	t := reflect.TypeFor[document]()
	for _, part := range key[:len(key)-1] {
		f, ok := fieldOf(t, part)
		if !ok {
			return ""
		}
		if f.Kind() == reflect.Slice {
			f = f.Elem()
		}
		if f.Kind() != reflect.Struct {
			return ""
		}
		t = f
	}
	var names []string
	for i := range t.NumField() {
		names = append(names, t.Field(i).Tag.Get("toml"))
	}
	return tables.Hint(key[len(key)-1], names)
}

func fieldOf(t reflect.Type, key string) (reflect.Type, bool) {
	for i := range t.NumField() {
		if t.Field(i).Tag.Get("toml") == key {
			return t.Field(i).Type, true
		}
	}
	return nil, false
}

// keyPlaces finds the line of every key.
func keyPlaces(name string, data []byte) (places, error) {
	at := places{}
	var p unstable.Parser
	p.Reset(data)
	table := ""
	count := map[string]int{}
	for p.NextExpression() {
		e := p.Expression()
		var parts []string
		var first, last unstable.Range
		it := e.Key()
		for it.Next() {
			if len(parts) == 0 {
				first = it.Node().Raw
			}
			last = it.Node().Raw
			parts = append(parts, string(it.Node().Data))
		}
		last.Length += last.Offset - first.Offset
		last.Offset = first.Offset
		start := p.Shape(last).Start
		pos := tables.Pos{File: name, Line: start.Line, Column: start.Column}
		key := strings.Join(parts, ".")
		switch e.Kind {
		case unstable.Table:
			table = key
			at[table] = pos
		case unstable.ArrayTable:
			table = fmt.Sprintf("%s[%d]", key, count[key])
			count[key]++
			at[table] = pos
		case unstable.KeyValue:
			if table != "" {
				key = table + "." + key
			}
			at[key] = pos
		}
	}
	if err := p.Error(); err != nil {
		var pe *unstable.ParserError
		if errors.As(err, &pe) {
			start := p.Shape(p.Range(pe.Highlight)).Start
			return at, fault{tables.Pos{File: name, Line: start.Line, Column: start.Column}, pe.Message}
		}
		return at, err
	}
	return at, nil
}

// fault is an error of the settings language itself, with its place.
type fault struct {
	at   tables.Pos
	text string
}

func (f fault) Error() string { return f.text }

// of returns the place of a key, or of the nearest table above it.
func (p places) of(key string) tables.Pos {
	for key != "" {
		if at, ok := p[key]; ok {
			return at
		}
		i := strings.LastIndexAny(key, ".[")
		if i < 0 {
			break
		}
		key = key[:i]
	}
	return p[""]
}

// overlay lays the case's document over the study's: what a case says replaces.
func (d *document) overlay(c document) {
	overlay(reflect.ValueOf(d).Elem(), reflect.ValueOf(c))
}

func overlay(d, c reflect.Value) {
	for i := range d.NumField() {
		switch d.Field(i).Kind() {
		case reflect.Struct:
			overlay(d.Field(i), c.Field(i))
		case reflect.Map:
			for _, k := range c.Field(i).MapKeys() {
				if d.Field(i).IsNil() {
					d.Field(i).Set(reflect.MakeMap(d.Field(i).Type()))
				}
				d.Field(i).SetMapIndex(k, c.Field(i).MapIndex(k))
			}
		default:
			if !c.Field(i).IsNil() {
				d.Field(i).Set(c.Field(i))
			}
		}
	}
}
