package results

import (
	"encoding/csv"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"testing"
	"time"
)

// script is a run made up by hand or by chance, played to a writer as the engine
// would play it.
type script struct {
	steps   []scriptStep
	actions []*Action
}

type scriptStep struct {
	Step
	intervals []*Interval
	actions   []*Action
}

// chance makes a run over the plan's period: every step has one to three intervals,
// the first ones settling, and one step in nine is low or unsolved.
func chance(x *tiny, rnd *rand.Rand) *script {
	s := &script{}
	p := x.plan.Settings.Period
	taps, closed := [3]int{}, true
	for k := range p.Steps() {
		start := p.Start + int64(k)*p.Step
		end := min(start+p.Step, p.End)
		st := scriptStep{Step: Step{Start: start, End: end, Solver: "fixed point"}}
		switch rnd.IntN(18) {
		case 0:
			st.Status, st.Where = Low, "n3.A"
		case 1:
			st.Status, st.Where = Unsolved, "n3.A"
		}
		n := 1 + rnd.IntN(3)
		at := start
		for i := range n {
			to := end
			if i < n-1 {
				to = at + (end-start)/8*int64(1+rnd.IntN(2))
			}
			iv := &Interval{Start: at, End: to, Settled: i == n-1, State: x.state(randomLevels(rnd), taps, closed)}
			for range x.plan.Devices {
				iv.Devices = append(iv.Devices, DeviceState{rnd.IntN(2) == 0, rnd.IntN(3) == 0, rnd.IntN(4) == 0, rnd.IntN(5) == 0})
			}
			st.intervals = append(st.intervals, iv)
			at = to
			if i == n-1 {
				break
			}
			a := &Action{Time: at, Device: rnd.IntN(4), Reason: "band low", Measured: 118.2, Set: 119, Waited: 30}
			if a.Device == 3 {
				a.From, a.To = closedAs(closed), closedAs(!closed)
				closed = !closed
			} else {
				a.From = taps[a.Device]
				a.To = a.From + 1 - 2*rnd.IntN(2)
				taps[a.Device] = a.To
			}
			st.actions = append(st.actions, a)
			st.Actions++
		}
		st.Last = st.intervals[n-1].State
		if st.Status == Unsolved {
			st.Last = nil
		}
		s.steps = append(s.steps, st)
	}
	return s
}

// constant makes a run of one settled interval a step, with a state for each.
func constant(x *tiny, state func(step int) *State) *script {
	s := &script{}
	p := x.plan.Settings.Period
	for k := range p.Steps() {
		start := p.Start + int64(k)*p.Step
		end := min(start+p.Step, p.End)
		iv := &Interval{Start: start, End: end, Settled: true, State: state(k)}
		s.steps = append(s.steps, scriptStep{Step: Step{Start: start, End: end, Last: iv.State}, intervals: []*Interval{iv}})
	}
	return s
}

// play hands the run to the writer in the engine's order.
func (s *script) play(t testing.TB, w *Writer) {
	t.Helper()
	for i := range s.steps {
		st := &s.steps[i]
		for k, iv := range st.intervals {
			if err := w.Interval(iv); err != nil {
				t.Fatal(err)
			}
			if k < len(st.actions) {
				if err := w.Action(st.actions[k]); err != nil {
					t.Fatal(err)
				}
			}
		}
		if err := w.Step(&st.Step); err != nil {
			t.Fatal(err)
		}
	}
}

// write plays a run into a fresh folder and returns the folder.
func (s *script) write(t testing.TB, x *tiny) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "base")
	s.writeTo(t, x, dir)
	return dir
}

// writeTo plays a run into a folder of that name.
func (s *script) writeTo(t testing.TB, x *tiny, dir string) {
	t.Helper()
	w, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	s.play(t, w)
	if err := w.Finish(&Outcome{Taps: []int{0, 0, 0}, Closed: []bool{true}}, RunInfo{Version: "test"}); err != nil {
		t.Fatal(err)
	}
}

// sheetRows reads a file as rows of cells by column name.
func sheetRows(t testing.TB, dir, name string) []map[string]string {
	t.Helper()
	f, err := os.Open(filepath.Join(dir, name))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	records, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var rows []map[string]string
	for _, r := range records[1:] {
		row := map[string]string{}
		for i, c := range r {
			row[records[0][i]] = c
		}
		rows = append(rows, row)
	}
	return rows
}

// num reads a cell; an empty one is NaN.
func num(t testing.TB, row map[string]string, column string) float64 {
	t.Helper()
	c, ok := row[column]
	if !ok {
		t.Fatalf("there is no column %q", column)
	}
	if c == "" {
		return math.NaN()
	}
	v, err := strconv.ParseFloat(c, 64)
	if err != nil {
		t.Fatalf("column %q: %v", column, err)
	}
	return v
}

// cell checks a figure against what it should be: half a unit of the last digit
// printed, or six significant digits.
func cell(t testing.TB, row map[string]string, column string, want float64) {
	t.Helper()
	got := num(t, row, column)
	if math.IsNaN(want) && math.IsNaN(got) {
		return
	}
	if !(math.Abs(got-want) <= 5.1e-7+1e-9*math.Abs(want)) && !(math.Abs(got-want) <= 5.1e-5 && math.Abs(want) >= 10) && !(math.Abs(got-want) <= 5.1e-6 && math.Abs(want) >= 1) {
		t.Fatalf("%s: got %v, want %.9g", column, row[column], want)
	}
}

func find(t testing.TB, rows []map[string]string, column, value string) map[string]string {
	t.Helper()
	for _, r := range rows {
		if r[column] == value {
			return r
		}
	}
	t.Fatalf("no row has %s = %q", column, value)
	return nil
}

func iso(ns int64, zone *time.Location) string {
	return time.Unix(0, ns).In(zone).Format("2006-01-02T15:04:05.999999999-07:00")
}

func denver(t testing.TB) *time.Location {
	zone, err := time.LoadLocation("America/Denver")
	if err != nil {
		t.Skip("this machine has no zone database:", err)
	}
	return zone
}
