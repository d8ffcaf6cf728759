package sim_test

import (
	"context"
	"fmt"
	"math"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/feeder"
)

// metered is a plant study whose load is known by its meter alone: 15-minute values in
// kWh, local time, with a gap of an hour.
func metered(extra map[string]string) fstest.MapFS {
	var b strings.Builder
	b.WriteString("time,meter,energy [kWh]\n")
	for q := range 96 {
		if q >= 40 && q < 44 {
			continue // 10:00 to 11:00 is missing
		}
		fmt.Fprintf(&b, "2025-03-03T%02d:%02d,m1,%g\n", q/4, q%4*15, 100+float64(q))
	}
	f := plantStudy("15min", 1, map[string]string{
		"feeder/loads.csv":  "load,node,phases,power factor\nfarm,end,ABC,0.95\n",
		"feeder/meters.csv": "meter,load\nm1,farm\n",
		"meters/a.csv":      b.String(),
	})
	f["study.toml"] = text(string(f["study.toml"].Data) + "[[meters]]\nfiles = [\"meters/*.csv\"]\nlayout = \"long\"\n")
	for name, s := range extra {
		f[name] = text(s)
	}
	return f
}

// A metered load draws what its meter counted, kWh per quarter of an hour, and the gap
// of an hour is closed by a straight line of power, which here is what was there.
func TestMeteredLoad(t *testing.T) {
	e := ready(t, metered(nil))
	for _, step := range []int{0, 41, 95} {
		in, err := e.Solve(step, sim.Positions{Given: true})
		if err != nil {
			t.Fatal(err)
		}
		want := 4 * (100 + float64(step))
		if got := real(in.State.Load[0]) / 1000; math.Abs(got-want) > 1e-3 {
			t.Errorf("step %d: %.4f kW, want %.4f", step, got, want)
		}
		if tan := imag(in.State.Load[0]) / real(in.State.Load[0]); math.Abs(tan-math.Tan(math.Acos(0.95))) > 1e-6 {
			t.Errorf("step %d: tangent %.6f", step, tan)
		}
	}
	if len(e.Plan.Mended) != 1 || e.Plan.Mended[0].Count != 4 || !strings.Contains(e.Plan.Mended[0].Rule, "straight line") {
		t.Errorf("mended: %+v", e.Plan.Mended)
	}
	if _, err := e.Run(context.Background()); err != nil {
		t.Fatal(err)
	}
}

// Meters without files, a meter tied twice, a meter without data and an unknown load
// are told at their row.
func TestMeterFaults(t *testing.T) {
	for _, tt := range []struct {
		name, ties, want string
	}{
		{"tied twice", "meter,load\nm1,farm\nm1,other\n", "feeder/meters.csv:3"},
		{"no data", "meter,load\nm2,farm\n", `meter "m2" has no data`},
		{"unknown load", "meter,load\nm1,farn\n", `no load "farn"; did you mean "farm"?`},
	} {
		f := metered(map[string]string{"feeder/meters.csv": tt.ties, "feeder/loads.csv": "load,node,phases,real [kW]\nfarm,end,ABC,300\n"})
		st, err := feeder.Open(f, "")
		if err == nil {
			_, err = sim.Prepare(st, sim.Options{})
		}
		if err == nil || !strings.Contains(err.Error(), tt.want) {
			t.Errorf("%s: got %v, want %q", tt.name, err, tt.want)
		}
	}
}
