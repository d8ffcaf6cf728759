package results

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"yearflow/sim/feeder"
)

// measuredTiny is the tiny feeder with two measurements, run over six hours.
func measuredTiny(t *testing.T) *tiny {
	start := time.Date(2025, 3, 8, 22, 0, 0, 0, denver(t))
	x := newTiny(t, start, start.Add(6*time.Hour), time.Hour)
	x.plan.Model.Measurements = []feeder.Measurement{
		{Quantity: feeder.MeasuredVoltage, Place: "n2", Phase: "A"},
		{Quantity: feeder.MeasuredKW, Place: "src, west"},
	}
	return x
}

// What a run says of its measurements is read back as it was written, and counts among
// the files that run.json vouches for.
func TestMeasuredFiles(t *testing.T) {
	x := measuredTiny(t)
	dir := filepath.Join(t.TempDir(), "base")
	w, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	log, err := w.MeasuredLog()
	if err != nil || log == nil {
		t.Fatal(err)
	}
	p := x.plan.Settings.Period
	for i := range p.Steps() {
		s := x.state(nil, [3]int{1, 0, -1}, true)
		at := p.Start + int64(i)*p.Step
		modelled := []float64{1.0125, -3.5}
		if i == 2 {
			modelled[1] = math.NaN()
		}
		if err := log(at, []float64{1, float64(i)}, modelled); err != nil {
			t.Fatal(err)
		}
		if err := w.Interval(&Interval{Start: at, End: at + p.Step, Settled: true, State: s, Devices: make([]DeviceState, 4)}); err != nil {
			t.Fatal(err)
		}
		if err := w.Step(&Step{Start: at, End: at + p.Step, Last: s}); err != nil {
			t.Fatal(err)
		}
	}
	rows := []MeasuredRow{
		{Quantity: "voltage", Place: "n2", Phase: "A", Samples: 6, Bias: 0.0125, MeanAbsolute: 0.0125, P95: 0.0125, Worst: 0.0125, WorstTime: time.Unix(0, p.Start)},
		{Quantity: "kW", Place: "src, west", Samples: 5, Bias: -5.9, MeanAbsolute: 5.9, P95: 8.5, Worst: -8.5, WorstTime: time.Unix(0, p.Start+5*p.Step)},
	}
	swaps := []SwapRow{{Place: "n2", Phase: "A", Likely: "C", At: "n2", Own: "A", Correlation: 0.25, WithLikely: 0.875, Samples: 240}}
	if err := w.Met(rows, swaps); err != nil {
		t.Fatal(err)
	}
	if err := w.Finish(&Outcome{}, RunInfo{}); err != nil {
		t.Fatal(err)
	}
	text := func(name string) string {
		data, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		return string(data)
	}
	want := `quantity,place,phase,samples,bias,mean absolute error,p95 error,worst error,worst time
voltage,n2,A,6,0.012500,0.012500,0.012500,0.012500,2025-03-08T22:00:00-07:00
kW,"src, west",,5,-5.90000,5.90000,8.50000,-8.50000,2025-03-09T04:00:00-06:00
`
	if got := text("measured.csv"); got != want {
		t.Errorf("measured.csv\n%s\nwant\n%s", got, want)
	}
	if s := text("summary.csv"); !strings.Contains(s, "measured quantities,2,1\nmean absolute error of measured voltage,0.012500,pu\nmean absolute error of measured kW,5.90000,kW\n") {
		t.Errorf("summary.csv: %s", s)
	}
	f, err := ReadFolder(os.DirFS(dir))
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"measured.csv", "measured-series.csv", "phase-swaps.csv"} {
		if !strings.Contains(strings.Join(f.Run.Files, " "), name) {
			t.Errorf("run.json does not have %s: %v", name, f.Run.Files)
		}
	}
	for i, r := range f.Measured {
		if !r.WorstTime.Equal(rows[i].WorstTime) {
			t.Errorf("worst time %v, want %v", r.WorstTime, rows[i].WorstTime)
		}
		r.WorstTime = rows[i].WorstTime
		if r != rows[i] {
			t.Errorf("read %+v, want %+v", r, rows[i])
		}
	}
	if len(f.Measured) != 2 || len(f.Swaps) != 1 || f.Swaps[0] != swaps[0] {
		t.Errorf("%d rows, swaps %+v", len(f.Measured), f.Swaps)
	}
	if got, want := f.Met(), "Held against 2 measured series (11 samples), the model is off on average by 0.0125 p.u. (bias +0.0125) and 5.9 kW (−5.9)."; got != want {
		t.Errorf("%s\nwant %s", got, want)
	}
	series, err := f.Series()
	if err != nil || len(series) != 2 {
		t.Fatal(err, len(series))
	}
	if s := series[1]; len(s.Time) != 6 || s.Measured[4] != 4 || s.Modelled[1] != -3.5 || !math.IsNaN(s.Modelled[2]) || s.Time[5] != p.Start+5*p.Step {
		t.Errorf("series %+v", s)
	}
	// Without its file the folder is not whole.
	if err := os.Remove(filepath.Join(dir, "measured.csv")); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadFolder(os.DirFS(dir)); err == nil || !strings.Contains(err.Error(), "measured.csv") {
		t.Errorf("a folder without measured.csv: %v", err)
	}
}

// A folder of a run without measurements says that it never met any.
func TestNeverMeasured(t *testing.T) {
	dir := goldenRun(t)
	f, err := ReadFolder(os.DirFS(dir))
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(f.Met(), "never met a measurement") {
		t.Error(f.Met())
	}
	if s, err := f.Series(); s != nil || err != nil {
		t.Errorf("series %v, %v", s, err)
	}
	if s := f.Summary[len(f.Summary)-1]; s != (SummaryRow{"measured quantities", "0", "1"}) {
		t.Errorf("summary ends with %+v", s)
	}
}

// Above twenty million values there is no log, and a given-up folder leaves nothing.
func TestMeasuredLogLimit(t *testing.T) {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	x := newTiny(t, start, start.AddDate(1, 0, 0), time.Minute)
	x.plan.Model.Measurements = make([]feeder.Measurement, 20) // 525,600 · 40 = 21 million
	parent := t.TempDir()
	w, err := Create(filepath.Join(parent, "base"), x.plan)
	if err != nil {
		t.Fatal(err)
	}
	if log, err := w.MeasuredLog(); log != nil || err != nil {
		t.Errorf("a log of 21 million values: %v", err)
	}
	x.plan.Model.Measurements = x.plan.Model.Measurements[:19]
	if log, err := w.MeasuredLog(); log == nil || err != nil {
		t.Errorf("no log of 19.97 million values: %v", err)
	}
	if err := w.Abort(); err != nil {
		t.Fatal(err)
	}
	if left, _ := os.ReadDir(parent); len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
}
