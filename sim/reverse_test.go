package sim_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/results"
)

// reverseSheet is a row of the settings sheet: forward 120 V ± 1 V, 30 s, backward
// 122 V ± 1 V, 20 s, 5 s between steps, and 2 % of 100 A.
func reverseSheet(mode string) string {
	return "regulator,phase,set [V],bandwidth [V],delay [s],reverse,reverse threshold [%],reverse set [V],reverse delay [s]\n" +
		"R,all,120,2,30," + mode + ",2,122,20\n"
}

// backfeed is S ─ R ─ X with a stiff source, 144 kW of load at X (20 A at 7,200 V) and
// a generator that gives by the step what output says, kW.
func backfeed(step time.Duration, mode string, volts, output []float64, more ...string) fstest.MapFS {
	return folder(inputs{step: step, steps: len(output), volts: volts, more: "output [kW]", value: output},
		append([]string{"regulators.csv", oneRegulator, "regulator-settings.csv", reverseSheet(mode),
			"loads.csv", "load,node,phases,real [kW]\nmill,X,A,144\n",
			"generators.csv", "generator,node,phases,kind,rating [kVA],profile\nsun,X,A,solar,400,output\n"}, more...)...)
}

// sequence writes the steps of one sequence: from one tap to another, delay s after begin
// and then every 5 s. measured gives what is seen at a tap.
func sequence(begin, delay, from, to int, why, set string, measured func(tap int) float64) string {
	var b strings.Builder
	step := 1
	if to < from {
		step = -1
	}
	for at, waited, tap := begin+delay, delay, from; tap != to; at, waited, tap = at+5, 5, tap+step {
		fmt.Fprintf(&b, "%d R.A %d %d %s %.6f %s %d\n", at, tap, tap+step, why, measured(tap), set, waited)
	}
	return b.String()
}

// The well-known runaway. The source is upstream and stiff, at 120 V. In the second
// hour 360 kW of generation feed 216 kW back. A control that follows takes the source's
// side for the one to regulate: it sees 120 V, wants 121 V and more, and lowers the
// tap, which raises a source side that is fed from the other end and does nothing to a
// stiff one. 20 s and 15 times 5 s later it stands at its lowest tap, and the customers
// at X have 120·0.9 = 108 V. In the third hour power flows forward again and it works
// itself back, from 108 V to 119.25 V at tap −1.
func TestReverseRunaway(t *testing.T) {
	volts, output := []float64{120}, []float64{0, 360, 0}
	load := func(tap int) float64 { return 120 * (1 + 0.00625*float64(tap)) }
	source := func(int) float64 { return 120 }
	runaway := sequence(3600, 20, 0, -16, "band low", "121", source) + sequence(7200, 30, -16, -1, "band low", "119", load)
	for mode, want := range map[string]string{
		"none": "", "stay": sequence(3600, 20, 0, 2, "band low", "121", load) + sequence(7200, 30, 2, 1, "band high", "121", load),
		"follow": runaway, "forward only": "", "idle": "", "neutral": "",
		// It regulates the source's side while no power flows forward, and in none of the
		// hours in which it does: the runaway without a way back.
		"reverse only": sequence(3600, 20, 0, -16, "band low", "121", source),
	} {
		t.Run(mode, func(t *testing.T) {
			w, _ := walk(t, backfeed(time.Hour, mode, volts, output), sim.Options{})
			w.want(want)
			lowest, back := 0, 0.0
			for _, s := range w.spans {
				lowest = min(lowest, s.taps[0])
				if s.devices[0].Reverse {
					back += s.to - s.from
				}
			}
			if ran := strings.Contains(want, "-15 -16"); ran != (lowest == -16) || back != 3600 {
				t.Errorf("the lowest tap is %d, power flows back for %v s", lowest, back)
			}
		})
	}
	// Above its band the other way: at 124 V it wants 123 V and less, and raises, up to
	// 136.4 V at X.
	w, _ := walk(t, backfeed(time.Hour, "follow", []float64{124}, []float64{360}), sim.Options{})
	w.want(sequence(0, 20, 0, 16, "band high", "123", func(int) float64 { return 124 }))
}

