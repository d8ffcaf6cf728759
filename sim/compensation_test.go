package sim_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"strconv"
	"strings"
	"testing"
	"time"

	"yearflow/devices"
	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/results"
)

// measuredBy is what the first action of each device saw.
func measuredBy(t *testing.T, w *witness) map[string]float64 {
	out := map[string]float64{}
	for _, a := range w.actions {
		f := strings.Fields(a)
		v, err := strconv.ParseFloat(f[len(f)-3], 64)
		if err != nil {
			t.Fatal(err)
		}
		if _, ok := out[f[1]]; !ok {
			out[f[1]] = v
		}
	}
	return out
}

// Kersting, Distribution System Modeling and Analysis, ch. 7, line-drop compensator
// (values recalled, reproduced by hand): 2,500 kVA at 0.9 lagging on 4.16 kV draw
// 346.97 A ∠−25.84°. PT 20, CT 700, R' + jX' = 10.5 + j31.5 V. The relay sees 109.24 V,
// and (119 − 109.24)/0.75 = 13.02 tells 13 raises. Here the load stands at the unit and
// keeps its power, so that at tap t, r = 1 + 0.00625·t, the relay sees
//
//	|120.089·r − (10.5 + j31.5)·(346.97/r)∠−25.84°/700|
//
// 118.91 V at 12 and 119.72 V at 13 (the latter as published for type A).
func TestLineDropCompensator(t *testing.T) {
	f := folder(inputs{step: time.Hour, steps: 1, volts: []float64{120}},
		"source.csv", "node,nominal [kV]\nS,4.16\n",
		"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR,S,X,ABC,20,700\n",
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],ldc r [V],ldc x [V]\nR,all,120,2,30,10.5,31.5\n",
		"loads.csv", "load,node,phases,real [kW],power factor\nmill,X,ABC,2250,0.9\n")
	w, _ := walk(t, f, sim.Options{})
	var want []string
	for tap := range 14 {
		r, waited := 1+0.00625*float64(tap), 5
		if tap == 0 {
			waited = 30
		}
		relay := cmplx.Abs(complex(4160/math.Sqrt(3)/20*r, 0) - (10.5+31.5i)*cmplx.Rect(2500/(math.Sqrt(3)*4.16)/r, -math.Acos(0.9))/700)
		if published := map[int]float64{0: 109.24, 13: 119.72}[tap]; published != 0 && math.Abs(relay-published) > 0.005 {
			t.Errorf("the formula gives %.3f V at tap %d, published %v", relay, tap, published)
		}
		for _, p := range "ABC" {
			if tap == 13 {
				break // inside
			}
			want = append(want, fmt.Sprintf("%d R.%c %d %d band low %.3f 119 %d", 30+5*tap, p, tap, tap+1, relay, waited))
		}
	}
	w.want(strings.Join(want, "\n"))
	if last := w.spans[len(w.spans)-1]; !last.settled || last.devices[0].OutOfBand || last.taps[0] != 13 {
		t.Errorf("at the end %+v, want 13 raises and inside the band", last)
	}
}

// With the line itself, 0.3 + j0.9 ohm, between the regulator and the load centre the
// relay sees the load centre's voltage on its own base: the purpose of the thing.
func TestCompensatorSeesTheLoadCentre(t *testing.T) {
	f := folder(inputs{step: time.Hour, steps: 1, volts: []float64{120}},
		"source.csv", "node,nominal [kV]\nS,4.16\n",
		"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR,S,X,ABC,20,700\n",
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],ldc r [V],ldc x [V]\nR,all,120,2,30,10.5,31.5\n",
		"sections.csv", "section,from,to,phases,length [km],construction\nL,X,Y,ABC,1,line\n",
		"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nline,sequence,0.3,0.9,0.3,0.9\n",
		"loads.csv", "load,node,phases,real [kW],power factor\na,Y,A,500,0.9\nb,Y,B,400,0.95\nc,Y,C,600,0.85\n")
	e := prepare(t, f, "", sim.Options{})
	in, err := e.Solve(0, sim.Positions{Given: true})
	if err != nil || in.Status != results.OK {
		t.Fatal(err, in.Status)
	}
	want := map[string]float64{}
	for _, p := range "ABC" {
		want["R."+string(p)] = cmplx.Abs(voltageAt(t, e, in.State, "Y", string(p))) / 20
	}
	w, _ := attend(t, e)
	for name, got := range measuredBy(t, w) {
		if math.Abs(got-want[name]) > 5e-6 {
			t.Errorf("%s sees %v V, the load centre has %v V", name, got, want[name])
		}
	}
	if len(measuredBy(t, w)) != 3 {
		t.Error("not all acted")
	}
}

