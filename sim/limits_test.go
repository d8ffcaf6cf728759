package sim_test

import (
	"fmt"
	"strings"
	"testing"
	"time"

	"yearflow/sim"
)

// The upper limit, 121.8 V with a margin of 1 V; the band is 121.5 to 123.5 V.
//
//	first hour, source 119.8 V
//	   30 s  → 1: 120.54875        35 s  → 2: 121.2975, still low; a third step would make
//	         119.8·1.01875 = 122.04625, beyond the limit: it is not asked for, all is settled
//	second hour, source 122 V: 122·1.0125 = 123.525, beyond 122.8
//	 3600 s  2 → 1 at once: 122.7625, above the limit itself
//	 3605 s  1 → 0: 122, above         3610 s  0 → −1: 121.2375, within
//	         low again, but a step up would make 122, beyond the limit
//	third hour, source 123.2 V: 123.2·0.99375 = 122.43, above the limit but within the
//	         margin, and inside the band: nothing
func TestUpperLimit(t *testing.T) {
	w, _ := walk(t, folder(inputs{step: time.Hour, steps: 3, volts: []float64{119.8, 122, 123.2}}, "regulators.csv", oneRegulator,
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],tap time [s],limit high [V],limit margin [V]\nR,A,122.5,2,30,5,121.8,1\n"), sim.Options{})
	w.want(`
		30 R.A 0 1 band low 119.8 121.5 30
		35 R.A 1 2 band low 120.54875 121.5 5
		3600 R.A 2 1 limit high 123.525 122.8 0
		3605 R.A 1 0 limit high 122.7625 121.8 5
		3610 R.A 0 -1 limit high 122 121.8 5`)
	for _, s := range w.spans {
		if want := s.from >= 35 && s.from < 3600 || s.from >= 3610; s.settled != want {
			t.Errorf("settled %v from %v s", s.settled, s.from)
		}
		// Settled and yet outside its band, where the limit holds it back.
		if want := s.from < 3600 || s.from >= 3610 && s.from < 7200; s.devices[0].OutOfBand != want {
			t.Errorf("out of band %v from %v s", s.devices[0].OutOfBand, s.from)
		}
	}
}

// The mirror: limit low 118.2 V, margin 1 V, band 116.5 to 118.5 V.
//
//	source 120.2 V    30 s  → −1: 119.44875    35 s  → −2: 118.6975; a third would make 117.94625
//	source 117.5 V  3600 s  117.5·0.9875 = 116.03125, below 117.2: → −1 at once: 116.765625
//	                3605 s  → 0: 117.5         3610 s  → 1: 118.234375, within limit and band
func TestLowerLimit(t *testing.T) {
	w, _ := walk(t, folder(inputs{step: time.Hour, steps: 2, volts: []float64{120.2, 117.5}}, "regulators.csv", oneRegulator,
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],limit low [V]\nR,A,117.5,2,30,118.2\n"), sim.Options{})
	w.want(`
		30 R.A 0 -1 band high 120.2 118.5 30
		35 R.A -1 -2 band high 119.44875 118.5 5
		3600 R.A -2 -1 limit low 116.03125 117.2 0
		3605 R.A -1 0 limit low 116.765625 117.2 5
		3610 R.A 0 1 limit low 117.5 118.2 5`)
}

// At a stop it does not ask. Source 105 V: sixteen steps from 30 s to 105 s make
// 105·1.1 = 115.5 V, which is still low. With a highest tap of 2 there are two.
func TestStops(t *testing.T) {
	run := func(columns, cells string) *witness {
		w, _ := walk(t, folder(inputs{step: time.Hour, steps: 1, volts: []float64{105}}, "regulators.csv", oneRegulator,
			"regulator-settings.csv", settings(columns, cells)), sim.Options{})
		return w
	}
	w := run("", "")
	var lines []string
	for k := range 16 {
		waited := 5
		if k == 0 {
			waited = 30
		}
		lines = append(lines, fmt.Sprintf("%d R.A %d %d band low %.7f 119 %d", 30+5*k, k, k+1, 105*(1+0.00625*float64(k)), waited))
	}
	w.want(strings.Join(lines, "\n"))
	last := w.spans[len(w.spans)-1]
	if d := last.devices[0]; !last.settled || !d.AtStop || !d.OutOfBand || last.from != 105 {
		t.Errorf("after the last step: %+v", last)
	}
	w = run(",highest tap", ",2")
	w.want(`
		30 R.A 0 1 band low 105 119 30
		35 R.A 1 2 band low 105.65625 119 5`)
	if last := w.spans[len(w.spans)-1]; !last.settled || !last.devices[0].AtStop {
		t.Errorf("at the highest tap: %+v", last)
	}
}

// A ganged bank is one device on its watched phase, B, and stands where that one's
// row says, at 3: source 115.5 V, 115.5·1.01875 = 117.665625 asks.
//
//	30 s  → 4: 115.5·1.025 = 118.3875    35 s  → 5: 115.5·1.03125 = 119.109375, inside
//
// A load on A and C, 2 ohm before the bank, moves nothing: B is looked at alone.
func TestGangedBank(t *testing.T) {
	e := prepare(t, folder(inputs{step: time.Hour, steps: 1, volts: []float64{115.5}},
		"regulators.csv", "regulator,from,to,phases,ganged,pt ratio,ct primary [A]\nLTC,M,X,ABC,yes,60,100\n",
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],tap\nLTC,B,120,2,30,3\n",
		"sections.csv", "section,from,to,phases,length [km],construction\nL,S,M,ABC,1,ohms\n", "constructions.csv", resistance,
		"loads.csv", "load,node,phases,real [kW],zip\na,X,A,100,current\nc,X,C,300,current\n"), "", sim.Options{})
	for range 2 { // the second run begins where the first did
		w, _ := attend(t, e)
		w.want(`
			30 LTC.B 3 4 band low 117.665625 119 30
			35 LTC.B 4 5 band low 118.3875 119 5`)
		for i, want := range []int{3, 4, 5} {
			if got := w.spans[i].taps; got[0] != want || got[1] != want || got[2] != want {
				t.Errorf("interval %d: taps %v, want all at %d", i, got, want)
			}
		}
		if len(w.spans[0].devices) != 1 {
			t.Errorf("%d devices, want one", len(w.spans[0].devices))
		}
	}
}

// "all" on a ganged bank watches its first phase.
func TestGangedBankWatchesTheFirst(t *testing.T) {
	w, _ := walk(t, folder(inputs{step: time.Hour, steps: 1, volts: []float64{118.5}},
		"regulators.csv", "regulator,from,to,phases,ganged,pt ratio,ct primary [A]\nLTC,S,X,ABC,yes,60,100\n",
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],tap\nLTC,all,120,2,30,-1\n"), sim.Options{})
	w.want(`
		30 LTC.A -1 0 band low 117.759375 119 30
		35 LTC.A 0 1 band low 118.5 119 5`)
	if got := w.spans[0].taps; got[0] != -1 || got[1] != -1 || got[2] != -1 {
		t.Errorf("taps %v at first, want all at -1", got)
	}
}

// A measurement on an edge is inside. Without load the relay sees the source itself;
// within 1e-7 V it counts as on the edge, and beyond it does not.
//
//	119 V to 1e-8: inside. 119 V less 2e-7: outside, and 119 V less 2e-6 as well.
//	On its way: 118.2608695652174·1.00625 = 119 V exactly, reached by one step from
//	118.26...; the request ends there.
func TestEdgeMetExactly(t *testing.T) {
	for _, tt := range []struct {
		volts float64
		want  int // actions
	}{{119, 0}, {121, 0}, {119 - 1e-8, 0}, {121 + 1e-8, 0}, {119 - 2e-7, 1}, {121 + 2e-7, 1}, {119 - 2e-6, 1}, {119.0 / 1.00625, 1}, {119.0/1.00625 - 3e-7, 2}} {
		w, _ := walk(t, folder(inputs{step: time.Hour, steps: 1, volts: []float64{tt.volts}}, "regulators.csv", oneRegulator,
			"regulator-settings.csv", settings("", "")), sim.Options{})
		if len(w.actions) != tt.want {
			t.Errorf("%.9f V: %d actions, want %d: %v", tt.volts, len(w.actions), tt.want, w.actions)
		}
	}
}

// The same edge met under load, where a solution to 1e-8 p.u. (1.2e-6 V) could fall on
// either side: constant power of unity factor at the end of 6 ohm. At Y the voltage u
// obeys u = u0 − 6·P/u; the source is set so that u is 119 V·60 exactly:
//
//	u0 = 7140 + 6·360000/7140 = 7442.521008... V
//
// The relay must see 119 V to 1e-7 V, and 1e-6 V less or more at the source must be told
// apart from it. Near the edge du/du0 = 1/(1 − 6·P/u²) = 1.0443: 1e-6 V on the 120 V
// base of the source are 1.04e-6 V at Y.
func TestEdgeUnderLoad(t *testing.T) {
	exact := (7140 + 6*360000.0/7140) / 60
	for _, tt := range []struct {
		off  float64
		want int
	}{{0, 0}, {1e-6, 0}, {-1e-6, 1}, {-3e-7, 1}} {
		w, _ := walk(t, folder(inputs{step: time.Hour, steps: 1, volts: []float64{exact + tt.off}},
			"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR,M,X,A,60,100\n",
			"regulator-settings.csv", settings("", ""),
			"sections.csv", "section,from,to,phases,length [km],construction\nL,S,M,A,5,ohms\n", "constructions.csv", resistance,
			"loads.csv", "load,node,phases,real [kW],zip\nhouse,X,A,360,power\n"), sim.Options{})
		if len(w.actions) != tt.want {
			t.Errorf("%g V off the edge: %d actions, want %d: %v", tt.off, len(w.actions), tt.want, w.actions)
		}
	}
}
