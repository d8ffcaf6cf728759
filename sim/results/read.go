package results

import (
	"errors"
	"fmt"
	"io/fs"
	"math"
	"strings"
	"time"

	"yearflow/sim/tables"
)

// Folder is a results folder as read: everything but the wide logs, which are read
// row by row when they are wanted. Numbers left blank in a file are NaN, times left
// blank are zero.
type Folder struct {
	Run        RunRecord
	Steps      Steps
	Nodes      []NodeRow
	Devices    Series // devices.csv: tap positions, and 1 for a closed capacitor
	Operations []OperationRow
	Duty       []DutyRow
	Losses     []LossRow
	Loading    []LoadingRow
	Monthly    Sheet
	Summary    []SummaryRow
	Places     []PlaceRow
	Branches   []BranchRow // network.csv
	// VoltageNames are the columns of voltages.csv or voltages.parquet (node.phase); nil where the run
	// kept no voltages.
	VoltageNames []string
	// Measured and Swaps are how the model met its measurements; empty without any.
	Measured []MeasuredRow
	Swaps    []SwapRow

	files  fs.FS
	judged map[string][]string // phases by node
	// hasSeries tells that measured-series.csv was written.
	hasSeries bool
}

// NodeRow is a row of nodes.csv: the statistics of one node.phase. Voltages are p.u.
// of the nominal, line-to-ground for A, B, C and line-to-line for AB, BC, CA.
type NodeRow struct {
	Node, Phase                                        string
	NominalKV                                          float64 // line-to-line
	Customers                                          float64
	Min, Max, Mean, P1, P5, P50, P95, P99              float64
	MinTime, MaxTime                                   time.Time
	HoursBelowA, HoursAboveA, HoursBelowB, HoursAboveB float64
	CustomerHoursBelowA, CustomerHoursAboveA           float64
	SettlingHoursOutsideA                              float64
	LowestSettling, HighestSettling                    float64
}

// OperationRow is a row of operations.csv: one action.
type OperationRow struct {
	Time          time.Time
	Device, Phase string
	From, To      int
	Reason        string
	Measured, Set float64
	Waited        float64 // s
}

// DutyRow is a row of duty.csv: the year of one device.
type DutyRow struct {
	Device, Phase                         string
	Operations, Raises, Lowers, Reversals int
	BusiestDay                            string
	OperationsThatDay                     int
	LowestPosition, HighestPosition       int
	HoursAtStop, HoursOutOfBand           float64
	HoursReverse, Hunting                 float64
}

// LossRow is a row of losses.csv: the losses of one element.
type LossRow struct {
	Element, Kind string
	EnergyKWh     float64
	SharePercent  float64
	PeakKW        float64
	PeakTime      time.Time
}

// LoadingRow is a row of loading.csv. Peak and rating are A, those of transformers
// kVA; the rating is NaN where none is known.
type LoadingRow struct {
	Element, Phase                        string
	Peak, Rating, Percent                 float64
	PeakTime                              time.Time
	HoursAboveRating, HoursAboveEmergency float64
}

// SummaryRow is a row of summary.csv.
type SummaryRow struct{ Quantity, Value, Unit string }

// PlaceRow is a row of places.csv: where a node stands. X and Y are m, or degrees
// where LongLat is set; NaN where nobody gave them.
type PlaceRow struct {
	Node       string
	X, Y       float64
	LongLat    bool
	DistanceKM float64 // along the feeder, from the source
	NominalKV  float64 // line-to-line
	Phases     string
	Judged     []string // phases or pairs whose voltage counts against the limits
}

// Open tells whether nothing flows through the element: an open switch.
func (b BranchRow) Open() bool { return b.Kind == "open switch" }

// BranchRow is a row of network.csv: an element between two nodes, or (To blank) at
// one node.
type BranchRow struct {
	Element, Kind, From, To, Phases string
	LengthKM                        float64
}

// ReadFolder reads the results folder that fsys holds, and reports everything wrong
// with it together (tables.Faults): files that are missing, cut off, of another
// version, or do not agree with each other. The wide voltages are only looked at;
// EachVoltage reads it, so fsys must stay usable as long as the Folder is.
func ReadFolder(fsys fs.FS) (*Folder, error) {
	f := &Folder{files: fsys}
	var faults tables.Faults
	if err := f.readRun(); err != nil {
		// Without it nothing else can be judged: not a results folder, half of one, or
		// one of another version.
		faults = append(faults, asFaults(err)...)
		return nil, faults.Err()
	}
	rd := reader{files: fsys, faults: &faults, zone: f.Run.Location}
	f.readSteps(&rd)
	f.Devices = rd.series("devices.csv")
	f.readNodes(&rd)
	f.readOperations(&rd)
	f.readDuty(&rd)
	f.readLosses(&rd)
	f.readLoading(&rd)
	f.readPlaces(&rd)
	f.readBranches(&rd)
	f.Monthly = rd.sheet("monthly.csv")
	f.Monthly.need("month")
	f.readSummary(&rd)
	f.readMeasured(&rd)
	f.readVoltageHeader(&rd)
	f.allThere(&faults)
	if len(faults) == 0 {
		f.agree(&faults)
	}
	if err := faults.Err(); err != nil {
		return nil, err
	}
	return f, nil
}

