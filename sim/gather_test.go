package sim_test

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/results"
	"yearflow/sim/synthetic"
)

// oneByOne hides that a writer gathers.
type oneByOne struct{ w *results.Writer }

func (r oneByOne) Interval(iv *results.Interval) error { return r.w.Interval(iv) }
func (r oneByOne) Action(a *results.Action) error      { return r.w.Action(a) }
func (r oneByOne) Step(s *results.Step) error          { return r.w.Step(s) }
func (r oneByOne) Whole(start, end int64) bool         { return r.w.Whole(start, end) }
func (r oneByOne) Quiet(q *results.Quiet) error        { return r.w.Quiet(q) }

// counted counts what comes to a writer in lanes and one by one.
type counted struct {
	*results.Writer
	gathered, single int
}

func (r *counted) Interval(iv *results.Interval) error {
	r.single++
	return r.Writer.Interval(iv)
}

func (r *counted) Gathered(g *results.Gathered) error {
	r.gathered += g.Count
	return r.Writer.Gathered(g)
}

// folderThrough runs a study into a folder through what stands before its writer.
func folderThrough(t *testing.T, study fs.FS, before func(*results.Writer) sim.Recorder) string {
	t.Helper()
	e := prepare(t, study, "", sim.Options{})
	dir := filepath.Join(t.TempDir(), "r")
	w, err := results.Create(dir, e.Plan)
	if err != nil {
		t.Fatal(err)
	}
	out, err := e.Run(context.Background(), before(w))
	if err != nil {
		t.Fatal(err)
	}
	out.Paths, out.Speed = nil, results.Speed{}
	if err := w.Finish(out, results.RunInfo{}); err != nil {
		t.Fatal(err)
	}
	return dir
}

// What is read of intervals side by side is what is read of them one by one: by the hour,
// with operations in most steps, and on wild studies, where most steps are not quiet.
func TestGatheringChangesNothing(t *testing.T) {
	studies := map[string]fs.FS{"demo": shortened(t, laid(demo.Study()), "2025-01-20", "2025-02-10")}
	for seed := range uint64(3) {
		study, err := synthetic.Study(synthetic.Options{Buses: 100, Seed: seed, Step: time.Hour, Days: 40, Inputs: synthetic.Hours})
		if err != nil {
			t.Fatal(err)
		}
		studies[fmt.Sprint("hours ", seed)] = study
	}
	// In 77 and 211 a step is in lanes until one of its intervals stands below the corner.
	seeds := []uint64{77, 211}
	for seed := range uint64(20) {
		if !testing.Short() || seed < 4 {
			seeds = append(seeds, seed)
		}
	}
	for _, seed := range seeds {
		study := wild(seed)
		if seed%3 > 0 { // without functions, with which states come whole
			s := string(study["feeder/generators.csv"].Data)
			study["feeder/generators.csv"] = text(strings.ReplaceAll(s, ",f\n", ",\n"))
		}
		studies[fmt.Sprint("wild ", seed)] = study
	}
	gathered, single := 0, 0
	for name, study := range studies {
		t.Run(name, func(t *testing.T) {
			want := folderThrough(t, study, func(w *results.Writer) sim.Recorder { return oneByOne{w} })
			var c *counted
			got := folderThrough(t, study, func(w *results.Writer) sim.Recorder {
				c = &counted{Writer: w}
				return c
			})
			sameFiles(t, want, got, true)
			t.Logf("%d intervals gathered, %d one by one", c.gathered, c.single)
			if name == "demo" || strings.HasPrefix(name, "hours") {
				if c.gathered < 50*c.single {
					t.Errorf("%d intervals gathered, %d one by one", c.gathered, c.single)
				}
				return
			}
			gathered, single = gathered+c.gathered, single+c.single
		})
	}
	if !testing.Short() && (gathered < 1000 || single < 100) {
		t.Errorf("of wild studies %d intervals were gathered, %d came one by one", gathered, single)
	}
}

// spoiledGatherer is spoiled where it takes steps side by side.
type spoiledGatherer struct{ spoiled }

func (r *spoiledGatherer) Gathers() bool                    { return true }
func (r *spoiledGatherer) Gathered(*results.Gathered) error { return r.take() }

// A run whose recorder fails at what was gathered, or that is cancelled then, ends with that
// error, leaves no goroutine and the older folder as it was, and the engine runs again.
func TestGatheringThatEndsEarly(t *testing.T) {
	study, err := synthetic.Study(synthetic.Options{Buses: 100, Seed: 7, Step: time.Hour, Days: 40, Inputs: synthetic.Hours})
	if err != nil {
		t.Fatal(err)
	}
	full := errors.New("disk full")
	e := prepare(t, study, "", sim.Options{})
	dir := filepath.Join(t.TempDir(), "r")
	run := func(ctx context.Context, more ...sim.Recorder) error {
		w, err := results.Create(dir, e.Plan)
		if err != nil {
			t.Fatal(err)
		}
		out, err := e.Run(ctx, append(more, w)...)
		if err != nil {
			w.Abort()
			return err
		}
		out.Speed = results.Speed{}
		return w.Finish(out, results.RunInfo{})
	}
	if err := run(context.Background()); err != nil {
		t.Fatal(err)
	}
	old := filepath.Join(t.TempDir(), "old")
	if err := os.CopyFS(old, os.DirFS(dir)); err != nil {
		t.Fatal(err)
	}
	before := runtime.NumGoroutine()
	for _, cores := range []int{1, 2} {
		was := runtime.GOMAXPROCS(cores)
		for _, n := range []int{1, 2, 17, 150} {
			for _, cancelled := range []bool{false, true} {
				ctx, cancel := context.WithCancel(context.Background())
				bad, want := &spoiledGatherer{spoiled{left: n, err: full}}, full
				if cancelled {
					bad.stop, want = cancel, context.Canceled
				}
				done := make(chan error, 1)
				go func() { done <- run(ctx, bad) }()
				select {
				case err = <-done:
				case <-time.After(2 * time.Minute):
					t.Fatalf("call %d, cancelled %v, %d cores: the run never ends", n, cancelled, cores)
				}
				// A short run may be through before it hears that it is cancelled.
				if !errors.Is(err, want) && !(cancelled && err == nil) {
					t.Errorf("call %d, cancelled %v, %d cores: %v (%d left)", n, cancelled, cores, err, bad.left)
				}
				cancel()
			}
		}
		runtime.GOMAXPROCS(was)
	}
	sameBytes(t, dir, old)
	for range 100 {
		if runtime.NumGoroutine() <= before {
			break
		}
		time.Sleep(10 * time.Millisecond)
	}
	if n := runtime.NumGoroutine(); n > before {
		t.Errorf("%d goroutines, before %d", n, before)
	}
	if err := run(context.Background()); err != nil {
		t.Fatal(err)
	}
	sameBytes(t, dir, old)
}
