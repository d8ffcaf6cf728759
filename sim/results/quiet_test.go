package results

import (
	"encoding/json"
	"fmt"
	"maps"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
)

// calm makes a run of which most steps could come in a Quiet: one interval each, settled or
// settling, of few different states, so that many values are equal. The others are those of chance.
func calm(x *tiny, rnd *rand.Rand) *script {
	s := &script{}
	p := x.plan.Settings.Period
	taps, closed := [3]int{}, true
	var pool []*State
	var levels map[string]float64
	devices := make([]DeviceState, len(x.plan.Devices))
	rough := chance(x, rnd)
	settled := true
	for k := range p.Steps() {
		if rnd.IntN(20) == 0 {
			// The steps of chance stand at positions of their own: none may follow from
			// them, so that positions are set here anew.
			st := rough.steps[k]
			for i := range st.intervals {
				st.intervals[i].State = x.state(randomLevels(rnd), taps, closed)
			}
			if st.Status != Unsolved {
				st.Last = st.intervals[len(st.intervals)-1].State
			}
			s.steps = append(s.steps, st)
			pool = nil
			for i := range taps {
				taps[i] = rnd.IntN(33) - 16
			}
			closed = rnd.IntN(2) == 0
			settled = rnd.IntN(3) > 0
			for i := range devices {
				devices[i] = DeviceState{rnd.IntN(2) == 0, rnd.IntN(3) == 0, rnd.IntN(4) == 0, rnd.IntN(5) == 0}
			}
			continue
		}
		if len(pool) < 5 {
			// Some differ by less than a bin of a histogram from those before.
			if len(pool) == 0 || rnd.IntN(3) == 0 {
				levels = randomLevels(rnd)
				levels["n1.A"] = 0.085 + 0.015*rnd.Float64() // an unbalance about 3 %
			}
			levels = maps.Clone(levels)
			for _, name := range slices.Sorted(maps.Keys(levels)) {
				levels[name] += 5e-5 * rnd.Float64()
			}
			pool = append(pool, x.state(levels, taps, closed))
		}
		start := p.Start + int64(k)*p.Step
		iv := &Interval{Start: start, End: start + p.Step, Settled: settled, State: pool[rnd.IntN(len(pool))], Devices: slices.Clone(devices)}
		s.steps = append(s.steps, scriptStep{Step: Step{Start: start, End: start + p.Step, Last: iv.State, Solver: "in lanes"}, intervals: []*Interval{iv}})
	}
	return s
}

// quieter is a recorder that takes quiet steps.
type quieter interface {
	Interval(*Interval) error
	Action(*Action) error
	Step(*Step) error
	Whole(start, end int64) bool
	Quiet(*Quiet) error
}

// playQuiet hands over what it may in rows of any length from any lane, and returns the
// number of steps that went so.
func (s *script) playQuiet(t testing.TB, w quieter, rnd *rand.Rand) (quiet int) {
	t.Helper()
	var slot []int32
	for i := 0; i < len(s.steps); {
		var states []*State
		for k := i; k < len(s.steps) && len(states) < vector.Lanes; k++ {
			st := &s.steps[k]
			if len(st.intervals) != 1 || st.Solver != "in lanes" || w.Whole(st.Start, st.End) {
				break
			}
			if k > i && (&st.Last.Taps[0] != &states[0].Taps[0] && !slices.Equal(st.Last.Taps, states[0].Taps) || st.Last.Closed[0] != states[0].Closed[0] ||
				st.intervals[0].Settled != s.steps[i].intervals[0].Settled ||
				!slices.Equal(st.intervals[0].Devices, s.steps[i].intervals[0].Devices)) {
				break
			}
			states = append(states, st.Last)
			if rnd.IntN(10) == 0 {
				break
			}
		}
		if len(states) == 0 {
			one := script{steps: s.steps[i : i+1]}
			one.playTo(t, w)
			i++
			continue
		}
		st := &s.steps[i]
		q := &Quiet{Start: st.Start, Step: st.End - st.Start, First: rnd.IntN(vector.Lanes), Count: len(states), Devices: st.intervals[0].Devices, Solver: st.Solver,
			Settling: !st.intervals[0].Settled}
		q.State = lanesOf(states, q.First, cmplx.NaN())
		if rnd.IntN(20) > 0 && slot != nil {
			q.State.Slot = slot // the same array: the lists are kept
		}
		slot = q.State.Slot
		if err := w.Quiet(q); err != nil {
			t.Fatal(err)
		}
		i += len(states)
		quiet += len(states)
	}
	return quiet
}

