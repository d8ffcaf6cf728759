package results

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"sort"
	"strings"
	"syscall"
	"testing"
	"time"
)

// contract is section 7 of the design, word for word.
var contract = map[string]string{
	"steps.csv": "time,status,source real [kW],source reactive [kvar],load real [kW],load reactive [kvar],generation real [kW],generation reactive [kvar],losses real [kW],losses reactive [kvar],capacitors reactive [kvar],line losses [kW],transformer load losses [kW],transformer no-load losses [kW],regulator losses [kW],lowest [pu],lowest at,highest [pu],highest at,lowest in step [pu],highest in step [pu],unbalance [%],unbalance at,negative sequence [%],actions,source energy [kWh],load energy [kWh],generation energy [kWh],losses energy [kWh]" +
		",source A real [kW],source A reactive [kvar],source A current [A],source B real [kW],source B reactive [kvar],source B current [A],source C real [kW],source C reactive [kvar],source C current [A]",
	"voltages.csv":   "time,low.A,low.B,low.C,n1.A,n1.B,n1.C,n2.A,n2.B,n2.C,n3.A,shop.AB,shop.BC,shop.CA,src.A,src.B,src.C",
	"flows.csv":      "time,lat.A [A],lat [kW],lat [kvar],tx.A [A],tx.B [A],tx.C [A],tx [kW],tx [kvar]",
	"devices.csv":    "time,reg.A,reg.B,reg.C,cap",
	"operations.csv": "time,device,phase,from,to,reason,measured,set,waited [s]",
	"duty.csv":       "device,phase,operations,raises,lowers,reversals,busiest day,operations that day,lowest position,highest position,hours at a stop [h],hours out of band [h],hours reverse [h],hunting [h]",
	"nodes.csv":      "node,phase,nominal [kV],customers,min [pu],min time,max [pu],max time,mean [pu],p1 [pu],p5 [pu],p50 [pu],p95 [pu],p99 [pu],hours below A [h],hours above A [h],hours below B [h],hours above B [h],customer-hours below A [h],customer-hours above A [h],settling hours outside A [h],lowest settling [pu],highest settling [pu]",
	"losses.csv":     "element,kind,energy [kWh],share [%],peak [kW],peak time",
	"loading.csv":    "element,phase,peak [A],rating [A],loading [%],peak time,hours above rating [h],hours above emergency [h]",
	"summary.csv":    "quantity,value,unit",
	"places.csv":     "node,x,y,longlat,distance [km],nominal [kV],phases,judged",
	"network.csv":    "element,kind,from,to,phases,length [km]",
	"plants.csv":     "plant,kind,delivered [kWh],drawn [kWh],curtailed [kWh],losses [kWh],change of store [kWh],unserved [kWh]", // ours
	"monthly.csv":    "",                                                                                                         // columns are ours but for the first
	"run.json":       "",
	"timing.json":    "",
}

func TestFilesAndHeadersAreThoseOfTheContract(t *testing.T) {
	x := aDay(t)
	x.plan.Settings.Run.Flows = []string{"lat", "tx"}
	dir := chance(x, rand.New(rand.NewPCG(1, 5))).write(t, x)
	entries, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	if len(entries) != len(contract) {
		t.Errorf("%d files, want %d", len(entries), len(contract))
	}
	for name, want := range contract {
		data, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Error(err)
			continue
		}
		first, _, _ := strings.Cut(string(data), "\n")
		if want != "" && first != want {
			t.Errorf("%s begins\n%s\nwant\n%s", name, first, want)
		}
		if name == "monthly.csv" && !strings.HasPrefix(first, "month,") {
			t.Errorf("%s begins %s", name, first)
		}
		// Every row of a table has the header's number of cells (no name here is quoted).
		if strings.HasSuffix(name, ".csv") {
			for i, line := range strings.Split(strings.TrimSuffix(string(data), "\n"), "\n") {
				if strings.Count(line, ",") != strings.Count(first, ",") {
					t.Fatalf("%s:%d has %d cells, the header %d", name, i+1, strings.Count(line, ",")+1, strings.Count(first, ",")+1)
				}
			}
		}
	}
}

