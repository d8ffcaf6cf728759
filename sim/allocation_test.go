package sim_test

import (
	"context"
	"io/fs"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/results"
)

// discard is a Recorder that takes everything and keeps nothing.
type discard struct{ steps int }

func (d *discard) Interval(*results.Interval) error { return nil }
func (d *discard) Action(*results.Action) error     { return nil }
func (d *discard) Step(*results.Step) error         { d.steps++; return nil }

// Steps do not allocate: a run of many days makes as many allocations as a run of one,
// with events, edges and unsolved steps among them.
func TestStepsDoNotAllocate(t *testing.T) {
	// hold is a study whose inputs change from step to step.
	hold := func(steps int) fs.FS {
		volts, load := make([]float64, steps), make([]float64, steps)
		for k := range volts {
			volts[k] = []float64{120, 117, 119, 123}[k/5%4] // slow enough that nothing hunts: that is noted in the outcome
			if k%7 == 5 {
				load[k] = 1 // no solution
			}
		}
		return resonant(load, volts, "capacitors.csv", "capacitor,node,phases,size [kvar],state\nC,X,A,30,open\nD,S,A,30,open\n",
			"capacitor-settings.csv", "capacitor,control,time on,time off,voltage on [V],voltage off [V],delay [s],daily limit\nC,voltage,,,118,122,20,\nD,time,00:10,00:20,110,130,60,40\n")
	}
	for _, tt := range []struct {
		name        string
		short, long func() *sim.Engine
	}{
		{"demo", func() *sim.Engine { return prepare(t, shortDemo(t, "2025-07-01", "2025-07-02"), "days", sim.Options{}) },
			func() *sim.Engine { return prepare(t, shortDemo(t, "2025-07-01", "2025-07-15"), "days", sim.Options{}) }},
		{"unsolved", func() *sim.Engine { return prepare(t, hold(28), "", sim.Options{}) },
			func() *sim.Engine { return prepare(t, hold(280), "", sim.Options{}) }},
	} {
		t.Run(tt.name, func(t *testing.T) {
			count := func(e *sim.Engine) float64 {
				return testing.AllocsPerRun(3, func() {
					if _, err := e.Run(context.Background(), &discard{}); err != nil {
						t.Fatal(err)
					}
				})
			}
			short, long := tt.short(), tt.long()
			a, b := count(short), count(long)
			if a != b {
				t.Errorf("%v allocations in %d steps, %v in %d: %.3g a step", a, short.Steps(), b, long.Steps(), (b-a)/float64(long.Steps()-short.Steps()))
			}
			t.Logf("%v allocations a run", a)
		})
	}
}

// BenchmarkPrepare makes an engine of the demonstration study that has been read:
// admittances, ordering, profiles.
func BenchmarkPrepare(b *testing.B) {
	b.ReportAllocs()
	for b.Loop() {
		prepare(b, demo.Study(), "", sim.Options{})
	}
}

// BenchmarkStep is one hourly step of the demonstration study with its events and
// without records, in a run of 31 days of July.
func BenchmarkStep(b *testing.B) {
	e := prepare(b, shortDemo(b, "2025-07-01", "2025-08-01"), "days", sim.Options{})
	b.ReportAllocs()
	d := &discard{}
	began := time.Now()
	for b.Loop() {
		if _, err := e.Run(context.Background(), d); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(time.Since(began).Nanoseconds())/float64(d.steps), "ns/step")
}

// BenchmarkInstant settles and solves one instant of the demonstration study.
func BenchmarkInstant(b *testing.B) {
	e := prepare(b, demo.Study(), "", sim.Options{})
	for b.Loop() {
		if _, err := e.Solve(4500, sim.Positions{}); err != nil {
			b.Fatal(err)
		}
	}
}
