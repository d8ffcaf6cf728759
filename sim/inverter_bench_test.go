package sim_test

import (
	"context"
	"fmt"
	"math/cmplx"
	"strings"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

const smart = "smart-inverters"

// withRoofs is the demonstration study whose case smart-inverters has, beside its six
// solar plants and in the place of the battery, 24 of 5 kVA on roofs at meters, all on volt-var of category B with its default
// response time of 5 s, so that an hour's equilibrium is solved with the power flow.
func withRoofs(tb testing.TB) overlay {
	tb.Helper()
	o := laid(demo.Study())
	const from = "cases/" + smart + "/"
	b := strings.Builder{}
	b.WriteString("generator,node,phases,kind,rating [kVA],power factor,profile,function\n")
	for _, l := range strings.Split(content(tb, o, from+"generators.csv"), "\n") {
		if c := strings.Split(l, ","); len(c) == 3 && c[0] != "generator" {
			fmt.Fprintf(&b, "%s,,,,,-,,%s\n", c[0], c[2])
		}
	}
	roofs := 0
	for _, l := range strings.Split(content(tb, o, "feeder/nodes.csv"), "\n") {
		if node, _, _ := strings.Cut(l, ","); strings.HasSuffix(node, "-m1") && roofs < 24 {
			roofs++
			fmt.Fprintf(&b, "roof-%s,%s,12,solar,5,-,solar-main,volt-var B\n", node, node)
		}
	}
	if roofs != 24 {
		tb.Fatalf("the demo has %d streets with meters, want 24", roofs)
	}
	o.put(from+"generators.csv", b.String())
	var head []string
	for _, l := range strings.Split(content(tb, o, from+"batteries.csv"), "\n") {
		if strings.HasPrefix(l, "#") || strings.HasPrefix(l, "battery,") {
			head = append(head, l)
		}
	}
	o.put(from+"batteries.csv", strings.Join(head, "\n")+"\n")
	return o
}

// BenchmarkMonth is an hourly month of spring of the demonstration study without
// records, in time per step and node.phase: as it stands, with thirty inverters on
// volt-var, and the case of six and a battery.
func BenchmarkMonth(b *testing.B) {
	may := func(o overlay) overlay { return shortened(b, o, "2025-05-01", "2025-06-01") }
	for _, c := range []struct {
		name  string
		study overlay
		of    string
	}{{"plain", may(laid(demo.Study())), ""}, {"inverters-30", may(withRoofs(b)), smart}, {"smart-inverters", may(laid(demo.Study())), smart}} {
		b.Run(c.name, func(b *testing.B) {
			e := prepare(b, c.study, c.of, sim.Options{})
			phases := 0
			for _, n := range e.Plan.Model.Nodes {
				phases += len(n.Phases)
			}
			b.ReportAllocs()
			d := &discard{}
			began := time.Now()
			for b.Loop() {
				if _, err := e.Run(context.Background(), d); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(time.Since(began).Nanoseconds())/float64(d.steps)/float64(phases), "ns/step/node.phase")
		})
	}
}

// shortened is a study over another period.
func shortened(tb testing.TB, o overlay, start, end string) overlay {
	tb.Helper()
	toml := content(tb, o, "study.toml")
	for _, r := range [][2]string{{"start = 2025-01-01", "start = " + start}, {"end = 2026-01-01", "end = " + end}} {
		if strings.Count(toml, r[0]) != 1 {
			tb.Fatalf("study.toml has %q not once", r[0])
		}
		toml = strings.Replace(toml, r[0], r[1], 1)
	}
	o.put("study.toml", toml)
	return o
}

// top keeps the highest voltage at the end of a step, p.u., at one unknown.
type top struct {
	attention sim.Recorder
	unknown   int32
	nominal   float64
	highest   float64
}

func (r *top) Interval(iv *results.Interval) error { return r.attention.Interval(iv) }
func (r *top) Action(a *results.Action) error      { return r.attention.Action(a) }
func (r *top) Step(s *results.Step) error {
	r.highest = max(r.highest, cmplx.Abs(s.Last.V[r.unknown])/r.nominal)
	return r.attention.Step(s)
}

// Thirty inverters on volt-var find an equilibrium in every hour of a week of spring, in
// balance, and take the top off the voltage where the sun lifts it most.
func TestThirtyInverters(t *testing.T) {
	o := shortened(t, withRoofs(t), "2025-05-05", "2025-05-12")
	highest := map[string]float64{}
	for _, name := range []string{"", smart} {
		e := prepare(t, o, name, sim.Options{})
		if want := map[string]int{"": 6, smart: 30}[name]; len(e.Plan.Model.Generators) != want {
			t.Fatalf("case %q has %d generators, want %d", name, len(e.Plan.Model.Generators), want)
		}
		node, ok := e.Plan.Model.NodeIndex("gulch3-s")
		if !ok {
			t.Fatal("the demo has no gulch3-s")
		}
		r := &top{attention: &ledger{t: t, meter: e.Meter()}, unknown: e.Plan.Network.At[node][feeder.Leg1], nominal: 120}
		if _, err := e.Run(context.Background(), r); err != nil {
			t.Fatal(err)
		}
		highest[name] = r.highest
	}
	t.Logf("highest at gulch3-s: %v p.u.", highest)
	if highest[smart] > highest[""]-0.002 {
		t.Errorf("volt-var leaves the highest voltage at %.5f p.u. of %.5f p.u.", highest[smart], highest[""])
	}
}
