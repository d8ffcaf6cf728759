package results

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"maps"
	"math"
	"slices"
	"time"

	"yearflow/sim/tables"
)

// RunRecord is what readers need of run.json.
type RunRecord struct {
	Title, Case string
	Zone        string // IANA name
	Location    *time.Location
	Start, End  time.Time
	Step, Row   time.Duration // of a row of the logs; a step or longer
	Limits      RunLimits
	Demo        bool     // an invented study: pictures say so
	Files       []string // the result files that the run wrote
}

// RunLimits is the [limits] of the study: own numbers, or the rows of ANSI C84.1.
type RunLimits struct {
	Own bool
	VoltageLimits
	All       bool    // every node is judged, not only those with customers
	Allowance float64 // V on the 120 V base, at a load's own peak
}

// runJSON is the shape of run.json, as far as it is read.
type runJSON struct {
	Format      *int     `json:"format"`
	Version     string   `json:"version"`
	Title       string   `json:"title"`
	Case        string   `json:"case"`
	Zone        string   `json:"zone"`
	StepSeconds float64  `json:"step_seconds"`
	Start       string   `json:"start"`
	End         string   `json:"end"`
	Demo        bool     `json:"demo"`
	Limits      struct { // p.u.
		Range     string   `json:"range"`
		Judge     string   `json:"judge"`
		Low       *float64 `json:"low"`
		High      *float64 `json:"high"`
		OuterLow  *float64 `json:"outer_low"`
		OuterHigh *float64 `json:"outer_high"`
		Allowance float64  `json:"allowance_volts"`
	} `json:"limits"`
	RowSeconds float64           `json:"row_seconds"`
	Results    map[string]string `json:"results_sha256"`
}

// runFormat is the version of the results folder's layout. A reader refuses others.
const runFormat = 1

func (f *Folder) readRun() error {
	const name = "run.json"
	at := tables.Pos{File: name}
	fault := func(p tables.Pos, format string, args ...any) error {
		return tables.Faults{{Pos: p, Text: fmt.Sprintf(format, args...)}}
	}
	data, err := fs.ReadFile(f.files, name)
	if err != nil {
		return tables.Faults{missingFile(name, err)}
	}
	var j runJSON
	dec := json.NewDecoder(bytes.NewReader(data))
	if err := dec.Decode(&j); err != nil {
		return fault(jsonPos(name, data, err), "is not a run's record (%v): the file is broken; run the study again", err)
	}
	if _, err := dec.Token(); err != io.EOF {
		return fault(at, "goes on after its end: the file is broken; run the study again")
	}
	if j.Format == nil || *j.Format != runFormat {
		have := "none"
		if j.Format != nil {
			have = fmt.Sprint(*j.Format)
		}
		return fault(at, "format is %s, this program reads %d (the folder was written by version %q): run the study again, or read it with that version", have, runFormat, j.Version)
	}
	var faults tables.Faults
	r := RunRecord{Title: j.Title, Case: j.Case, Zone: j.Zone, Demo: j.Demo}
	if r.Location, err = time.LoadLocation(j.Zone); err != nil || j.Zone == "" {
		faults.Add(at, "zone %q is not known here: want an IANA name such as America/Denver, or UTC", j.Zone)
		r.Location = time.UTC
	}
	if r.Start, err = parseTime(j.Start); err != nil {
		faults.Add(at, "start: %v", err)
	}
	if r.End, err = parseTime(j.End); err != nil {
		faults.Add(at, "end: %v", err)
	}
	if len(faults) == 0 && !r.End.After(r.Start) {
		faults.Add(at, "end %s is not after start %s", j.End, j.Start)
	}
	if !(j.StepSeconds >= 1 && j.StepSeconds <= 86400) {
		faults.Add(at, "step_seconds is %g, want 1 to 86400", j.StepSeconds)
	}
	r.Step = time.Duration(math.Round(j.StepSeconds * float64(time.Second)))
	r.Row = time.Duration(math.Round(j.RowSeconds * float64(time.Second)))
	if !(j.RowSeconds >= j.StepSeconds && j.RowSeconds <= 366*86400) {
		faults.Add(at, "row_seconds is %g, want step_seconds (%g) or more", j.RowSeconds, j.StepSeconds)
	}
	r.Files = slices.Sorted(maps.Keys(j.Results))
	l := j.Limits
	r.Limits = RunLimits{All: l.Judge == "all", Allowance: l.Allowance}
	if l.Low != nil || l.High != nil || l.OuterLow != nil || l.OuterHigh != nil {
		r.Limits.Own = true
		for _, x := range []*float64{l.OuterLow, l.Low, l.High, l.OuterHigh} {
			if x == nil || !(*x > 0.1 && *x < 10) {
				faults.Add(at, "limits: want low, high, outer_low and outer_high in p.u., or none of them")
				return faults.Err()
			}
		}
		r.Limits.VoltageLimits = VoltageLimits{OuterLow: *l.OuterLow, Low: *l.Low, High: *l.High, OuterHigh: *l.OuterHigh}
	}
	f.Run = r
	return faults.Err()
}

// jsonPos finds the line and column of a fault in a JSON file.
func jsonPos(name string, data []byte, err error) tables.Pos {
	offset := int64(len(data))
	var syntax *json.SyntaxError
	var wrong *json.UnmarshalTypeError
	switch {
	case errors.As(err, &syntax):
		offset = syntax.Offset
	case errors.As(err, &wrong):
		offset = wrong.Offset
	}
	if offset > int64(len(data)) {
		offset = int64(len(data))
	}
	before := data[:offset]
	return tables.Pos{
		File:   name,
		Line:   1 + bytes.Count(before, []byte("\n")),
		Column: len(before) - bytes.LastIndexByte(before, '\n'),
	}
}

// parseTime reads an ISO 8601 time with its offset.
func parseTime(s string) (time.Time, error) {
	for _, layout := range []string{time.RFC3339Nano, "2006-01-02T15:04Z07:00"} {
		if t, err := time.Parse(layout, s); err == nil {
			if t.Year() < 1700 || t.Year() > 2250 {
				return time.Time{}, fmt.Errorf("time %q: want a year from 1700 to 2250", s)
			}
			return t, nil
		}
	}
	return time.Time{}, fmt.Errorf("want a time with its offset, such as 2025-01-01T00:00:00-07:00, got %q", s)
}