func (s *script) playTo(t testing.TB, w quieter) {
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

// quietFeeder is the tiny feeder over a month's end, with steps of five minutes.
func quietFeeder(t testing.TB, seed uint64) *tiny {
	zone := denver(t)
	x := newTiny(t, time.Date(2025, 1, 31, 18, 0, 0, 0, zone), time.Date(2025, 2, 1, 7, 0, 0, 0, zone), 5*time.Minute)
	set := x.plan.Settings
	set.Run.Log = int64(time.Hour) * int64(1+seed%4)
	set.Run.Flows = []string{"line1", "tx", "reg"}
	set.Limits.All = seed%3 == 0
	if seed%4 == 1 {
		set.Limits.Own, set.Limits.Low, set.Limits.High, set.Limits.OuterLow, set.Limits.OuterHigh = true, 0.98, 1.01, 0.96, 1.03
	}
	m := x.plan.Model
	m.Sections[1].Rating = 2
	if seed%2 == 0 {
		m.Constructions[0].Rating, m.Sections[0].Emergency = math.NaN(), 60
	}
	if seed%5 == 2 { // peaks alone count
		m.Sections[0].Rating, m.Sections[1].Rating, m.Sections[0].Emergency = 1e9, 1e9, math.NaN()
	}
	// Charging makes the currents of both ends of a line differ.
	for p := range 3 {
		m.Constructions[0].Matrices.B[p][p] = 1e-5
	}
	net, err := network.Build(m)
	if err != nil {
		t.Fatal(err)
	}
	x.net, x.plan.Network = net, net
	return x
}

// about compares sums: everything else must be equal.
var about = cmp.Comparer(func(a, b float64) bool {
	return a == b || math.IsNaN(a) && math.IsNaN(b) || math.Abs(a-b) <= 1e-12*max(math.Abs(a), math.Abs(b))
})

// exactly compares figures of which some are unknown.
var exactly = cmp.Comparer(func(a, b float64) bool { return a == b || math.IsNaN(a) && math.IsNaN(b) })

func TestQuietStepsAreSteps(t *testing.T) {
	for seed := range uint64(24) {
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			x := quietFeeder(t, seed)
			rnd := rand.New(rand.NewPCG(seed, 21))
			s := calm(x, rnd)
			exact := []int{0, exactValues, 60 * 13}[seed%3] // histograms, all voltages, first these and then those
			var folders [2]string
			var writers [2]*Writer
			for i := range folders {
				folders[i] = filepath.Join(t.TempDir(), "base")
				w, err := create(folders[i], x.plan, exact)
				if err != nil {
					t.Fatal(err)
				}
				if seed%3 == 2 {
					w.stats.dist = &distribution{points: len(w.meter.Points), limit: exact}
				}
				writers[i] = w
			}
			s.playTo(t, writers[0])
			if n := s.playQuiet(t, writers[1], rnd); n < x.plan.Settings.Period.Steps()/2 {
				t.Fatalf("%d of %d steps were quiet", n, x.plan.Settings.Period.Steps())
			}
			for i, w := range writers {
				if err := w.Finish(&Outcome{Taps: []int{0, 0, 0}, Closed: []bool{true}}, RunInfo{Version: "test"}); err != nil {
					t.Fatal(i, err)
				}
			}
			sameStatistics(t, writers[0].stats, writers[1].stats)
			if d := cmp.Diff(writers[0].duty, writers[1].duty, cmp.AllowUnexported(duty{}, deviceTime{})); d != "" {
				t.Error("duty:", d)
			}
			if a, b := writers[0].balance, writers[1].balance; a.checked != b.checked || b.worst > 1e-9 || !(b.worst > 0) {
				t.Errorf("balance %+v, step by step %+v", b, a)
			}
			sameFolders(t, folders[0], folders[1])
		})
	}
}

