package sim_test

import (
	"context"
	"path/filepath"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/results"
	"yearflow/sim/synthetic"
)

// nothing takes everything and keeps nothing.
type nothing struct{ quiet, steps int }

func (*nothing) Action(*results.Action) error     { return nil }
func (*nothing) Interval(*results.Interval) error { return nil }
func (*nothing) Whole(int64, int64) bool          { return false }
func (n *nothing) Step(*results.Step) error       { n.steps++; return nil }
func (n *nothing) Quiet(q *results.Quiet) error   { n.quiet += q.Count; return nil }

// BenchmarkEngine is the engine without records on the synthetic feeders, in time per
// step: by the second with inputs between minutes and with noise of every second, by the
// minute and by the hour.
func BenchmarkEngine(b *testing.B) {
	for _, c := range []struct {
		name string
		o    synthetic.Options
		set  func(*synthetic.Options)
	}{
		{"S/seconds-interpolated", synthetic.S(), func(o *synthetic.Options) { o.Step, o.Inputs = time.Second, synthetic.Minutes }},
		{"S/seconds-noise", synthetic.S(), func(o *synthetic.Options) { o.Step, o.Inputs = time.Second, synthetic.Seconds }},
		{"S/minutes", synthetic.S(), func(o *synthetic.Options) { o.Step, o.Days, o.Inputs = time.Minute, 7, synthetic.HeldMinutes }},
		{"S/hours", synthetic.S(), func(o *synthetic.Options) { o.Step, o.Days, o.Inputs = time.Hour, 365, synthetic.Hours }},
		{"M/minutes", synthetic.M(), func(o *synthetic.Options) { o.Step, o.Days, o.Inputs = time.Minute, 7, synthetic.HeldMinutes }},
		{"L/hours", synthetic.L(), func(o *synthetic.Options) { o.Step, o.Days, o.Inputs = time.Hour, 20, synthetic.Hours }},
	} {
		b.Run(c.name, func(b *testing.B) {
			c.set(&c.o)
			study, err := synthetic.Study(c.o)
			if err != nil {
				b.Fatal(err)
			}
			e := prepare(b, study, "", sim.Options{})
			n := &nothing{}
			began := time.Now()
			for b.Loop() {
				if _, err := e.Run(context.Background(), n); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(time.Since(began).Microseconds())/float64(n.quiet+n.steps), "µs/step")
			b.ReportMetric(float64(n.quiet)/float64(n.quiet+n.steps), "quiet")
			t := e.Timing()
			b.ReportMetric(float64(t.LanesUsed)/float64(t.Blocks), "lanes/block")
			b.ReportMetric(float64(t.Solutions)/float64(e.Steps()), "solutions/step")
			b.ReportMetric(float64(t.Iterations)/float64(t.Solutions), "iterations")
		})
	}
}

// BenchmarkDemoYear is the year of the demonstration study with all its files but the
// figures.
func BenchmarkDemoYear(b *testing.B) {
	e := prepare(b, demo.Study(), "", sim.Options{})
	dir := b.TempDir()
	for b.Loop() {
		w, err := results.Create(filepath.Join(dir, "r"), e.Plan)
		if err != nil {
			b.Fatal(err)
		}
		out, err := e.Run(context.Background(), w)
		if err != nil {
			b.Fatal(err)
		}
		if err := w.Finish(out, results.RunInfo{}); err != nil {
			b.Fatal(err)
		}
	}
}
