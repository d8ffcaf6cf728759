package feeder

import (
	"time"

	"yearflow/sim/tables"
)

// Settings is what study.toml says, checked, with a case's changes laid over it.
// Times are nanoseconds since 1970-01-01 00:00 UTC.
type Settings struct {
	Title     string
	Frequency float64 // Hz
	Period    Period
	Profiles  []ProfileBlock
	Run       RunSettings
	Limits    Limits
	Prices    Prices
	Weather   Weather
	// Allocation is nil where no measured total is shared over loads.
	Allocation *Allocation
	Meters     []MeterBlock
	// ScaleLoad and ScaleGeneration multiply every load and generator ([scale] of a
	// case); 1 where nothing is said.
	ScaleLoad, ScaleGeneration float64
}

// Period is the time that a run covers, [Start, End), in steps of Step.
type Period struct {
	Start, End, Step int64
	Zone             *time.Location
	At               tables.Pos // of [period]
}

// Steps is the number of steps of the period.
func (p Period) Steps() int { return int((p.End - p.Start + p.Step - 1) / p.Step) }

// ProfileBlock is one [[profiles]] entry of study.toml.
type ProfileBlock struct {
	At          tables.Pos
	Files       []string // glob patterns below the study's folder
	Stamped     string   // start, end or instant
	Interpolate bool
	Repeat      string // none, day, week or year
	Zone        *time.Location
}

// RunSettings is [run] of study.toml.
type RunSettings struct {
	Given    bool     // start = "given": no settling before the first step
	Voltages string   // auto, all, none or list
	Places   []string // voltages = [...]: node.phase
	Flows    []string // names of elements to log
	Log      int64    // length of a row of steps.csv in ns; 0: a row a step
	Parquet  bool     // series = "parquet": voltages and flows are written as Parquet files
}

// Limits is [limits] of study.toml. Where Own is false the limits of a node are the
// rows of ANSI C84.1 for its voltage; else the four numbers, in p.u.
type Limits struct {
	Own                            bool
	Low, High, OuterLow, OuterHigh float64
	All                            bool    // judge = "all": every node, not only those with a load
	Allowance                      float64 // V on the 120 V base
}

// Prices is [prices] of study.toml; NaN where nothing is said.
type Prices struct {
	Currency      string
	Energy        float64 // per kWh
	EnergyProfile string  // instead of Energy
	Demand        float64 // per kW and month
	Peak          string  // profile whose peak is charged; blank: the feeder's own
	Operation     float64 // per action
	Rate, Years   float64
}

// Weather is [weather] of study.toml; NaN where nothing is said.
type Weather struct {
	At                             tables.Pos
	File                           string // below the study's folder; blank: a clear sky
	Stamped                        string // start, end or instant
	Zone                           *time.Location
	Latitude, Longitude, Elevation float64 // deg north, deg east, m
}