func sameStatistics(t *testing.T, a, b *statistics) {
	t.Helper()
	if len(a.months) != 2 || len(b.months) != 2 {
		t.Fatalf("%d and %d months, want 2", len(a.months), len(b.months))
	}
	unexported := cmp.AllowUnexported(pointStats{}, bucket{}, energies{}, outsideTimes{}, peak{}, extreme{}, monthBucket{})
	for _, x := range []struct {
		name string
		a, b any
	}{
		{"points", a.points, b.points}, {"total", a.total, b.total}, {"months", a.months, b.months}, {"energy of losses", a.lossEnergy, b.lossEnergy},
		{"peaks of losses", a.lossPeak, b.lossPeak}, {"peaks of loading", a.loadPeak, b.loadPeak},
		{"above rating", a.aboveRating, b.aboveRating}, {"above emergency", a.aboveEmergency, b.aboveEmergency},
		{"extremes", []any{a.lossesPeak, a.leastDemand, a.reverse, a.unbalance, a.negative, a.unbalanceAt, a.unbalanceAbove3, a.lowJudged, a.highJudged},
			[]any{b.lossesPeak, b.leastDemand, b.reverse, b.unbalance, b.negative, b.unbalanceAt, b.unbalanceAbove3, b.lowJudged, b.highJudged}},
	} {
		if d := cmp.Diff(x.a, x.b, unexported, about); d != "" {
			t.Errorf("%s: %s", x.name, d)
		}
	}
	bits := func(x, y float64) bool { return math.Float64bits(x) == math.Float64bits(y) }
	for i := range a.points {
		p, q := &a.points[i], &b.points[i]
		if !bits(p.min, q.min) || !bits(p.max, q.max) {
			t.Errorf("point %d: extremes %v and %v, step by step %v and %v", i, q.min, q.max, p.min, p.max)
		}
	}
	for i := range a.lossPeak {
		if a.lossPeak[i] != b.lossPeak[i] {
			t.Errorf("loss %d: peak %v, step by step %v", i, b.lossPeak[i], a.lossPeak[i])
		}
	}
	for i := range a.loadPeak {
		if a.loadPeak[i] != b.loadPeak[i] {
			t.Errorf("loading %d: peak %v, step by step %v", i, b.loadPeak[i], a.loadPeak[i])
		}
	}
	if a.unbalance != b.unbalance || a.negative != b.negative || a.lossesPeak != b.lossesPeak || a.leastDemand != b.leastDemand {
		t.Errorf("peaks %v %v %v %v, step by step %v %v %v %v", b.unbalance, b.negative, b.lossesPeak, b.leastDemand, a.unbalance, a.negative, a.lossesPeak, a.leastDemand)
	}
	for i := range a.judge.services {
		if x, y := a.judge.services[i].outside, b.judge.services[i].outside; x != y || x == 0 {
			t.Errorf("service %d: outside for %d, step by step %d", i, y, x)
		}
	}
	one, two := a.dist.percentiles(), b.dist.percentiles()
	for i := range a.points {
		if x, y := one[i], two[i]; x != y {
			t.Errorf("point %d: percentiles %v, step by step %v", i, y, x)
		}
	}
	if (a.dist.bins == nil) != (b.dist.bins == nil) {
		t.Error("percentiles are found in two ways")
	}
}

// sameFolders compares the files: words and times to the letter, figures to what the last
// digit of a sum may differ by.
func sameFolders(t *testing.T, a, b string) {
	t.Helper()
	files, err := os.ReadDir(a)
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		x, err1 := os.ReadFile(filepath.Join(a, f.Name()))
		y, err2 := os.ReadFile(filepath.Join(b, f.Name()))
		if err1 != nil || err2 != nil {
			t.Fatal(err1, err2)
		}
		if f.Name() == "run.json" {
			x, y = withoutHashes(t, x), withoutHashes(t, y)
		}
		one, two := strings.FieldsFunc(string(x), betweenCells), strings.FieldsFunc(string(y), betweenCells)
		if len(one) != len(two) {
			t.Errorf("%s has %d cells, step by step %d", f.Name(), len(two), len(one))
			continue
		}
		for i := range one {
			if one[i] == two[i] {
				continue
			}
			p, err1 := strconv.ParseFloat(one[i], 64)
			q, err2 := strconv.ParseFloat(two[i], 64)
			if err1 != nil || err2 != nil || math.Abs(p-q) > 1.1e-5*math.Abs(p) {
				t.Errorf("%s, cell %d: %q, step by step %q", f.Name(), i, two[i], one[i])
			}
		}
	}
}

func betweenCells(r rune) bool { return r == ',' || r == '\n' }

