//go:build klu

package klu_test

import (
	"fmt"
	"runtime"
	"sort"
	"testing"
	"time"

	"yearflow/sim/powerflow/klu"
	"yearflow/sim/synthetic"
)

// contestants are made for a circuit at its positions. The first is the one that the
// others are held against.
var contestants = []func(testing.TB, *synthetic.Circuit) klu.Stepper{
	func(tb testing.TB, c *synthetic.Circuit) klu.Stepper {
		l, err := klu.New(c.Solver, c.Level(0))
		if err != nil {
			tb.Fatal(err)
		}
		tb.Cleanup(l.Close)
		return l
	},
	func(_ testing.TB, c *synthetic.Circuit) klu.Stepper {
		return klu.NewReference(c.Solver, c.Level(0))
	},
	func(_ testing.TB, c *synthetic.Circuit) klu.Stepper {
		return klu.NewLaneRun(c.Solver, c.Source, c.Power, c.Shape)
	},
}

// BenchmarkSteps prints for each contestant, by its name: µs a step (median of the
// rounds), iterations a step, and how many times as fast as KLU it is (median of the
// rounds' ratios). A round lets all run the same steps in turns; -benchtime 15x makes
// fifteen.
func BenchmarkSteps(b *testing.B) {
	for _, size := range []struct {
		name  string
		o     synthetic.Options
		steps int
	}{
		{"S", synthetic.S(), 500},
		{"M", synthetic.M(), 200},
		{"L", synthetic.L(), 40},
	} {
		b.Run(size.name, func(b *testing.B) {
			c := circuit(b, size.o)
			steps, start := minutes(b, c, size.o, size.steps)
			field := make([]klu.Stepper, len(contestants))
			for i, make := range contestants {
				field[i] = make(b, c)
				field[i].Prepare(steps, start)
			}
			for _, tolerance := range []float64{1e-6, 1e-8} {
				b.Run(fmt.Sprint(tolerance), func(b *testing.B) { race(b, field, size.steps, tolerance) })
			}
		})
	}
}

func race(b *testing.B, field []klu.Stepper, steps int, tolerance float64) {
	runtime.LockOSThread() // the time is the thread's
	defer runtime.UnlockOSThread()
	took, iterations := make([][]float64, len(field)), make([]int, len(field))
	round := func() {
		for i, s := range field {
			from := klu.ThreadTime()
			n, err := s.Run(tolerance)
			if err != nil {
				b.Fatal(err)
			}
			took[i] = append(took[i], float64(klu.ThreadTime()-from)/float64(time.Microsecond)/float64(steps))
			iterations[i] = n
		}
	}
	round() // warms the caches
	for i := range took {
		took[i] = took[i][:0]
	}
	for b.Loop() {
		round()
	}
	b.ReportMetric(0, "ns/op")
	for i, s := range field {
		ratio := make([]float64, len(took[i]))
		for k := range ratio {
			ratio[k] = took[0][k] / took[i][k]
		}
		b.ReportMetric(median(took[i]), "µs/step-"+s.Name())
		b.ReportMetric(float64(iterations[i])/float64(steps), "iterations-"+s.Name())
		if i > 0 {
			b.ReportMetric(median(ratio), "×klu-"+s.Name())
		}
	}
}

func median(x []float64) float64 {
	s := append([]float64(nil), x...)
	sort.Float64s(s)
	n := len(s)
	return (s[(n-1)/2] + s[n/2]) / 2
}
