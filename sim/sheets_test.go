package sim_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// totalsOf runs an engine and returns what Totals counts of it.
func totalsOf(t *testing.T, e *sim.Engine, more ...sim.Recorder) results.Sums {
	t.Helper()
	sums := results.NewTotals(e.Plan)
	if _, err := e.Run(context.Background(), append(more, sums)...); err != nil {
		t.Fatal(err)
	}
	return sums.Sums()
}

// What Totals counts is what the results folder of the same run says.
func TestTotalsAreThoseOfSummary(t *testing.T) {
	for _, name := range []string{"days", "minute-week"} {
		e := prepare(t, shortDemo(t, "2025-07-01", "2025-07-15"), name, sim.Options{})
		dir := filepath.Join(t.TempDir(), "out")
		w, err := results.Create(dir, e.Plan)
		if err != nil {
			t.Fatal(err)
		}
		out, err := e.Run(context.Background(), w)
		if err != nil {
			t.Fatal(err)
		}
		if err := w.Finish(out, results.RunInfo{Version: "test"}); err != nil {
			t.Fatal(err)
		}
		folder, err := results.ReadFolder(os.DirFS(dir))
		if err != nil {
			t.Fatal(err)
		}
		said := map[string]string{}
		for _, r := range folder.Summary {
			said[r.Quantity] = r.Value
		}
		s := totalsOf(t, e)
		for _, x := range []struct {
			name string
			got  float64
		}{
			{"customer-hours below A", s.CustomersBelowA}, {"customer-hours above A", s.CustomersAboveA},
			{"customer-hours below B", s.CustomersBelowB}, {"customer-hours above B", s.CustomersAboveB},
			{"source energy", s.SourceKWh}, {"load energy", s.LoadKWh}, {"generation energy", s.GenerationKWh}, {"losses energy", s.LossesKWh},
			{"peak demand", s.PeakKW}, {"tap operations", float64(s.TapOperations)}, {"capacitor operations", float64(s.CapacitorOperations)},
			{"device-hours at a stop", s.StopHours}, {"device-hours hunting", s.HuntingHours}, {"settling share", s.SettlingShare},
			{"steps", float64(s.Steps)}, {"low steps", float64(s.Low)}, {"unsolved steps", float64(s.Unsolved)},
		} {
			if want := results.FigureText(x.got); said[x.name] != want {
				if v, err := strconv.ParseFloat(said[x.name], 64); err != nil || v != x.got {
					t.Errorf("case %q: %s: Totals has %s, summary.csv %s", name, x.name, want, said[x.name])
				}
			}
		}
		for name, got := range map[string]float64{"lowest judged voltage": s.LowestPU, "highest judged voltage": s.HighestPU} {
			if results.PUText(got) != said[name] {
				t.Errorf("%s: Totals has %s, summary.csv %s", name, results.PUText(got), said[name])
			}
		}
		peaks := 0.0
		for r := range folder.Monthly.Rows {
			peaks += math.Max(0, folder.Monthly.Number(r, "peak [kW]"))
		}
		if math.Abs(peaks-s.MonthlyPeaksKW) > 1e-5*peaks {
			t.Errorf("sum of monthly peaks: Totals has %v, monthly.csv %v", s.MonthlyPeaksKW, peaks)
		}
		if s.TapOperations == 0 || s.LossesKWh == 0 {
			t.Fatal("nothing happened")
		}
	}
}