func TestRunRecord(t *testing.T) {
	x := aDay(t)
	dir := chance(x, rand.New(rand.NewPCG(1, 6))).write(t, x)
	data, err := os.ReadFile(filepath.Join(dir, "run.json"))
	if err != nil {
		t.Fatal(err)
	}
	var r runOut
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.DisallowUnknownFields()
	if err := dec.Decode(&r); err != nil {
		t.Fatal(err)
	}
	if r.Title != "Tiny" || r.Case != "base" || r.Zone != "UTC" || r.StepSeconds != 3600 || r.Start != "2025-01-01T00:00:00+00:00" || r.End != "2025-01-02T00:00:00+00:00" {
		t.Errorf("the record is of another run: %+v", r)
	}
	if r.Balance.Checked == 0 || r.Balance.Worst > 1e-9 {
		t.Errorf("balance %+v, want a check of every interval within 1e-9", r.Balance)
	}
	if len(r.Positions) != 4 || r.Positions[3] != (positionOut{"cap", 1}) {
		t.Errorf("positions after start-up: %v", r.Positions)
	}
	if r.Counts.OK+r.Counts.Low+r.Counts.Unsolved != 24 || r.StepsBy["fixed point"] != 24 {
		t.Errorf("counts %+v, steps by solver %v", r.Counts, r.StepsBy)
	}
	want := len(contract) - 2 // all but run.json and timing.json
	if len(r.Results) != want {
		t.Errorf("%d hashes, want %d", len(r.Results), want)
	}
	for name, sum := range r.Results {
		data, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		h := sha256.Sum256(data)
		if hex.EncodeToString(h[:]) != sum {
			t.Errorf("%s has another hash than run.json says", name)
		}
	}
}

func TestFiguresBelongToTheFolder(t *testing.T) {
	x := aDay(t)
	parent, dir := oldResults(t)
	for _, broken := range []bool{true, false} {
		w, err := Create(dir, x.plan)
		if err != nil {
			t.Fatal(err)
		}
		constant(x, func(int) *State { return x.state(nil, [3]int{}, true) }).play(t, w)
		err = w.Finish(&Outcome{}, RunInfo{Figures: func(at string) ([]string, WallTime, error) {
			if _, err := os.Stat(filepath.Join(at, "run.json")); err != nil {
				t.Error("figures are drawn from a folder without run.json:", err)
			}
			if broken {
				return nil, WallTime{}, errors.New("no ink")
			}
			if err := os.WriteFile(filepath.Join(at, "a.png"), []byte("ink"), 0o644); err != nil {
				t.Error(err)
			}
			return []string{"a.png"}, WallTime{"figures", 2}, nil
		}})
		if broken {
			if err == nil || !strings.Contains(err.Error(), "no ink") {
				t.Errorf("error %v", err)
			}
			wantOld(t, dir)
			wantEntries(t, parent, "base")
			continue
		}
		if err != nil {
			t.Fatal(err)
		}
		data, err := os.ReadFile(filepath.Join(dir, "run.json"))
		// The hash is that of the word ink.
		want := sha256.Sum256([]byte("ink"))
		if err != nil || !strings.Contains(string(data), `"a.png": "`+hex.EncodeToString(want[:])) || !json.Valid(data) {
			t.Errorf("run.json does not name the figure (%v)", err)
		}
		if data, err = os.ReadFile(filepath.Join(dir, "timing.json")); err != nil || !strings.Contains(string(data), `"figures"`) {
			t.Errorf("timing.json does not name the figures (%v)", err)
		}
	}
}

func TestSameRunSameBytes(t *testing.T) {
	x := aDay(t)
	s := chance(x, rand.New(rand.NewPCG(2, 6)))
	a, b := s.write(t, x), s.write(t, x)
	for name := range contract {
		p, err1 := os.ReadFile(filepath.Join(a, name))
		q, err2 := os.ReadFile(filepath.Join(b, name))
		if err1 != nil || err2 != nil || !bytes.Equal(p, q) {
			t.Errorf("%s differs (%v, %v)", name, err1, err2)
		}
	}
}

