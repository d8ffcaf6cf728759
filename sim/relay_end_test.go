package sim_test

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"runtime"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/results"
	"yearflow/sim/synthetic"
)

// spoiled fails, or calls stop, at its n-th call.
type spoiled struct {
	left int
	err  error
	stop func()
}

func (r *spoiled) take() error {
	if r.left--; r.left == 0 {
		if r.stop != nil {
			r.stop()
			return nil
		}
		return r.err
	}
	return nil
}

func (r *spoiled) Interval(*results.Interval) error { return r.take() }
func (r *spoiled) Action(*results.Action) error     { return r.take() }
func (r *spoiled) Step(*results.Step) error         { return r.take() }
func (r *spoiled) Quiet(*results.Quiet) error       { return r.take() }
func (r *spoiled) Whole(start, end int64) bool      { return start/(end-start)%50 == 0 }

// A recorder that fails ends the run with its own error wherever that is, and so does a
// context that is cancelled: nothing waits for ever, no goroutine stays behind, the older
// folder is as it was, and the same engine runs again to the same bytes.
func TestRunsThatEndEarly(t *testing.T) {
	study, err := synthetic.Study(synthetic.Options{Buses: 100, Seed: 7, Step: 10 * time.Second, Days: 1, Inputs: synthetic.Minutes})
	if err != nil {
		t.Fatal(err)
	}
	full := errors.New("disk full")
	e := prepare(t, study, "", sim.Options{})
	dir := filepath.Join(t.TempDir(), "r")
	write := func() {
		w, err := results.Create(dir, e.Plan)
		if err != nil {
			t.Fatal(err)
		}
		out, err := e.Run(context.Background(), w)
		if err != nil {
			t.Fatal(err)
		}
		out.Speed = results.Speed{}
		if err := w.Finish(out, results.RunInfo{}); err != nil {
			t.Fatal(err)
		}
	}
	write()
	if n := e.Timing().QuietSteps; n < 1000 {
		t.Fatalf("%d steps are quiet", n)
	}
	before := runtime.NumGoroutine()
	old := filepath.Join(t.TempDir(), "old")
	if err := os.CopyFS(old, os.DirFS(dir)); err != nil {
		t.Fatal(err)
	}
	for _, cores := range []int{1, 2} {
		was := runtime.GOMAXPROCS(cores)
		for _, n := range []int{1, 2, 3, 11, 12, 13, 100, 500, 900} {
			for _, cancelled := range []bool{false, true} {
				w, err := results.Create(dir, e.Plan)
				if err != nil {
					t.Fatal(err)
				}
				ctx, cancel := context.WithCancel(context.Background())
				bad, want := &spoiled{left: n, err: full}, full
				if cancelled {
					bad.stop, want = cancel, context.Canceled
				}
				done := make(chan error, 1)
				go func() {
					_, err := e.Run(ctx, w, bad)
					done <- err
				}()
				select {
				case err = <-done:
				case <-time.After(2 * time.Minute):
					t.Fatalf("call %d, cancelled %v, %d cores: the run never ends", n, cancelled, cores)
				}
				if !errors.Is(err, want) {
					t.Errorf("call %d, cancelled %v, %d cores: %v (%d left)", n, cancelled, cores, err, bad.left)
				}
				w.Abort()
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
	write()
	sameBytes(t, dir, old)
}