// The same on a feeder with impedance: 12.47 kV behind 90 MVA, 4 km of line to a bank
// of three, solar behind it that outruns the load at noon, 119.5 V at the source. With `follow` every unit
// ends at a limit and the customers' voltage is outside any range; with `stay` and with
// `none` nothing of the kind happens.
func TestReverseRunawayOnAFeeder(t *testing.T) {
	output := make([]float64, 24)
	for h := range output {
		output[h] = 1500 * math.Max(0, math.Sin(math.Pi*float64(h-6)/12))
	}
	run := func(mode string) *witness {
		w, _ := walk(t, folder(inputs{step: time.Hour, steps: 24, volts: []float64{119.5}, more: "output [kW]", value: output},
			"source.csv", "node,nominal [kV],voltage profile,short circuit 3ph [MVA],x/r 3ph,short circuit 1ph [MVA],x/r 1ph\nS,12.47,volts,90,8,80,7\n",
			"sections.csv", "section,from,to,phases,length [km],construction\nL,S,M,ABC,4,line\nT,X,Y,ABC,3,line\n",
			"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nline,sequence,0.2,0.4,0.5,1.2\n",
			"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR,M,X,ABC,60,100\n",
			"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],reverse\nR,all,122,2,30,"+mode+"\n",
			"loads.csv", "load,node,phases,real [kW],power factor\nmill,Y,ABC,600,0.95\n",
			"generators.csv", "generator,node,phases,kind,rating [kVA],profile\nsun,Y,ABC,solar,1500,output\n"), sim.Options{})
		return w
	}
	span := func(w *witness) (low, high int) {
		for _, s := range w.spans {
			for _, tap := range s.taps {
				low, high = min(low, tap), max(high, tap)
			}
		}
		return low, high
	}
	for _, mode := range []string{"none", "stay", "idle"} {
		if low, high := span(run(mode)); low < -6 || high > 6 {
			t.Errorf("%s: taps from %d to %d", mode, low, high)
		}
	}
	// Power flows back from 8 h on: the source's side stands at 119.1 V, short of 121 V,
	// and a lower of the tap moves it by some hundredths of a millivolt.
	if low, high := span(run("follow")); low > -16 && high < 16 {
		t.Errorf("follow: taps from %d to %d, want a limit", low, high)
	}
}

// Neutral: 216 kW flow back from the first second on. At tap 2 there are 7,290 V at X
// and so −29.62963 A, at tap 1 7,245 V and −29.81366 A; the threshold is −2 A. From the
// second step on power flows forward: 119.25 V at neutral are inside.
func TestReverseNeutral(t *testing.T) {
	settings := "regulator,phase,set [V],bandwidth [V],delay [s],reverse,tap\nR,A,120,2,30,neutral,2\n"
	w, _ := walk(t, backfeed(time.Hour, "", []float64{120}, []float64{360, 0}, "regulator-settings.csv", settings), sim.Options{})
	w.want("10 R.A 2 1 reverse -29.62963 -2 10\n15 R.A 1 0 reverse -29.81366 -2 5\n")
	// The ten seconds are a request: what is before them is settling, and so is the run.
	for _, s := range w.spans {
		if s.settled != (s.from >= 15) {
			t.Errorf("from %v s: settled %v", s.from, s.settled)
		}
	}
	// Settled at the start it stands at neutral before the first second.
	w, _ = walk(t, settled(backfeed(time.Hour, "", []float64{120}, []float64{360, 0}, "regulator-settings.csv", settings)), sim.Options{})
	w.want("")
	if w.spans[0].taps[0] != 0 {
		t.Errorf("after start-up it stands at %d", w.spans[0].taps[0])
	}
}

// A feeder that is fed from the other end: the source stands on the load side of the
// bank, at 118 V, and 144 kW of constant current (20 A) at the bank's source side M.
// `follow` keeps that side at 120 V ± 1 V with 3 V of compensation at 100 A:
//
//	V_relay = 118/ratio(tap) − 3·20/100 = 117.4 V at tap 0
//
// and a lower of the tap raises it by the ratio: 118/0.99375 − 0.6 = 118.142138 V,
// 118/0.9875 − 0.6 = 118.893671 V, 118/0.98125 − 0.6 = 119.654777 V, inside.
func TestReverseFedFromTheOtherEnd(t *testing.T) {
	f := folder(inputs{step: time.Hour, steps: 1, volts: []float64{118}},
		"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR,M,S,A,60,100\n",
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],reverse,reverse set [V],reverse ldc r [V]\nR,A,126,2,30,follow,120,3\n",
		"loads.csv", "load,node,phases,real [kW],zip\nmill,M,A,144,current\n")
	w, _ := walk(t, f, sim.Options{})
	w.want("30 R.A 0 -1 band low 117.4 119 30\n35 R.A -1 -2 band low 118.142138 119 5\n40 R.A -2 -3 band low 118.893671 119 5\n")
}

// The edge of the threshold: 14.4 kW of constant current are 2 A, 2 % of 100 A, and the
// edge is not flow: `idle` holds at a low voltage. A millionth more is flow.
func TestReverseThresholdInTheEngine(t *testing.T) {
	f := folder(inputs{step: time.Hour, steps: 3, volts: []float64{118}, load: []float64{1, 1 + 1e-6, 0.99}},
		"regulators.csv", oneRegulator, "regulator-settings.csv", reverseSheet("idle"),
		"loads.csv", "load,node,phases,real [kW],zip,profile\nmill,X,A,14.4,current,load\n")
	w, _ := walk(t, f, sim.Options{})
	w.want("3630 R.A 0 1 band low 118 119 30\n3635 R.A 1 2 band low 118.7375 119 5\n")
}