// oldResults makes a parent folder with results of an earlier run at base.
func oldResults(t *testing.T) (parent, dir string) {
	parent = t.TempDir()
	dir = filepath.Join(parent, "base")
	if err := os.MkdirAll(filepath.Join(dir, "figures"), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "steps.csv"), []byte("old\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	return parent, dir
}

func wantOld(t *testing.T, dir string) {
	t.Helper()
	if data, err := os.ReadFile(filepath.Join(dir, "steps.csv")); err != nil || string(data) != "old\n" {
		t.Errorf("the old results are not as they were: %q, %v", data, err)
	}
}

func wantEntries(t *testing.T, parent string, names ...string) {
	t.Helper()
	entries, err := os.ReadDir(parent)
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, e := range entries {
		got = append(got, e.Name())
	}
	sort.Strings(names)
	if strings.Join(got, " ") != strings.Join(names, " ") {
		t.Errorf("the parent folder holds %v, want %v", got, names)
	}
}

func TestOldResultsStayUntilTheNewOnesAreWhole(t *testing.T) {
	x := aDay(t)
	parent, dir := oldResults(t)
	s := chance(x, rand.New(rand.NewPCG(3, 6)))

	w, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	s.play(t, w)
	wantOld(t, dir)
	if err := w.Abort(); err != nil {
		t.Fatal(err)
	}
	wantOld(t, dir)
	wantEntries(t, parent, "base")
	if err := w.Step(&s.steps[0].Step); err == nil {
		t.Error("a writer that gave up takes a step")
	}
	if err := w.Finish(&Outcome{}, RunInfo{}); err == nil {
		t.Error("a writer that gave up finishes")
	}
	wantOld(t, dir)

	if w, err = Create(dir, x.plan); err != nil {
		t.Fatal(err)
	}
	s.play(t, w)
	if err := w.Finish(&Outcome{}, RunInfo{}); err != nil {
		t.Fatal(err)
	}
	wantEntries(t, parent, "base")
	if _, err := os.Stat(filepath.Join(dir, "figures")); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("the old folder's files are still there: %v", err)
	}
	if err := w.Abort(); err != nil {
		t.Errorf("giving up what is finished: %v", err)
	}
	if _, err := os.Stat(filepath.Join(dir, "run.json")); err != nil {
		t.Error(err)
	}
}

func TestLeftOverFoldersOfKilledRunsAreRemoved(t *testing.T) {
	x := aDay(t)
	parent, dir := oldResults(t)
	killed, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	running, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	// A killed process loses its lock and nothing else.
	killed.folder.lock.Close()
	next, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	wantEntries(t, parent, "base", filepath.Base(running.folder.temp), filepath.Base(next.folder.temp))
	if err := errors.Join(running.Abort(), next.Abort()); err != nil {
		t.Fatal(err)
	}
	wantEntries(t, parent, "base")
	wantOld(t, dir)
}

func TestResultsSetAsideByAKilledRunComeBack(t *testing.T) {
	x := aDay(t)
	parent, dir := oldResults(t)
	if err := os.Rename(dir, filepath.Join(parent, hiddenName(dir, "old")+"77")); err != nil {
		t.Fatal(err)
	}
	w, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	wantOld(t, dir)
	if err := w.Abort(); err != nil {
		t.Fatal(err)
	}
	wantEntries(t, parent, "base")
}

func TestTwoRenamesServeWhereNamesCannotBeExchanged(t *testing.T) {
	x := aDay(t)
	parent, dir := oldResults(t)
	w, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	old, err := w.folder.setAside()
	if err != nil {
		t.Fatal(err)
	}
	wantOld(t, old)
	if _, err := os.Stat(filepath.Join(dir, "operations.csv")); err != nil {
		t.Error(err)
	}
	// What is set aside goes when the next run begins.
	w.folder.lock.Close()
	if err := clearStale(dir); err != nil {
		t.Fatal(err)
	}
	wantEntries(t, parent, "base")
}

// full is a disk without room after some bytes.
type full struct {
	sink
	room int
}

func (f *full) Write(b []byte) (int, error) {
	if len(b) > f.room {
		return f.room, syscall.ENOSPC
	}
	f.room -= len(b)
	return f.sink.Write(b)
}

func TestAFullDiskIsReportedWithTheFileAndKeepsTheOldResults(t *testing.T) {
	zone := time.UTC
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, zone)
	for _, room := range []int{0, 100_000} {
		x := newTiny(t, start, start.AddDate(0, 2, 0), time.Hour)
		parent, dir := oldResults(t)
		w, err := Create(dir, x.plan)
		if err != nil {
			t.Fatal(err)
		}
		w.voltages.out = &full{w.voltages.out, room}
		s := constant(x, func(int) *State { return x.state(nil, [3]int{}, true) })
		var first error
		at := 0
		for i := range s.steps {
			w.Interval(s.steps[i].intervals[0])
			if first = w.Step(&s.steps[i].Step); first != nil {
				at = i
				break
			}
		}
		if first == nil {
			t.Fatal("a full disk was not reported before the end")
		}
		if !errors.Is(first, syscall.ENOSPC) || !strings.Contains(first.Error(), "voltages.csv") {
			t.Errorf("error %q, want no space and voltages.csv", first)
		}
		// 64 kB are about 460 rows of 16 places.
		if at > 500+room/100 {
			t.Errorf("reported at step %d only", at)
		}
		if err := w.Step(&s.steps[at].Step); !errors.Is(err, syscall.ENOSPC) {
			t.Errorf("the step after a full disk returns %v", err)
		}
		if err := w.Finish(&Outcome{}, RunInfo{}); !errors.Is(err, syscall.ENOSPC) {
			t.Errorf("Finish after a full disk returns %v", err)
		}
		if err := w.Abort(); err != nil {
			t.Error(err)
		}
		wantOld(t, dir)
		wantEntries(t, parent, "base")
	}
}

