package sim_test

import (
	"math"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/feeder"
)

// The energy of a month is taken by its days inside the period, and that is said where they are not all of them:
// a week's study would else carry a month's energy without a word.
func TestEnergyOfAMonthInPart(t *testing.T) {
	for _, tt := range []struct {
		name, start, end, want string
		kw                     float64
	}{
		{"part", "2025-01-15", "2025-02-01", "feeder/loads.csv:2: load \"l\": the period holds 408 of the 744 hours of 2025-01, and its energy of energies.csv is spread over those alone", 7440.0 / 408},
		{"whole", "2025-01-01", "2025-02-01", "", 10},
	} {
		t.Run(tt.name, func(t *testing.T) {
			st, err := feeder.Open(fstest.MapFS{
				"study.toml":          {Data: []byte("[period]\nstart = " + tt.start + "\nend = " + tt.end + "\nstep = \"1h\"\nzone = \"UTC\"\n")},
				"feeder/source.csv":   {Data: []byte("node,nominal [kV]\nsub,12.47\n")},
				"feeder/loads.csv":    {Data: []byte("load,node,phases\nl,sub,ABC\nm,sub,A\n")},
				"feeder/energies.csv": {Data: []byte("load,month,energy [kWh]\nl,2025-01,7440\nm,2025-01,0\n")},
			}, "")
			if err != nil {
				t.Fatal(err)
			}
			e, err := sim.Prepare(st, sim.Options{})
			if err != nil {
				t.Fatal(err)
			}
			var got []string
			for _, w := range e.Warnings {
				if strings.Contains(w.Error(), "energ") {
					got = append(got, w.Error())
				}
			}
			if strings.Join(got, "\n") != tt.want {
				t.Errorf("got %q, want %q", got, tt.want)
			}
			solved, err := e.Solve(0, sim.Positions{})
			if err != nil {
				t.Fatal(err)
			}
			if kw := real(solved.State.Load[0]) / 1000; math.Abs(kw-tt.kw) > 1e-9 {
				t.Errorf("%g kW, want %g", kw, tt.kw)
			}
		})
	}
}