// A ganged bank has the direction of its watched phase: generation on A alone.
func TestReverseGanged(t *testing.T) {
	for watched, want := range map[string]string{"A": "", "B": "30 R.B 0 1 band low 118 119 30\n35 R.B 1 2 band low 118.7375 119 5\n"} {
		f := folder(inputs{step: time.Hour, steps: 1, volts: []float64{118}},
			"regulators.csv", "regulator,from,to,phases,ganged,pt ratio,ct primary [A]\nR,S,X,ABC,yes,60,100\n",
			"regulator-settings.csv", strings.Replace(reverseSheet("forward only"), "R,all", "R,"+watched, 1),
			"loads.csv", "load,node,phases,real [kW]\nmill,X,ABC,300\n",
			"generators.csv", "generator,node,phases,kind,rating [kVA],real [kW]\nsun,X,A,solar,400,200\n")
		w, _ := walk(t, f, sim.Options{})
		w.want(want)
	}
}

// The length of a step changes nothing: three hours in steps of an hour, of a minute
// and of 5 s have the same actions at the same nanosecond, in every mode.
func TestReverseWhateverTheStep(t *testing.T) {
	volts, output := []float64{118.2, 121.5, 119}, []float64{0, 360, 144, 360, 0}
	stretch := func(x []float64, n int) (out []float64) {
		for _, v := range x {
			for range n {
				out = append(out, v)
			}
		}
		return out
	}
	for _, mode := range []string{"none", "forward only", "reverse only", "idle", "follow", "neutral", "stay"} {
		var first []string
		for _, n := range []int{1, 60, 720} {
			w, _ := walk(t, backfeed(time.Hour/time.Duration(n), mode, stretch(volts, n), stretch(output, n)), sim.Options{})
			if first == nil {
				if first = w.actions; len(first) == 0 {
					t.Errorf("%s: no action at all", mode)
				}
				continue
			}
			same(t, w.actions, strings.Join(first, "\n"))
		}
	}
}

// standing is a spy on a unit that stands at a tap.
type standing struct {
	spy
	at int
}

func (s *standing) Position() int { return s.at }

// Both sides of a bank, for every connection: the voltages at either node, the current
// that leaves into the section behind it, and the one that leaves into the section
// before it, with losses and impedance in the bank.
func TestBothSidesThroughTheEngine(t *testing.T) {
	letters := map[byte]feeder.Phase{'A': feeder.A, 'B': feeder.B, 'C': feeder.C}
	for connection, pairs := range map[string][]string{"open-delta AB-CB": {"AB", "CB"}, "open-delta BC-AC": {"BC", "AC"},
		"closed-delta": {"AB", "BC", "CA"}, "wye": {"A", "B", "C"}} {
		t.Run(connection, func(t *testing.T) {
			f := folder(inputs{step: time.Hour, steps: 1, volts: []float64{120}},
				"regulators.csv", "regulator,from,to,phases,connection,pt ratio,ct primary [A],rating [A],no-load loss [W],load loss [W],impedance [%]\nR,M,X,ABC,"+connection+",104,100,200,300,1500,0.5\n",
				"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],tap\nR,all,120,2,30,5\n",
				"sections.csv", "section,from,to,phases,length [km],construction\nK,S,M,ABC,2,line\nL,X,Y,ABC,2,line\n",
				"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nline,sequence,0.2,0.4,0.5,1.2\n",
				"loads.csv", "load,node,phases,connection,real [kW],power factor\na,Y,A,wye,400,0.9\nb,Y,B,wye,300,0.97\nc,Y,C,wye,500,-0.95\nd,Y,AB,delta,250,0.8\n")
			for _, p := range pairs {
				look := &standing{at: 5}
				e := prepare(t, f, "", sim.Options{Controls: map[string]sim.Controller{"R." + p: look}})
				in, err := e.Solve(0, sim.Positions{Given: true})
				if err != nil || in.Status != results.OK {
					t.Fatal(err, in.Status)
				}
				into := func(section int, at string) complex128 {
					el := e.Plan.Network.ElementsOf(network.Section, section)[0]
					node, _ := e.Study.Model.NodeIndex(at)
					for k, u := range e.Plan.Network.Elements[el].Terminals {
						if u == e.Plan.Network.At[node][letters[p[0]]] {
							return in.State.Flow[e.Plan.Network.Offsets[el]+k]
						}
					}
					t.Fatalf("no phase %c at %s", p[0], at)
					return 0
				}
				volts, source := voltageAt(t, e, in.State, "X", p), voltageAt(t, e, in.State, "M", p)
				out, back := into(1, "X"), into(0, "M")
				attend(t, e)
				r := look.seen[0]
				if cmplx.Abs(r.Volts-volts) > 1e-4 || cmplx.Abs(r.SourceVolts-source) > 1e-4 || cmplx.Abs(r.Amperes-out) > 1e-5 || cmplx.Abs(r.SourceAmperes-back) > 1e-5 {
					t.Errorf("%s: %+v, want %v V and %v A, %v V and %v A", p, r, volts, out, source, back)
				}
				if cmplx.Abs(out+back) < 0.1 {
					t.Errorf("%s: the bank at tap 5 changes nothing between %v A and %v A", p, out, back)
				}
			}
		})
	}
}