func TestAFailureAtTheEndKeepsTheOldResults(t *testing.T) {
	x := aDay(t)
	parent, dir := oldResults(t)
	w, err := Create(dir, x.plan)
	if err != nil {
		t.Fatal(err)
	}
	chance(x, rand.New(rand.NewPCG(4, 6))).play(t, w)
	w.steps.out = &full{w.steps.out, 10}
	err = w.Finish(&Outcome{}, RunInfo{})
	if !errors.Is(err, syscall.ENOSPC) || !strings.Contains(err.Error(), "steps.csv") {
		t.Errorf("error %v, want no space and steps.csv", err)
	}
	wantOld(t, dir)
	wantEntries(t, parent, "base")
}

func TestAFileInTheWayIsAnError(t *testing.T) {
	x := aDay(t)
	dir := filepath.Join(t.TempDir(), "base")
	if err := os.WriteFile(dir, nil, 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := Create(dir, x.plan); err == nil || !strings.Contains(err.Error(), "is a file") {
		t.Errorf("error %v", err)
	}
}

func TestNamesThatAreNotThereAreErrors(t *testing.T) {
	x := aDay(t)
	parent := t.TempDir()
	x.plan.Settings.Run.Voltages, x.plan.Settings.Run.Places = "list", []string{"n3.A", "n3.B", "shop.A"}
	x.plan.Settings.Run.Flows = []string{"lat", "lot"}
	_, err := Create(filepath.Join(parent, "base"), x.plan)
	if err == nil {
		t.Fatal("no error")
	}
	for _, name := range []string{`"n3.B"`, `"shop.A"`, `"lot"`} {
		if !strings.Contains(err.Error(), name) {
			t.Errorf("error %q does not name %s", err, name)
		}
	}
	wantEntries(t, parent)
}

func TestChosenVoltages(t *testing.T) {
	for _, c := range []struct {
		voltages string
		places   []string
		want     string
		rows     int
	}{
		{"list", []string{"shop.BC", "n3.A"}, "time,shop.BC,n3.A", 24},
		{"none", nil, "time", 0},
	} {
		x := aDay(t)
		x.plan.Settings.Run.Voltages, x.plan.Settings.Run.Places = c.voltages, c.places
		dir := constant(x, func(int) *State { return x.state(nil, [3]int{}, true) }).write(t, x)
		data, err := os.ReadFile(filepath.Join(dir, "voltages.csv"))
		if err != nil {
			t.Fatal(err)
		}
		lines := strings.Split(strings.TrimSuffix(string(data), "\n"), "\n")
		if lines[0] != c.want || len(lines)-1 != c.rows {
			t.Errorf("%s: %q and %d rows, want %q and %d", c.voltages, lines[0], len(lines)-1, c.want, c.rows)
		}
	}
}

func TestAutomaticVoltagesStopAtTwentyMillion(t *testing.T) {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	for _, c := range []struct {
		end  time.Time
		row  time.Duration
		want int
	}{
		{start.AddDate(0, 0, 14), time.Second, 16},              // 14 days of seconds: 19.4 million values
		{start.AddDate(0, 0, 15), time.Second, 0},               // 20.7 million
		{start.AddDate(0, 0, 15), 15 * time.Minute, 16},         // but few rows
		{start.AddDate(0, 0, 1), 500 * time.Millisecond, 16},    // a row is no shorter than a step
		{start.AddDate(math.MaxInt8, 0, 0), 24 * time.Hour, 16}, // 127 years of days
	} {
		x := newTiny(t, start, c.end, time.Second)
		x.plan.Settings.Run.Log = int64(c.row)
		w, err := Create(filepath.Join(t.TempDir(), "base"), x.plan)
		if err != nil {
			t.Fatal(err)
		}
		if len(w.places) != c.want {
			t.Errorf("to %s in rows of %s: %d columns, want %d", c.end, c.row, len(w.places), c.want)
		}
		w.Abort()
	}
}
