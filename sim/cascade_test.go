package sim_test

import (
	"fmt"
	"testing"
	"time"

	"yearflow/sim"
)

// A cascade S ─ R1 ─ X ═ M ─ R2 ─ Y. Between X and M stands a resistance of 1.2 ohm.
// At Y 72 kW of constant current draw 10 A × (load), in phase; through R2 they are
// ratio 2 times as many, so that on the 120 V base
//
//	V1 = V0·ratio1                    at X
//	V2 = (V1 − d·ratio2)·ratio2       at Y, with d = 1.2 ohm·10 A/60 = 0.2 V × load
const (
	cascade         = "regulator,from,to,phases,pt ratio,ct primary [A]\nR1,S,X,A,60,100\nR2,M,Y,A,60,100\n"
	cascadeSections = "section,from,to,phases,length [km],construction\nL,X,M,A,1,ohms\n"
	resistance      = "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nohms,sequence,1.2,0,1.2,0\n"
	cascadeLoad     = "load,node,phases,real [kW],zip\nhouse,Y,A,72,current\n"
)

// cascaded is the settings sheet of the two, each 120 V ± 1 V.
func cascaded(delay1, delay2 float64) string {
	return fmt.Sprintf("regulator,phase,set [V],bandwidth [V],delay [s],tap time [s]\nR1,A,120,2,%g,5\nR2,A,120,2,%g,5\n", delay1, delay2)
}

// The one nearest the source acts first (common practice): 30 s and 45 s. Source 118 V,
// load 10: 100 A, d = 2 V.
//
//	 0 s  V1 118, V2 116: both ask, due at 30 and 45
//	30 s  1 → 1: V1 118.7375, V2 116.7375
//	35 s  1 → 2: V1 119.475, inside; V2 117.475
//	45 s  2 → 1: V2 = (119.475 − 2·1.00625)·1.00625 = 118.196625
//	50 s  2 → 2: V2 = (119.475 − 2·1.0125)·1.0125 = 118.918125
//	55 s  2 → 3: V2 = (119.475 − 2·1.01875)·1.01875 = 119.639453, inside
func TestCascadeNearestFirst(t *testing.T) {
	w, _ := walk(t, folder(inputs{step: time.Hour, steps: 1, volts: []float64{118}, load: []float64{10}},
		"regulators.csv", cascade, "sections.csv", cascadeSections, "constructions.csv", resistance,
		"loads.csv", "load,node,phases,real [kW],zip,profile\nhouse,Y,A,72,current,load\n",
		"regulator-settings.csv", cascaded(30, 45)), sim.Options{})
	w.want(`
		30 R1.A 0 1 band low 118 119 30
		35 R1.A 1 2 band low 118.737 119 5
		45 R2.A 0 1 band low 117.475 119 45
		50 R2.A 1 2 band low 118.197 119 5
		55 R2.A 2 3 band low 118.918 119 5`)
}

// Equal delays: both act at the same instant, each on what it saw before; so the far
// one raises too, for what the near one was about to cure. Source 118 V, no drop.
//
//	 0 s  V1 = V2 = 118
//	30 s  both → 1: V1 118.7375, V2 118·1.00625² = 119.479609: 2 is inside
//	35 s  1 → 2: V1 119.475, V2 118·1.0125·1.00625 = 120.221719
//
// With 118.3 V: 30 s both → 1: V1 119.039375, V2 119.783...: both inside, one action each.
// And with 116 V both act together three times:
//
//	30 s  V1 116.725, V2 117.454531
//	35 s  V1 117.45, V2 116·1.0125² = 118.918125
//	40 s  V1 118.175, V2 116·1.01875² = 120.390781: 2 is inside
//	45 s  1 → 4: V1 118.9, V2 116·1.025·1.01875 = 121.129375: too high, due at 75
//	50 s  1 → 5: V1 119.625, inside; V2 116·1.03125·1.01875 = 121.867969
//	75 s  2 → 2: V2 116·1.03125·1.0125 = 121.120313
//	80 s  2 → 1: V2 116·1.03125·1.00625 = 120.372656
func TestCascadeAtOnce(t *testing.T) {
	run := func(volts float64) *witness {
		w, _ := walk(t, folder(inputs{step: time.Hour, steps: 1, volts: []float64{volts}},
			"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR1,S,X,A,60,100\nR2,X,Y,A,60,100\n",
			"regulator-settings.csv", cascaded(30, 30)), sim.Options{})
		return w
	}
	run(118).want(`
		30 R1.A 0 1 band low 118 119 30
		30 R2.A 0 1 band low 118 119 30
		35 R1.A 1 2 band low 118.737 119 5`)
	run(118.3).want(`
		30 R1.A 0 1 band low 118.3 119 30
		30 R2.A 0 1 band low 118.3 119 30`)
	w := run(116)
	w.want(`
		30 R1.A 0 1 band low 116 119 30
		30 R2.A 0 1 band low 116 119 30
		35 R1.A 1 2 band low 116.725 119 5
		35 R2.A 1 2 band low 117.455 119 5
		40 R1.A 2 3 band low 117.45 119 5
		40 R2.A 2 3 band low 118.918 119 5
		45 R1.A 3 4 band low 118.175 119 5
		50 R1.A 4 5 band low 118.9 119 5
		75 R2.A 3 2 band high 121.868 121 30
		80 R2.A 2 1 band high 121.12 121 5`)
	// Taken together: between the two of an instant there is no interval.
	if s := w.spans[1]; s.from != 30 || s.taps[0] != 1 || s.taps[1] != 1 {
		t.Errorf("after 30 s: %+v, want both at 1", s)
	}
}
