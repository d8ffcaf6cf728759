package sim_test

import (
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
)

// anyStudy is a feeder with two banks of regulators and two capacitors, whose settings,
// loads and source are drawn at random; inputs are constant over two hours. Everything
// that an hourly run meets is in it: cascades, both timers, limits, lockouts, overrides,
// daily limits, clocks, and devices that hunt.
func anyStudy(seed uint64, step time.Duration) fstest.MapFS {
	r := rand.New(rand.NewPCG(seed, 11))
	between := func(a, b float64) float64 { return a + (b-a)*r.Float64() }
	pick := func(words ...string) string { return words[r.IntN(len(words))] }
	volts, load := between(112, 126), between(0.2, 1.5)
	var regs, caps strings.Builder
	row := func(unit string, set float64) {
		limit := ","
		if r.IntN(2) == 0 {
			limit = fmt.Sprintf("%.3f,%.3f", between(122, 125), between(112, 116))
		}
		fmt.Fprintf(&regs, "%s,%.3f,%.3f,%.9f,%.9f,%s,%.3f,%.3f,%s,%d\n", unit, set, between(0.6, 3), between(5, 120), between(1, 40),
			pick("restart", "integrate"), between(0, 6), between(0, 4), limit, r.IntN(9)-4)
	}
	for _, p := range "ABC" {
		row("R1,"+string(p), between(118, 123))
	}
	row("R2,C", between(118, 123)) // ganged
	fmt.Fprintf(&caps, "C1,voltage,%s,,%.3f,%.3f,,,,,%.9f,%.9f,%d\n", pick("A", "B", "C"), between(116, 119), between(120, 125), between(2, 300), between(0, 600), 1+r.IntN(9))
	if r.IntN(2) == 0 {
		fmt.Fprintf(&caps, "C2,kvar,,L2,%.3f,%.3f,%.2f,%.2f,,,%.9f,%.9f,\n", between(110, 114), between(124, 127), between(50, 200), between(-300, -100), between(2, 200), between(0, 400))
	} else {
		fmt.Fprintf(&caps, "C2,time,,,%.3f,%.3f,,,00:%02d,01:%02d,%.9f,%.9f,\n", between(110, 114), between(124, 127), r.IntN(59), r.IntN(59), between(2, 200), between(0, 400))
	}
	return folder(inputs{step: step, steps: int(2 * time.Hour / step), volts: []float64{volts}, load: []float64{load}},
		"regulators.csv", "regulator,from,to,phases,ganged,pt ratio,ct primary [A],type\nR1,S,X,ABC,no,60,200,A\nR2,Y,Z,ABC,yes,60,100,B\n",
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],tap time [s],timer,ldc r [V],ldc x [V],limit high [V],limit low [V],tap\n"+regs.String(),
		"sections.csv", "section,from,to,phases,length [km],construction\nL1,X,Y,ABC,4,line\nL2,Z,W,ABC,3,line\n",
		"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]\nline,sequence,0.2,0.4,0.5,1.2,3,2\n",
		"capacitors.csv", fmt.Sprintf("capacitor,node,phases,size [kvar],state\nC1,Y,ABC,%d,%s\nC2,W,ABC,%d,%s\n", 300+300*r.IntN(4), pick("open", "closed"), 300, pick("open", "closed")),
		"capacitor-settings.csv", "capacitor,control,phase,watched section,voltage on [V],voltage off [V],kvar on [kvar],kvar off [kvar],time on,time off,delay [s],lockout [s],daily limit\n"+caps.String(),
		"loads.csv", "load,node,phases,connection,real [kW],power factor,zip,profile\na,Y,ABC,wye,1200,0.9,power,load\nb,W,A,wye,300,0.92,current,load\nc,W,BC,delta,400,0.85,power,load\nd,W,C,wye,200,0.95,impedance,load\n")
}

// Whatever the settings, the same constant inputs give the same actions at the same
// nanoseconds, by the hour, by the minute and in steps of 5 s, with power in balance in
// every interval.
func TestStepLengthNeverMatters(t *testing.T) {
	actions, seeds := 0, uint64(40)
	if testing.Short() {
		seeds = 8
	}
	for seed := range seeds {
		hour, out := walk(t, anyStudy(seed, time.Hour), sim.Options{})
		actions += len(hour.actions)
		for _, step := range []time.Duration{time.Minute, 5 * time.Second} {
			w, o := walk(t, anyStudy(seed, step), sim.Options{})
			for i := range max(len(w.actions), len(hour.actions)) {
				if i >= len(w.actions) || i >= len(hour.actions) || w.times[i] != hour.times[i] || !agrees(w.actions[i], hour.actions[i]) {
					t.Errorf("seed %d, steps of %v: %d actions, by the hour %d; the first that differs is %d:\n%s\n%s", seed, step, len(w.actions), len(hour.actions), i,
						strings.Join(w.actions[i:min(i+1, len(w.actions))], ""), strings.Join(hour.actions[i:min(i+1, len(hour.actions))], ""))
					break
				}
			}
			if fmt.Sprint(o.Hunting) != fmt.Sprint(out.Hunting) {
				t.Errorf("seed %d, steps of %v: hunting %v, by the hour %v", seed, step, o.Hunting, out.Hunting)
			}
			// Settled time is the same too.
			if a, b := hour.settling(), w.settling(); a-b > 1e-6 || b-a > 1e-6 {
				t.Errorf("seed %d, steps of %v: %v s are settling, by the hour %v s", seed, step, b, a)
			}
		}
	}
	t.Logf("%d actions in %d studies", actions, seeds)
	if actions < 10*int(seeds) {
		t.Errorf("only %d actions", actions)
	}
}

// settling adds up the seconds that are not settled.
func (w *witness) settling() (sum float64) {
	for _, s := range w.spans {
		if !s.settled {
			sum += s.to - s.from
		}
	}
	return sum
}