// allThere checks that every file of the run is in the folder, also those that are
// not read here. Figures and the report are drawn from the others and may be gone.
func (f *Folder) allThere(faults *tables.Faults) {
	named := make(map[string]bool, len(*faults))
	for _, x := range *faults {
		named[x.Pos.File] = true
	}
	for _, file := range f.Run.Files {
		if strings.HasPrefix(file, "figures/") || strings.HasSuffix(file, ".html") {
			continue
		}
		if _, err := fs.Stat(f.files, file); err != nil && !named[file] {
			*faults = append(*faults, missingFile(file, err))
		}
	}
}

// asFaults returns the faults in err, or err as one.
func asFaults(err error) tables.Faults {
	var fs tables.Faults
	if errors.As(err, &fs) {
		return fs
	}
	return tables.Faults{{Text: err.Error()}}
}

// agree checks what only two files together can show.
func (f *Folder) agree(faults *tables.Faults) {
	s := &f.Steps
	at := tables.Pos{File: "steps.csv"}
	if len(s.Time) == 0 {
		faults.Add(at, "has no rows: the run was cut off; run it again")
		return
	}
	if first := time.Unix(0, s.Time[0]); !first.Equal(f.Run.Start) {
		faults.Add(at, "begins at %s, the run of run.json at %s: the files are of two runs; run it again",
			f.Run.stamp(first), f.Run.stamp(f.Run.Start))
	}
	row := s.RowLength
	for i := 1; i < len(s.Time); i++ {
		if s.Time[i]-s.Time[i-1] != row {
			faults.Add(at, "a row of %s follows one of %s, rows of %s were expected: rows are missing or moved; run it again",
				f.Run.stamp(time.Unix(0, s.Time[i])), f.Run.stamp(time.Unix(0, s.Time[i-1])), time.Duration(row))
			return
		}
	}
	if last := time.Unix(0, s.Time[len(s.Time)-1]+row); last.Before(f.Run.End) {
		faults.Add(at, "ends at %s, the run of run.json at %s: half a folder; run it again",
			f.Run.stamp(last), f.Run.stamp(f.Run.End))
	}
	if n := int64(f.Run.End.UnixNano()-s.Time[0]+row-1) / row; int64(len(s.Time)) > n {
		faults.Add(at, "has %d rows, the run of run.json %d: the files are of two runs; run it again", len(s.Time), n)
	}
	if n := len(f.Devices.Time); n > 0 && len(f.Devices.Names) > 0 && f.Devices.Time[n-1] < s.Time[len(s.Time)-1]-row {
		faults.Add(tables.Pos{File: "devices.csv"}, "ends at %s, steps.csv at %s: half a folder; run it again",
			f.Run.stamp(time.Unix(0, f.Devices.Time[n-1])), f.Run.stamp(time.Unix(0, s.Time[len(s.Time)-1])))
	}
	known := make(map[string]bool, len(f.Places))
	for _, p := range f.Places {
		known[p.Node] = true
	}
	for _, n := range f.Nodes {
		if !known[n.Node] {
			faults.Add(tables.Pos{File: "nodes.csv"}, "node %q is not in places.csv: the files are of two runs; run it again", n.Node)
			return
		}
	}
}

// Judged returns whether the voltage of a node.phase counts against the limits:
// where loads stand, or anywhere if the study says so.
func (f *Folder) Judged(n NodeRow) bool {
	if f.Run.Limits.All {
		return true
	}
	for _, ph := range f.judged[n.Node] {
		if ph == n.Phase {
			return true
		}
	}
	return false
}

// LimitsOf returns the limits that hold at a node of the given nominal voltage
// (line-to-line, kV): low and high are those that a feeder should keep (range A),
// outer low and outer high those it must (range B), in p.u.
//
// Source: ANSI C84.1, service voltages: up to 600 V 114-126 V and 110-127 V, above
// 600 V 117-126 V and 114-127 V on the 120 V base.
func (f *Folder) LimitsOf(nominalKV float64) VoltageLimits {
	l := f.Run.Limits
	if l.Own {
		return l.VoltageLimits
	}
	if nominalKV > 0.6 {
		return VoltageLimits{OuterLow: 114.0 / 120, Low: 117.0 / 120, High: 126.0 / 120, OuterHigh: 127.0 / 120}
	}
	return VoltageLimits{OuterLow: 110.0 / 120, Low: 114.0 / 120, High: 126.0 / 120, OuterHigh: 127.0 / 120}
}

// VoltageLimits are four voltages in p.u., in rising order.
type VoltageLimits struct{ OuterLow, Low, High, OuterHigh float64 }

// Margin returns how far v lies inside [Low, High], p.u.; negative outside.
func (l VoltageLimits) Margin(v float64) float64 { return math.Min(v-l.Low, l.High-v) }

func (r *RunRecord) stamp(t time.Time) string {
	return t.In(r.Location).Format("2006-01-02 15:04 -07:00")
}

func missingFile(name string, err error) tables.Fault {
	text := fmt.Sprintf("cannot be read (%v)", err)
	if errors.Is(err, fs.ErrNotExist) {
		text = "is missing: this is not a results folder, or half of one; run the study again"
	}
	return tables.Fault{Pos: tables.Pos{File: name}, Text: text}
}
