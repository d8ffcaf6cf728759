package results

import (
	"encoding/json"
	"fmt"
	"math"

	"yearflow/sim/tables"
)

// RunInfo is what the engine knows of a run beyond its results.
type RunInfo struct {
	Version string            // of the program
	Inputs  map[string]string // SHA-256 in hexadecimal digits, by file, in the study's folder
	// Warnings is what is odd about the inputs but no error; reports repeat it.
	Warnings []tables.Fault
	// Settings is settings.csv, the settings sheets in force, its header first; nil: none
	// is written.
	Settings [][]string
	// Wall holds wall times for timing.json, the only file that differs between two
	// runs of the same inputs.
	Wall []WallTime
	// Figures, where it is not nil, draws pictures from the files written so far into
	// the folder dir and returns their names below it, and how long it took.
	// The report, which is made of the same files, is one of them.
	Figures func(dir string) ([]string, WallTime, error)
}

// WallTime is the time that a part of a run took.
type WallTime struct {
	Part    string  `json:"part"`
	Seconds float64 `json:"seconds"`
}

// runOut is the shape of run.json.
type runOut struct {
	Format      int               `json:"format"`
	Version     string            `json:"version"`
	Title       string            `json:"title"`
	Case        string            `json:"case"`
	Demo        bool              `json:"demo"`
	Zone        string            `json:"zone"`
	Start       string            `json:"start"`
	End         string            `json:"end"`
	StepSeconds float64           `json:"step_seconds"`
	RowSeconds  float64           `json:"row_seconds"`
	Frequency   float64           `json:"frequency_hertz"`
	Begins      string            `json:"begins"` // settled or given
	Limits      limitsOut         `json:"limits"`
	Percentiles string            `json:"percentiles"`
	Scale       scaleOut          `json:"scale"`
	Prices      map[string]any    `json:"prices"`
	Profiles    []profilesOut     `json:"profiles"`
	Voltages    string            `json:"voltages"`
	Flows       []string          `json:"flows"`
	Series      string            `json:"series"` // csv or parquet
	Counts      countsOut         `json:"counts"`
	Positions   []positionOut     `json:"positions_after_start_up"`
	StillMoving []string          `json:"still_moving_at_start_up"`
	StepsBy     map[string]int    `json:"steps_by_solver"`
	SolutionsBy map[string]int    `json:"solutions_by_solver"`
	Speed       Speed             `json:"speed"`
	Balance     balanceOut        `json:"balance"`
	Coarse      coarseOut         `json:"coarse_step"`
	Hunting     []huntingOut      `json:"hunting"`
	Trouble     []troubleOut      `json:"first_low_and_unsolved_steps"`
	Assumed     []noteOut         `json:"assumed"`
	Warnings    []noteOut         `json:"warnings"`
	Inputs      map[string]string `json:"inputs_sha256"`
	Results     map[string]string `json:"results_sha256"`
}

type limitsOut struct {
	Range string `json:"range"`
	Judge string `json:"judge"`
	// The four numbers stand here only where they are the study's own.
	Low       *float64     `json:"low,omitempty"`
	High      *float64     `json:"high,omitempty"`
	OuterLow  *float64     `json:"outer_low,omitempty"`
	OuterHigh *float64     `json:"outer_high,omitempty"`
	Allowance float64      `json:"allowance_volts"`
	Classes   []limitClass `json:"classes"`
}

type scaleOut struct {
	Load       float64 `json:"load"`
	Generation float64 `json:"generation"`
}

type profilesOut struct {
	Files       []string `json:"files"`
	Stamped     string   `json:"stamped"`
	Interpolate bool     `json:"interpolate"`
	Repeat      string   `json:"repeat"`
	Zone        string   `json:"zone,omitempty"`
}

type countsOut struct {
	Nodes        int     `json:"nodes"`
	Places       int     `json:"node_phases"`
	Loads        int     `json:"loads"`
	Customers    float64 `json:"customers"`
	Generators   int     `json:"generators"`
	Devices      int     `json:"devices"`
	Steps        int     `json:"steps"`
	OK           int     `json:"ok"`
	Low          int     `json:"low"`
	Unsolved     int     `json:"unsolved"`
	Operations   int     `json:"operations"`
	SettledHours float64 `json:"settled_hours"`
	Settling     float64 `json:"settling_hours"`
}

