package sim_test

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
	"yearflow/sim/results"
)

// weakFeeder is a source of 40 MVA and 12 km of line with 200 services of 25 kVA, each
// with a load and an inverter of 20 kVA: 4 MVA of solar, which lift the far end to the
// edge of every curve. function is a row of inverter-functions.csv.
func weakFeeder(step, function string) fstest.MapFS {
	const spots, at = 40, 5
	var sections, transformers, loads, generators strings.Builder
	sections.WriteString("section,from,to,phases,length [km],construction\n")
	transformers.WriteString("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,resistance [%],reactance [%]\n")
	loads.WriteString("load,node,phases,real [kW],power factor,profile\n")
	generators.WriteString("generator,node,phases,kind,rating [kVA],profile,function\n")
	for k := range spots {
		from := fmt.Sprintf("n%d", k)
		if k == 0 {
			from = "bus"
		}
		fmt.Fprintf(&sections, "s%d,%s,n%d,ABC,0.3,line\n", k+1, from, k+1)
		for j := range at {
			name, phase := fmt.Sprintf("%d-%d", k+1, j), "ABC"[(k+j)%3:(k+j)%3+1]
			fmt.Fprintf(&transformers, "t%s,n%d,m%s,%s,25,7.2,0.24,1ph,1.2,1.8\n", name, k+1, name, phase)
			fmt.Fprintf(&loads, "l%s,m%s,%s,%g,0.95,home\n", name, name, phase, 4+0.25*float64(j))
			fmt.Fprintf(&generators, "g%s,m%s,%s,solar,20,sun,f\n", name, name, phase)
		}
	}
	f := plantStudy(step, 1, map[string]string{
		"feeder/source.csv":             "node,nominal [kV],voltage [pu],short circuit 3ph [MVA],x/r 3ph\nbus,12.47,1.03,40,6\n",
		"feeder/sections.csv":           sections.String(),
		"feeder/transformers.csv":       transformers.String(),
		"feeder/loads.csv":              loads.String(),
		"feeder/generators.csv":         generators.String(),
		"feeder/inverter-functions.csv": "function,category,reactive,v1 [pu],v2 [pu],v3 [pu],v4 [pu],voltage-active power,active v1 [pu],active v2 [pu]\n" + function + "\n",
	})
	var day strings.Builder
	day.WriteString("time,home [pu],sun [pu]\n")
	for h := range 24 {
		sun := math.Max(0, math.Sin(math.Pi*(float64(h)-5)/14))
		if h < 5 {
			sun = 0
		}
		fmt.Fprintf(&day, "2025-03-03T%02d:00,%.3f,%.3f\n", h, 0.3+0.5*math.Exp(-math.Pow(float64(h)-19, 2)/8), sun)
	}
	f["profiles/day.csv"] = text(day.String())
	return f
}

const (
	unity    = "f,B,constant power factor,,,,,,,"
	steepest = "f,B,voltage-reactive power,0.98,1,1,1.02,yes,1.05,1.06"
	defaults = "f,B,voltage-reactive power,,,,,,,"
)

// Two hundred inverters with the steepest curves that IEEE Std 1547-2018 allows
// (Tables 8 and 10) on a weak feeder: every step of a day is solved, the solution from
// the no-load voltages is the one from the equilibrium before, every inverter stands on
// its curve, and the far end is held where unity power factor leaves it too high.
func TestSteepestCurvesOnAWeakFeeder(t *testing.T) {
	highest := func(function string) (worst float64, paths map[string]int, took time.Duration) {
		e := ready(t, weakFeeder("15min", function))
		began := time.Now()
		o := watchRun(t, e, &probe{
			see: func(iv *results.Interval, r *results.Reading) {
				if p, q, scale := e.Meter().Balance(iv.State); math.Abs(p)+math.Abs(q) > 2e-6*math.Max(scale, 200e3) {
					t.Errorf("imbalance %g W, %g var of %g VA", p, q, scale)
				}
			},
			step: func(s *results.Step) {
				if s.Status != results.OK {
					t.Errorf("step %s at %s", s.Status, s.Where)
				}
			}})
		took = time.Since(began)
		in, err := e.Solve(48, sim.Positions{Given: true})
		if err != nil || in.Status != results.OK {
			t.Fatal(err, in)
		}
		for _, v := range e.Voltages() {
			worst = max(worst, v.PU)
		}
		return worst, o.Paths, took
	}
	plain, paths, took := highest(unity)
	t.Logf("unity: highest %.4f p.u. at noon, paths %v, %v", plain, paths, took)
	usual, paths, took := highest(defaults)
	t.Logf("category B defaults: highest %.4f p.u., paths %v, %v", usual, paths, took)
	held, paths, took := highest(steepest)
	t.Logf("steepest: highest %.4f p.u., paths %v, %v", held, paths, took)
	if plain < 1.07 || held > 1.062 || held > usual {
		t.Errorf("highest voltage at noon: unity %.4f, defaults %.4f, steepest %.4f p.u.", plain, usual, held)
	}
}

// From a step of a run, whose start is the equilibrium of another, and from the
// no-load voltages: the same voltages to 1e-7 p.u., at every step of the day.
func TestOneEquilibrium(t *testing.T) {
	e, alone := ready(t, weakFeeder("1h", steepest)), ready(t, weakFeeder("1h", steepest))
	worst, n := 0.0, 0
	watchRun(t, e, &probe{step: func(s *results.Step) {
		in, err := alone.Solve(n, sim.Positions{Given: true})
		if err != nil || in.Status != results.OK {
			t.Fatal(err, in)
		}
		n++
		for u, v := range in.State.V {
			worst = max(worst, cmplx.Abs(v-s.Last.V[u])/e.Plan.Network.Unknowns[u].Nominal)
		}
	}})
	if n != 24 || worst > 1e-7 {
		t.Errorf("%d steps, largest difference %.3g p.u.", n, worst)
	}
	t.Logf("largest difference %.3g p.u.", worst)
}

// BenchmarkWeakFeeder is a step of the weak feeder by the functions of its inverters.
func BenchmarkWeakFeeder(b *testing.B) {
	for _, f := range []struct{ name, row string }{{"unity", unity}, {"defaults", defaults}, {"steepest", steepest}} {
		b.Run(f.name, func(b *testing.B) {
			e := ready(b, weakFeeder("15min", f.row))
			for b.Loop() {
				if _, err := e.Run(context.Background(), &discard{}); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.Elapsed().Microseconds())/float64(b.N)/96, "µs/step")
		})
	}
}
