package sim_test

import (
	"context"
	"errors"
	"fmt"
	"runtime"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// longOverload is a line that is overloaded for some hours of two weeks, by the hour.
func longOverload(most float64, step string, at float64) fstest.MapFS {
	f := overloaded(most, step, peaky(at))
	toml := strings.Replace(string(f["study.toml"].Data), "end = 2025-03-04", "end = 2025-03-17", 1)
	f["study.toml"] = text(toml)
	settled(f)
	return f
}

// By the hour steps are low or have no solution too, and good ones come after them.
func TestOverloadedDaysBothWays(t *testing.T) {
	low, unsolved, ok := 0, 0, 0
	for _, most := range []float64{3000, 6000, 9000, 12000, 20000, 60000, 1e6, 1e8} {
		for _, step := range []string{"30min", "1h", "2h", "24h"} {
			for _, at := range []float64{0, 12} {
				t.Run(fmt.Sprintf("%g kW, %s, %g", most, step, at), func(t *testing.T) {
					f := longOverload(most, step, at)
					sameRun(t, f, "")
					r := &trail{}
					if _, err := prepare(t, f, "", sim.Options{}).Run(context.Background(), r); err != nil {
						t.Fatal(err)
					}
					for _, s := range r.status {
						switch s {
						case results.Low:
							low++
						case results.Unsolved:
							unsolved++
						default:
							ok++
						}
					}
				})
			}
		}
	}
	t.Logf("%d low, %d unsolved, %d good", low, unsolved, ok)
	if low == 0 || unsolved == 0 {
		t.Error("no step is low, or none unsolved")
	}
}

var errFull = errors.New("full")

// failing takes what comes, some of it, and then fails.
type failing struct {
	quietTrail
	left int
}

func (r *failing) count() error {
	if r.left--; r.left <= 0 {
		return errFull
	}
	return nil
}
func (r *failing) Interval(*results.Interval) error { return r.count() }
func (r *failing) Action(*results.Action) error     { return r.count() }
func (r *failing) Step(*results.Step) error         { return r.count() }
func (r *failing) Quiet(*results.Quiet) error       { return r.count() }
func (r *failing) Gathers() bool                    { return true }
func (r *failing) Gathered(*results.Gathered) error { return r.count() }

// A run by the hour that ends early, by a recorder or by its context, leaves nothing behind:
// no goroutine, and the next run of the engine is that of a new one.
func TestHoursThatEndEarly(t *testing.T) {
	f := longOverload(5000, "1h", 12)
	want := &trail{}
	if _, err := prepare(t, f, "", sim.Options{}).Run(context.Background(), want); err != nil {
		t.Fatal(err)
	}
	e := prepare(t, f, "", sim.Options{})
	before := runtime.NumGoroutine()
	for _, left := range []int{1, 2, 3, 7, 20, 55, 130, 200} {
		if _, err := e.Run(context.Background(), &failing{left: left}); !errors.Is(err, errFull) {
			t.Fatalf("after %d: %v", left, err)
		}
		ctx, cancel := context.WithCancel(context.Background())
		cancel()
		if _, err := e.Run(ctx, &failing{left: 1 << 30}); !errors.Is(err, context.Canceled) {
			t.Fatal(err)
		}
		if _, err := e.Solve(left, sim.Positions{}); err != nil {
			t.Fatal(err)
		}
		got := &trail{}
		if _, err := e.Run(context.Background(), got); err != nil {
			t.Fatal(err)
		}
		sameTrail(t, want, got)
	}
	for range 50 {
		if runtime.NumGoroutine() <= before {
			return
		}
		time.Sleep(10 * time.Millisecond)
	}
	t.Errorf("%d goroutines, %d before", runtime.NumGoroutine(), before)
}

// sameTrail holds two runs against each other, bit by bit.
func sameTrail(t *testing.T, want, got *trail) {
	t.Helper()
	if len(want.actions) != len(got.actions) || len(want.v) != len(got.v) {
		t.Fatalf("%d actions, %d steps; want %d, %d", len(got.actions), len(got.v), len(want.actions), len(want.v))
	}
	for i := range want.actions {
		if want.actions[i] != got.actions[i] {
			t.Fatalf("action %d: %+v, want %+v", i, got.actions[i], want.actions[i])
		}
	}
	for k := range want.v {
		if want.status[k] != got.status[k] {
			t.Fatalf("step %d is %v, want %v", k, got.status[k], want.status[k])
		}
		for u := range want.v[k] {
			if want.v[k][u] != got.v[k][u] {
				t.Fatalf("step %d, unknown %d: %v, want %v", k, u, got.v[k][u], want.v[k][u])
			}
		}
	}
}

// An engine that is given another sheet runs as a new one whose tables have it: bit by bit,
// and whatever it ran before.
func TestSheetsBetweenRunsByTheHour(t *testing.T) {
	for _, reverse := range []feeder.ReverseMode{feeder.ReverseNone, feeder.ForwardOnly, feeder.ReverseOnly, feeder.ReverseIdle, feeder.ReverseFollow, feeder.ReverseNeutral, feeder.ReverseStay} {
		t.Run(fmt.Sprint(reverse), func(t *testing.T) {
			f := longOverload(2500, "1h", 12)
			f["feeder/generators.csv"] = text("generator,node,phases,kind,rating [kVA],profile\npv,end,ABC,other,3500,sun\n")
			f["profiles/sun.csv"] = text(strings.Replace(peaky(5), "day [pu]", "sun [pu]", 1))
			used := prepare(t, f, "", sim.Options{})
			if _, err := used.Run(context.Background(), &trail{}); err != nil {
				t.Fatal(err)
			}
			sheet := *used.Plan.Model.Regulators[0].Units[1].Settings
			sheet.Set, sheet.Delay, sheet.Reverse = 120.5, 77, reverse
			sheet.ReverseSet, sheet.ReverseBandwidth, sheet.ReverseDelay, sheet.ReverseThreshold = 119, 2, 60, 0.02
			if err := used.SetTapSheet("R.B", sheet); err != nil {
				t.Fatal(err)
			}
			names := [...]string{feeder.ReverseNone: "none", feeder.ForwardOnly: "forward only", feeder.ReverseOnly: "reverse only", feeder.ReverseIdle: "idle",
				feeder.ReverseFollow: "follow", feeder.ReverseNeutral: "neutral", feeder.ReverseStay: "stay"}
			f["feeder/regulator-settings.csv"] = text("regulator,phase,set [V],bandwidth [V],delay [s],timer,reverse,reverse threshold [%],reverse set [V],reverse bandwidth [V],reverse delay [s]\n" +
				"R,A,122,2,40,integrate,,,,,\nR,B,120.5,2,77,restart," + names[reverse] + ",2,119,2,60\nR,C,122,2,50,restart,,,,,\n")
			want, got := &trail{}, &trail{}
			if _, err := prepare(t, f, "", sim.Options{}).Run(context.Background(), want); err != nil {
				t.Fatal(err)
			}
			if _, err := used.Run(context.Background(), got); err != nil {
				t.Fatal(err)
			}
			sameTrail(t, want, got)
			sameRun(t, f, "")
		})
	}
}

// What devices made of the voltages under one sheet is forgotten before the next run, where
// it cannot be measured anew: the first step is near to what the line carries.
func TestWhatAMovementMakesIsOfTheRun(t *testing.T) {
	for most := 7000.0; most < 7500; most += 50 {
		t.Run(fmt.Sprint(most), func(t *testing.T) {
			f := longOverload(most, "1h", 0)
			used, fresh := prepare(t, f, "", sim.Options{}), prepare(t, f, "", sim.Options{})
			run := func(e *sim.Engine, set float64) *trail {
				for u, p := range []string{"A", "B", "C"} {
					s := *e.Plan.Model.Regulators[0].Units[u].Settings
					s.Set = set
					if err := e.SetTapSheet("R."+p, s); err != nil {
						t.Fatal(err)
					}
				}
				r := &trail{}
				if _, err := e.Run(context.Background(), r); err != nil {
					t.Fatal(err)
				}
				return r
			}
			run(used, 126)
			sameTrail(t, run(fresh, 108), run(used, 108))
		})
	}
}