// spy is a control of one's own that only looks.
type spy struct{ seen []sim.Reading }

func (s *spy) Position() int                                         { return 0 }
func (s *spy) Observe(r sim.Reading, _ devices.Time)                 { s.seen = append(s.seen, r) }
func (s *spy) Due() devices.Time                                     { return devices.Never }
func (s *spy) Act(devices.Time) (a devices.Action)                   { return a }
func (s *spy) Drop()                                                 {}
func (s *spy) Forget()                                               {}
func (s *spy) State(sim.Reading) (d results.DeviceState, stand bool) { return d, false }

// Units across pairs: each regulates the voltage of its pair and measures the line
// current of the pair's first phase, turned by +30° for AB, BC, CA and by −30° for BA,
// CB, AC (common practice; `ldc rotation` replaces it). R, X 6 and 4 V, CT 100.
func TestPairsThroughTheEngine(t *testing.T) {
	letters := map[byte]feeder.Phase{'A': feeder.A, 'B': feeder.B, 'C': feeder.C}
	turn := map[string]float64{"AB": 30, "BC": 30, "CA": 30, "BA": -30, "CB": -30, "AC": -30}
	for connection, pairs := range map[string][]string{"open-delta AB-CB": {"AB", "CB"}, "open-delta BC-AC": {"BC", "AC"},
		"open-delta CA-BA": {"CA", "BA"}, "closed-delta": {"AB", "BC", "CA"}, "wye": {"A", "B", "C"}} {
		for _, own := range []string{"", "12"} {
			t.Run(connection+own, func(t *testing.T) {
				pt := "104"
				if connection == "wye" {
					pt = "60"
				}
				f := folder(inputs{step: time.Hour, steps: 1, volts: []float64{120}},
					"regulators.csv", "regulator,from,to,phases,connection,pt ratio,ct primary [A]\nR,S,X,ABC,"+connection+","+pt+",100\n",
					"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],ldc r [V],ldc x [V],ldc rotation [deg]\nR,all,130,2,30,6,4,"+own+"\n",
					"sections.csv", "section,from,to,phases,length [km],construction\nL,X,Y,ABC,2,line\n",
					"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nline,sequence,0.2,0.4,0.5,1.2\n",
					"loads.csv", "load,node,phases,connection,real [kW],power factor\na,Y,A,wye,400,0.9\nb,Y,B,wye,300,0.97\nc,Y,C,wye,500,-0.95\nd,Y,AB,delta,250,0.8\n")
				e := prepare(t, f, "", sim.Options{})
				in, err := e.Solve(0, sim.Positions{Given: true})
				if err != nil || in.Status != results.OK {
					t.Fatal(err, in.Status)
				}
				line := e.Plan.Network.ElementsOf(network.Section, 0)[0]
				at := e.Plan.Network.Elements[line].Terminals
				current := func(p byte) complex128 {
					x, _ := e.Study.Model.NodeIndex("X")
					for k, u := range at {
						if u == e.Plan.Network.At[x][letters[p]] {
							return in.State.Flow[e.Plan.Network.Offsets[line]+k]
						}
					}
					t.Fatalf("no phase %c at X", p)
					return 0
				}
				ratio, want, volts, amperes := parse(t, pt), map[string]float64{}, map[string]complex128{}, map[string]complex128{}
				for _, p := range pairs {
					angle := turn[p]
					if own != "" {
						angle = 12
					}
					v, i := voltageAt(t, e, in.State, "X", p), current(p[0])
					volts["R."+p], amperes["R."+p] = v, i
					want["R."+p] = cmplx.Abs(v/complex(ratio, 0) - (6+4i)*cmplx.Rect(1, angle*math.Pi/180)*i/100)
				}
				w, _ := attend(t, e)
				got := measuredBy(t, w)
				for name := range want {
					if math.Abs(got[name]-want[name]) > 5e-6 {
						t.Errorf("%s sees %v V, want %v V", name, got[name], want[name])
					}
					// And so does a control of one's own in its place.
					look := &spy{}
					own := prepare(t, f, "", sim.Options{Controls: map[string]sim.Controller{name: look}})
					attend(t, own)
					if r := look.seen[0]; cmplx.Abs(r.Volts-volts[name]) > 1e-4 || cmplx.Abs(r.Amperes-amperes[name]) > 1e-5 {
						t.Errorf("%s: %v V and %v A, want %v and %v", name, r.Volts, r.Amperes, volts[name], amperes[name])
					}
				}
				if len(got) != len(pairs) {
					t.Errorf("%d units acted, want %d", len(got), len(pairs))
				}
			})
		}
	}
}