type positionOut struct {
	Device   string `json:"device"`
	Position int    `json:"position"`
}

type balanceOut struct {
	Checked int     `json:"intervals_and_steps_checked"`
	Worst   float64 `json:"worst_share_of_apparent_power"`
	At      string  `json:"worst_time,omitempty"`
}

// coarseOut says whether the step is too coarse for operations and durations: where
// settling intervals are more than a tenth of the hours outside, or where the
// voltage at a regulator changes by more than its bandwidth from step to step.
type coarseOut struct {
	TooCoarse       bool     `json:"too_coarse"`
	SettlingOutside float64  `json:"settling_place_hours_outside_a"`
	Outside         float64  `json:"place_hours_outside_a"`
	Regulators      []string `json:"regulators"`
}

// troubleKept is the number of low and unsolved steps that run.json names; steps.csv
// has them all.
const troubleKept = 100

// troubleOut names a step that is not ok, and where it fails.
type troubleOut struct {
	Time   string `json:"time"`
	Status string `json:"status"`
	Where  string `json:"where"`
}

// noteOut is what was assumed for a blank cell, or what is odd, at a place of the
// input; line and column are left out where the whole file or line is meant.
type noteOut struct {
	File   string `json:"file"`
	Line   int    `json:"line,omitempty"`
	Column int    `json:"column,omitempty"`
	Text   string `json:"text"`
}

func noteAt(p tables.Pos, text string) noteOut { return noteOut{p.File, p.Line, p.Column, text} }

type huntingOut struct {
	Time   string `json:"time"`
	Device string `json:"device"`
}

func (w *Writer) writeRun(o *Outcome, run RunInfo) error {
	set, t := w.plan.Settings, &w.stats.total
	r := runOut{
		Format: runFormat, Version: run.Version, Title: set.Title, Case: w.plan.Case, Demo: w.plan.Demo,
		Zone: w.clock.zone.String(), Start: w.clock.text(set.Period.Start), End: w.clock.text(set.Period.End),
		StepSeconds: seconds(set.Period.Step), RowSeconds: seconds(max(set.Period.Step, set.Run.Log)),
		Frequency: set.Frequency, Begins: "settled",
		Limits: w.limitsOut(), Percentiles: w.stats.dist.method(),
		Scale: scaleOut{set.ScaleLoad, set.ScaleGeneration}, Prices: w.pricesOut(), Profiles: []profilesOut{},
		Voltages: set.Run.Voltages, Flows: append([]string{}, set.Run.Flows...), Series: "csv",
		Counts:    w.countsOut(),
		Positions: w.positionsOut(o), StillMoving: append([]string{}, o.StillMoving...),
		StepsBy: w.solver, SolutionsBy: notNil(o.Paths), Speed: o.Speed,
		Balance: balanceOut{Checked: w.balance.checked, Worst: w.balance.worst},
		Coarse:  w.coarse(o),
		Assumed: []noteOut{}, Warnings: []noteOut{}, Hunting: []huntingOut{}, Trouble: append([]troubleOut{}, w.trouble...), Inputs: notNil(run.Inputs), Results: w.hashes,
	}
	r.Speed.StepByStep = notNil(o.Speed.StepByStep)
	if set.Run.Given {
		r.Begins = "given"
	}
	if set.Run.Parquet {
		r.Series = "parquet"
	}
	if t.steps > 0 && w.balance.worst > 0 {
		r.Balance.At = w.clock.text(w.balance.at)
	}
	for _, b := range set.Profiles {
		p := profilesOut{Files: append([]string{}, b.Files...), Stamped: b.Stamped, Interpolate: b.Interpolate, Repeat: b.Repeat}
		if b.Zone != nil {
			p.Zone = b.Zone.String()
		}
		r.Profiles = append(r.Profiles, p)
	}
	for _, a := range w.plan.Model.Assumed {
		r.Assumed = append(r.Assumed, noteAt(a.Pos, a.What+" = "+a.Value))
	}
	for _, f := range run.Warnings {
		r.Warnings = append(r.Warnings, noteAt(f.Pos, f.Text))
	}
	for _, h := range o.Hunting {
		r.Hunting = append(r.Hunting, huntingOut{w.clock.text(h.Time), deviceName(&w.plan.Devices[h.Device])})
	}
	return w.writeJSON("run.json", r)
}