// An engine whose sheets are changed gives to the bit what one gives that is made of a
// study with these settings; set back, it gives what it gave before.
func TestChangedSheetsAreThoseOfAStudy(t *testing.T) {
	study := shortDemo(t, "2025-07-01", "2025-07-08")
	e := prepare(t, study, "days", sim.Options{})
	before := totalsOf(t, e)
	changed := fstest.MapFS{}
	for name, f := range study {
		changed[name] = f
	}
	changed["cases/other/case.toml"] = study["cases/days/case.toml"]
	changed["cases/other/regulator-settings.csv"] = &fstest.MapFile{Data: []byte("regulator,phase,set [V],bandwidth [V],delay [s],ldc r [V],ldc x [V],limit high [V]\nLTC,A,121,3,40,,,\nR2,B,122,2.5,50,3,1,125\n")}
	changed["cases/other/capacitor-settings.csv"] = &fstest.MapFile{Data: []byte("capacitor,voltage on [V],voltage off [V],temperature on [degC],delay [s]\nC3,118,121,,90\nC4,,,27,\n")}
	other := prepare(t, changed, "other", sim.Options{})
	want := totalsOf(t, other)
	back := setSheets(t, e, other.Study.Model)
	if got := totalsOf(t, e); !reflect.DeepEqual(got, want) {
		t.Errorf("changed in place:\n%+v\nread as a case:\n%+v", got, want)
	}
	if reflect.DeepEqual(before, want) {
		t.Error("the case changes nothing")
	}
	for _, undo := range back {
		undo()
	}
	if got := totalsOf(t, e); !reflect.DeepEqual(got, before) {
		t.Errorf("set back:\n%+v\nbefore:\n%+v", got, before)
	}
}

// setSheets gives an engine all sheets of another model and returns how to undo it.
func setSheets(t *testing.T, e *sim.Engine, m *feeder.Model) (undo []func()) {
	t.Helper()
	put := func(err error) {
		if err != nil {
			t.Fatal(err)
		}
	}
	for i := range m.Regulators {
		for u := range m.Regulators[i].Units {
			r, old := &m.Regulators[i], e.Study.Model.Regulators[i].Units[u].Settings
			if s := r.Units[u].Settings; s != nil {
				name := fmt.Sprintf("%s.%s", r.Name, r.Units[u].Name(r.Connection))
				put(e.SetTapSheet(name, *s))
				undo = append(undo, func() { put(e.SetTapSheet(name, *old)) })
			}
		}
	}
	for i := range m.Capacitors {
		old := e.Study.Model.Capacitors[i].Control
		if s := m.Capacitors[i].Control; s != nil {
			put(e.SetCapacitorSheet(m.Capacitors[i].Name, *s))
			undo = append(undo, func() { put(e.SetCapacitorSheet(m.Capacitors[i].Name, *old)) })
		}
	}
	return undo
}

// What a table would be refused for is refused, and nothing changes.
func TestImpossibleSheets(t *testing.T) {
	e := prepare(t, shortDemo(t, "2025-07-01", "2025-07-02"), "days", sim.Options{})
	before := totalsOf(t, e)
	tap := *e.Study.Model.Regulators[0].Units[0].Settings
	for want, change := range map[string]func(*feeder.TapSettings){
		"set is above 0":              func(s *feeder.TapSettings) { s.Set = 0 },
		"bandwidth is above 0":        func(s *feeder.TapSettings) { s.Bandwidth = -1 },
		"at least 1 s":                func(s *feeder.TapSettings) { s.Delay = 0.5 },
		"is not below limit high":     func(s *feeder.TapSettings) { s.LimitLow, s.LimitHigh = 126, 114 },
		"ldc r is no number":          func(s *feeder.TapSettings) { s.R = math.NaN() },
		"do not hold the initial tap": func(s *feeder.TapSettings) { s.HighestTap = -1 },
	} {
		s := tap
		change(&s)
		if err := e.SetTapSheet("LTC.A", s); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("want an error with %q, got %v", want, err)
		}
	}
	if err := e.SetTapSheet("R1.D", tap); err == nil || !strings.Contains(err.Error(), `no device "R1.D"`) {
		t.Errorf("got %v", err)
	}
	c := *e.Study.Model.Capacitors[2].Control
	c.Off = c.On
	if err := e.SetCapacitorSheet("C3", c); err == nil || !strings.Contains(err.Error(), "on and off") {
		t.Errorf("got %v", err)
	}
	if err := e.SetCapacitorSheet("LTC.A", c); err == nil {
		t.Error("a tap changer took a capacitor's sheet")
	}
	if got := totalsOf(t, e); !reflect.DeepEqual(got, before) {
		t.Error("a refused sheet changed the run")
	}
}

func BenchmarkTotalsYear(b *testing.B) {
	e := prepare(b, demo.Study(), "", sim.Options{})
	sums := results.NewTotals(e.Plan)
	for b.Loop() {
		sums.Reset()
		if _, err := e.Run(context.Background(), sums); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(b.N)*60/b.Elapsed().Seconds(), "years/min")
}
