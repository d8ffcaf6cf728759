package sim_test

import (
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
	"yearflow/sim/results"
)

// A step is low only if its last interval is. Source 82.8 V (0.69 p.u.) behind the
// regulator with a load of constant power; the corner is 84 V, delay 90 s, steps of a
// minute. In a low step the clocks run and the controls act:
//
//	 0 s  82.8 V: low at the end of the first step
//	90 s  → 1: 83.3175    95 s  → 2: 83.835    100 s  → 3: 84.3525: cured, the step is ok
//	105 s → 4: 84.87 (the band is met only at a stop of 4)
//
// With a highest tap of 2 it stays low.
func TestLowStep(t *testing.T) {
	run := func(highest, zip string) *witness {
		w, _ := walk(t, folder(inputs{step: time.Minute, steps: 4, volts: []float64{82.8, 82.8, 82.8, 120}}, "regulators.csv", oneRegulator,
			"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],highest tap\nR,A,120,2,90,"+highest+"\n",
			"loads.csv", "load,node,phases,real [kW],zip\nhouse,X,A,10,"+zip+"\n"), sim.Options{})
		return w
	}
	statuses := func(w *witness) (out [4]string) {
		for i, s := range w.steps {
			out[i] = s.Status.String() + " " + s.Where
		}
		return out
	}
	w := run("4", "power")
	w.want(`
		90 R.A 0 1 band low 82.8 119 90
		95 R.A 1 2 band low 83.3175 119 5
		100 R.A 2 3 band low 83.835 119 5
		105 R.A 3 4 band low 84.3525 119 5`)
	if got, want := statuses(w), [4]string{"low X.A", "ok ", "ok ", "ok "}; got != want {
		t.Errorf("steps are %q, want %q", got, want)
	}
	w = run("2", "power")
	if got, want := statuses(w), [4]string{"low X.A", "low X.A", "low X.A", "ok "}; got != want || len(w.actions) != 2 {
		t.Errorf("steps are %q after %q, want %q", got, w.actions, want)
	}
	// A load of constant impedance is always served as asked.
	w = run("2", "impedance")
	if got, want := statuses(w), [4]string{"ok ", "ok ", "ok ", "ok "}; got != want {
		t.Errorf("steps are %q, want %q", got, want)
	}
}

// On the corner itself, 0.7 p.u. or 84 V, a load is served as asked; and one whose
// profile is zero counts all the same.
func TestLowCorner(t *testing.T) {
	for _, tt := range []struct {
		volts float64
		want  results.Status
	}{{84, results.OK}, {83.9999, results.Low}} {
		w, _ := walk(t, folder(inputs{step: time.Minute, steps: 1, volts: []float64{tt.volts}, load: []float64{0}},
			"regulators.csv", oneRegulator, "loads.csv", "load,node,phases,real [kW],profile\nhouse,X,A,10,load\n"), sim.Options{})
		if got := w.steps[0].Status; got != tt.want {
			t.Errorf("%v V: %v, want %v", tt.volts, got, tt.want)
		}
	}
}

// resonant is a feeder without a solution at load 1: a load of constant impedance that
// is a capacitance of just the 10 ohm of the section before it, 7,200²/10 = 5,184 kvar:
//
//	V = V0 + 10·(5184000/7200²)·V = V0 + V
func resonant(load []float64, volts []float64, pairs ...string) fstest.MapFS {
	return folder(inputs{step: time.Minute, steps: len(load), volts: volts, load: load}, append([]string{
		"sections.csv", "section,from,to,phases,length [km],construction\nL,S,M,A,10,coil\n",
		"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\ncoil,sequence,0,1,0,1\n",
		"loads.csv", "load,node,phases,real [kW],reactive [kvar],zip,profile\nfilter,M,A,0,-5184,impedance,load\n",
		"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR,M,X,A,60,100\n",
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s]\nR,A,120,2,90\n"}, pairs...)...)
}

// An unsolved step drops requests and leaves positions; the next one is as if nothing
// had been asked. Source 118 V, delay 90 s, steps of a minute:
//
//	  0 s  118: asks, due at 90
//	 60 s  no solution: dropped
//	120 s  118: asks again, due at 210       210 s  → 1: 118.7375    215 s  → 2: 119.475
//	240 s  no solution: the tap stays at 2
//	300 s  ok at 2
func TestUnsolvedStep(t *testing.T) {
	w, _ := walk(t, resonant([]float64{0, 1, 0, 0, 1, 0}, []float64{118}), sim.Options{})
	w.want(`
		210 R.A 0 1 band low 118 119 90
		215 R.A 1 2 band low 118.7375 119 5`)
	for i, s := range w.steps {
		want := results.OK
		if i == 1 || i == 4 {
			want = results.Unsolved
		}
		if s.Status != want || (s.Last == nil) != (want == results.Unsolved) {
			t.Errorf("step %d is %v at %q, want %v", i, s.Status, s.Where, want)
		}
		if want == results.Unsolved && s.Where == "" {
			t.Errorf("step %d does not say where", i)
		}
	}
	for _, s := range w.spans {
		if s.from >= 60 && s.from < 120 || s.from >= 240 && s.from < 300 {
			t.Errorf("an interval from %v s, where nothing is solved", s.from)
		}
	}
	if last := w.spans[len(w.spans)-1]; last.taps[0] != 2 || !last.settled {
		t.Errorf("at the end: %+v", last)
	}
}

// A capacitor whose closing makes a resonance, the 10 ohm before it and 5,184 kvar: there
// is no solution from 60 s on. The step has its first interval and its action, and is
// unsolved at the bank; so are the later ones, since nothing moves without a solution.
func TestResonanceInsideAStep(t *testing.T) {
	w, _ := walk(t, folder(inputs{step: 10 * time.Minute, steps: 2, volts: []float64{120}},
		"sections.csv", "section,from,to,phases,length [km],construction\nL,S,M,A,10,coil\n",
		"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\ncoil,sequence,0,1,0,1\n",
		"capacitors.csv", "capacitor,node,phases,size [kvar],state\nC,M,A,5184,open\n",
		"capacitor-settings.csv", "capacitor,control,time on,time off\nC,time,00:00,00:12\n"), sim.Options{})
	w.want("60 C 0 1 time 0.016667 0 60")
	for i, s := range w.steps {
		if s.Status != results.Unsolved || s.Where != "M.A" || s.Actions != 1-i {
			t.Errorf("step %d: %v at %q with %d actions, want unsolved at M.A", i, s.Status, s.Where, s.Actions)
		}
	}
	if len(w.spans) != 1 || w.spans[0].to != 60 {
		t.Errorf("intervals %+v, want one up to 60 s", w.spans)
	}
}