func seconds(ns int64) float64 { return float64(ns) / float64(second) }

func notNil[V any](m map[string]V) map[string]V {
	if m == nil {
		return map[string]V{}
	}
	return m
}

func (w *Writer) limitsOut() limitsOut {
	set := &w.plan.Settings.Limits
	out := limitsOut{Range: "ANSI C84.1", Judge: "customers", Allowance: set.Allowance, Classes: w.stats.judge.classes}
	if set.All {
		out.Judge = "all"
	}
	if set.Own {
		own := &w.stats.judge.classes[0]
		out.Range = "own"
		out.Low, out.High, out.OuterLow, out.OuterHigh = &own.LowA, &own.HighA, &own.LowB, &own.HighB
	}
	return out
}

// pricesOut leaves out what the study does not say: JSON has no NaN.
func (w *Writer) pricesOut() map[string]any {
	p, out := &w.plan.Settings.Prices, map[string]any{}
	for name, x := range map[string]float64{"energy": p.Energy, "demand": p.Demand, "operation": p.Operation, "rate": p.Rate, "years": p.Years} {
		if finite(x) {
			out[name] = x
		}
	}
	for name, x := range map[string]string{"currency": p.Currency, "energy_profile": p.EnergyProfile, "peak_profile": p.Peak} {
		if x != "" {
			out[name] = x
		}
	}
	return out
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

func (w *Writer) countsOut() countsOut {
	t, m := &w.stats.total, w.plan.Model
	out := countsOut{Nodes: len(m.Nodes), Places: len(w.meter.Points), Loads: len(m.Loads), Generators: len(m.Generators), Devices: len(w.plan.Devices),
		Steps: t.steps, OK: t.steps - t.low - t.unsolved, Low: t.low, Unsolved: t.unsolved, Operations: t.tapOperations + t.capOperations,
		SettledHours: float64(t.settled) / float64(hour), Settling: float64(t.settling) / float64(hour)}
	for i := range m.Loads {
		out.Customers += m.Loads[i].Customers
	}
	return out
}

func (w *Writer) positionsOut(o *Outcome) []positionOut {
	out := []positionOut{}
	for i, tap := range o.Taps {
		if i < len(w.plan.TapNames) {
			out = append(out, positionOut{w.plan.TapNames[i], tap})
		}
	}
	for i, closed := range o.Closed {
		if i < len(w.plan.Model.Capacitors) {
			out = append(out, positionOut{w.plan.Model.Capacitors[i].Name, closedAs(closed)})
		}
	}
	return out
}

func (w *Writer) coarse(o *Outcome) coarseOut {
	var outside int64
	for i := range w.stats.points {
		if w.stats.judge.judged[i] {
			outside += w.stats.points[i].belowA + w.stats.points[i].aboveA
		}
	}
	settling := w.stats.total.settlingOutside
	return coarseOut{
		TooCoarse:       10*settling > outside || len(o.CoarseAt) > 0,
		SettlingOutside: float64(settling) / float64(hour), Outside: float64(outside) / float64(hour),
		Regulators: append([]string{}, o.CoarseAt...),
	}
}

func (w *Writer) writeTiming(run RunInfo) error {
	return w.writeJSON("timing.json", struct {
		Wall []WallTime `json:"wall"`
	}{append([]WallTime{}, run.Wall...)})
}

func (w *Writer) writeJSON(name string, value any) error {
	data, err := json.MarshalIndent(value, "", "  ")
	if err != nil {
		return fmt.Errorf("write %s: %w", name, err)
	}
	f, err := createFile(w.folder.temp, name)
	if err != nil {
		return err
	}
	f.row = append(append(f.row, data...), '\n')
	return f.finish()
}