// withoutHashes takes out of run.json what must differ: hashes, and the balance, which
// quiet steps check in real power alone.
func withoutHashes(t *testing.T, data []byte) []byte {
	t.Helper()
	var r runOut
	if err := json.Unmarshal(data, &r); err != nil {
		t.Fatal(err)
	}
	r.Results, r.Balance.Worst, r.Balance.At = nil, 0, ""
	out, err := json.MarshalIndent(r, "", " ")
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func TestQuietStepsAreStepsToTotalsAndTally(t *testing.T) {
	for seed := range uint64(12) {
		x := quietFeeder(t, seed)
		rnd := rand.New(rand.NewPCG(seed, 22))
		s := calm(x, rnd)
		a, b := NewTotals(x.plan), NewTotals(x.plan)
		for range 2 { // the second run begins with Reset
			a.Reset()
			b.Reset()
			s.playTo(t, a)
			s.playQuiet(t, b, rnd)
			p, q := a.Sums(), b.Sums()
			if d := cmp.Diff(p, q, about); d != "" || p.LowestPU != q.LowestPU || p.HighestPU != q.HighestPU || p.PeakKW != q.PeakKW {
				t.Fatalf("seed %d: %s", seed, d)
			}
		}
		one, two := NewTally(x.plan), NewTally(x.plan)
		s.playTo(t, one)
		s.playQuiet(t, two, rnd)
		p, err1 := one.Summary()
		q, err2 := two.Summary()
		if err1 != nil || err2 != nil {
			t.Fatal(err1, err2)
		}
		for i := range p {
			u, _ := strconv.ParseFloat(p[i].Value, 64)
			v, _ := strconv.ParseFloat(q[i].Value, 64)
			if p[i] != q[i] && !(math.Abs(u-v) <= 1.1e-5*math.Abs(u)) {
				t.Errorf("seed %d: %v, step by step %v", seed, q[i], p[i])
			}
		}
		if d := cmp.Diff(one.Loading(), two.Loading(), exactly); d != "" {
			t.Errorf("seed %d: loading: %s", seed, d)
		}
		if d := cmp.Diff(one.Points(), two.Points(), cmp.AllowUnexported(Point{}), about); d != "" {
			t.Errorf("seed %d: %s", seed, d)
		}
	}
}

func TestAQuietAllocatesNothing(t *testing.T) {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	x := long(t, 20, start.AddDate(1, 0, 0), time.Second)
	x.plan.Settings.Run.Log = int64(24 * time.Hour)
	w, err := create(filepath.Join(t.TempDir(), "base"), x.plan, 0) // without the store of exact percentiles
	if err != nil {
		t.Fatal(err)
	}
	defer w.Abort()
	rnd := rand.New(rand.NewPCG(1, 1))
	var lanes []*Lanes
	for range 4 {
		var states []*State
		for range vector.Lanes {
			states = append(states, x.state(randomLevels(rnd), [3]int{1, 0, 0}, true))
		}
		lanes = append(lanes, lanesOf(states, 3, cmplx.NaN()))
		lanes[len(lanes)-1].Slot = lanes[0].Slot
	}
	totals := NewTotals(x.plan)
	q := &Quiet{Start: start.UnixNano(), Step: int64(time.Second), First: 3, Count: vector.Lanes, Devices: make([]DeviceState, len(x.plan.Devices)), Solver: "in lanes"}
	k := 0
	do := func() {
		q.State = lanes[k%len(lanes)]
		if err := w.Quiet(q); err != nil {
			t.Fatal(err)
		}
		if err := totals.Quiet(q); err != nil {
			t.Fatal(err)
		}
		q.Start += vector.Lanes * q.Step
		k++
	}
	for range 100 {
		do() // histograms find their size
	}
	if n := testing.AllocsPerRun(400, do); n != 0 {
		t.Errorf("a row of quiet steps allocates %g times, want 0", n)
	}
}

// Point by point, an extreme is that of instant by instant: of equal ones the first in
// time, then the first point.
func TestExtremesPointByPoint(t *testing.T) {
	rnd := rand.New(rand.NewPCG(9, 9))
	for range 2000 {
		var v [3][4]float64
		for i := range v {
			for k := range v[i] {
				v[i][k] = float64(rnd.IntN(4))
			}
		}
		var low, high, wantLow, wantHigh extreme
		for k := range v[0] {
			for i := range v {
				wantLow.low(v[i][k], i, int64(k))
				wantHigh.high(v[i][k], i, int64(k))
			}
		}
		for i := range v {
			for k := range v[i] {
				low.lower(v[i][k], i, int64(k))
				high.higher(v[i][k], i, int64(k))
			}
		}
		if low != wantLow || high != wantHigh {
			t.Fatalf("%v: %v and %v, want %v and %v", v, low, high, wantLow, wantHigh)
		}
	}
}

func TestWhatMustComeWhole(t *testing.T) {
	x := quietFeeder(t, 0) // a row of the logs each hour
	w, err := Create(filepath.Join(t.TempDir(), "base"), x.plan)
	if err != nil {
		t.Fatal(err)
	}
	defer w.Abort()
	p := x.plan.Settings.Period
	for k := range p.Steps() {
		start := p.Start + int64(k)*p.Step
		if got, want := w.Whole(start, start+p.Step), k%12 == 11; got != want {
			t.Errorf("step %d: %v, want %v", k, got, want)
		}
	}
	for _, q := range []*Quiet{{Step: 1, Count: 0}, {Step: 1, Count: 9}, {Step: 1, Count: 1, First: 8}, {Step: 0, Count: 1}, {Step: 1, Count: 1, First: -1}} {
		if q.check() == nil {
			t.Errorf("%+v is no row of quiet steps", q)
		}
	}
	x.plan.Settings.Limits.Allowance, x.plan.LoadPeak = 4, []float64{100, 20, 30}
	if !NewTotals(x.plan).Whole(p.Start, p.Start+p.Step) || !NewTally(x.plan).Whole(p.Start, p.Start+p.Step) {
		t.Error("with a drop to the meters each load's power is asked for: the steps must come whole")
	}
}
