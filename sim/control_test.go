package sim_test

import (
	"context"
	"errors"
	"math"
	"slices"
	"strings"
	"testing"
	"time"

	"yearflow/devices"
	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// A watched element is measured at its from end, where everything that it loses is
// still ahead: behind the source, that is what the source delivers, be it a section, a
// switch, a regulator with losses and an impedance, or a bank with an exciting current.
func TestWatchedElements(t *testing.T) {
	constructions := "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]\nline,sequence,0.2,0.4,0.5,1.2,3,2\n"
	for name, element := range map[string][2]string{
		"section":     {"sections.csv", "section,from,to,phases,length [km],construction,rating [A]\nE,S,X,ABC,3,line,300\n"},
		"switch":      {"switches.csv", "switch,from,to,phases,state,rating [A]\nE,S,X,ABC,closed,300\n"},
		"regulator":   {"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A],rating [A],no-load loss [W],load loss [W],impedance [%]\nE,S,X,ABC,60,300,300,400,1500,0.6\n"},
		"transformer": {"transformers.csv", "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],x/r,no-load loss [W],exciting current [%]\nE,S,X,ABC,5000,12.47,4.16,Dyn1,6,10,6000,0.6\n"},
	} {
		t.Run(name, func(t *testing.T) {
			f := folder(inputs{step: time.Hour, steps: 1, volts: []float64{122}}, element[0], element[1],
				"loads.csv", "load,node,phases,real [kW],power factor\na,X,A,400,0.9\nb,X,B,250,0.95\nc,X,C,500,0.85\n",
				"capacitors.csv", "capacitor,node,phases,size [kvar],state\nC,X,ABC,150,closed\n",
				"capacitor-settings.csv", "capacitor,control,watched section,kvar on [kvar],kvar off [kvar]\nC,kvar,E,9000,-9000\n")
			if name == "section" {
				f["feeder/constructions.csv"] = text(constructions)
			}
			look := &spy{}
			e := prepare(t, f, "", sim.Options{Controls: map[string]sim.Controller{"C": look}})
			var kw, kvar, amperes float64
			meter := e.Meter()
			r := meter.NewReading()
			watch := &last{func(s *results.State) {
				meter.Read(s, r)
				kw, kvar = real(r.Source)/1000, imag(r.Source)/1000
				amperes = slices.Max(r.SourceCurrent[:])
			}}
			if _, err := e.Run(context.Background(), watch); err != nil {
				t.Fatal(err)
			}
			got := look.seen[0]
			if math.Abs(got.KW-kw) > 1e-3 || math.Abs(got.KVAR-kvar) > 1e-3 || math.Abs(got.Current-amperes) > 1e-3 {
				t.Errorf("sees %v kW, %v kvar, %v A; the source delivers %v, %v and %v", got.KW, got.KVAR, got.Current, kw, kvar, amperes)
			}
			if kw < 1100 || kvar < 300 {
				t.Errorf("the source delivers only %v kW and %v kvar", kw, kvar)
			}
		})
	}
}

// last is a Recorder that looks at the state at the end of a step.
type last struct{ see func(*results.State) }

func (l *last) Interval(*results.Interval) error { return nil }
func (l *last) Action(*results.Action) error     { return nil }
func (l *last) Step(s *results.Step) error       { l.see(s.Last); return nil }

// Power that flows back is seen as such at a unit to ground and, with the current turned
// by its pair's angle, across two phases: generation of 300 kW against a load of 100 kW
// × (load).
func TestReverseFlow(t *testing.T) {
	for _, connection := range []string{"wye", "open-delta AB-CB", "closed-delta"} {
		w, _ := walk(t, folder(inputs{step: time.Hour, steps: 2, volts: []float64{120}, load: []float64{1, 5}},
			"regulators.csv", "regulator,from,to,phases,connection,pt ratio,ct primary [A]\nR,S,X,ABC,"+connection+",104,100\n",
			"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],control\nR,all,120,2,30,held\n",
			"loads.csv", "load,node,phases,real [kW],power factor,profile\na,X,ABC,100,0.9,load\n",
			"generators.csv", "generator,node,phases,kind,rating [kVA],real [kW]\ng,X,ABC,solar,350,300\n"), sim.Options{})
		for _, s := range w.spans {
			for i, d := range s.devices {
				if want := s.from < 3600; d.Reverse != want {
					t.Errorf("%s, device %d: reverse %v from %v s", connection, i, d.Reverse, s.from)
				}
			}
		}
		if len(w.spans) != 2 {
			t.Errorf("%s: %d intervals", connection, len(w.spans))
		}
	}
}

// A step is too coarse for a regulator where the mean change from step to step exceeds
// its bandwidth, 2 V, be it that a movement falls on a step's beginning (delay and tap
// time are a step long, and it goes up at every step). 2.1 V is, 1.9 V is not.
func TestCoarseSteps(t *testing.T) {
	for _, tt := range []struct {
		change float64
		want   []string
	}{{2.1, []string{"R.A"}}, {1.9, nil}} {
		w, out := walk(t, folder(inputs{step: time.Minute, steps: 8, volts: []float64{112, 112 + tt.change, 112, 112 + tt.change, 112, 112 + tt.change, 112, 112 + tt.change}},
			"regulators.csv", oneRegulator,
			"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],tap time [s]\nR,A,120,2,60,60\n"), sim.Options{})
		if len(w.actions) != 7 {
			t.Errorf("%d actions, want one at the beginning of each step but the first", len(w.actions))
		}
		if !slices.Equal(out.CoarseAt, tt.want) {
			t.Errorf("%v V: coarse at %v, want %v", tt.change, out.CoarseAt, tt.want)
		}
	}
}

// A run ends between two steps when its context is cancelled, and at once on the error of
// a Recorder, which comes back as it is.
func TestRunEnds(t *testing.T) {
	e := prepare(t, folder(inputs{step: time.Hour, steps: 5, volts: []float64{117}}, "regulators.csv", oneRegulator,
		"regulator-settings.csv", settings("", "")), "", sim.Options{})
	ctx, cancel := context.WithCancel(context.Background())
	steps := 0
	_, err := e.Run(ctx, &last{func(*results.State) {
		if steps++; steps == 2 {
			cancel()
		}
	}})
	if !errors.Is(err, context.Canceled) || steps != 2 {
		t.Errorf("%v after %d steps, want cancelled after 2", err, steps)
	}
	full := errors.New("disk is full")
	if _, err := e.Run(context.Background(), &broken{full}); !errors.Is(err, full) {
		t.Errorf("%v, want that of the recorder", err)
	}
}

type broken struct{ err error }

func (b *broken) Interval(*results.Interval) error { return nil }
func (b *broken) Action(*results.Action) error     { return b.err }
func (b *broken) Step(*results.Step) error         { return nil }

// restless asks again at the instant of its own action, which no control may do.
type restless struct {
	spy
	now devices.Time
	tap int
}

func (r *restless) Position() int                           { return r.tap }
func (r *restless) Observe(_ sim.Reading, now devices.Time) { r.now = now }
func (r *restless) Due() devices.Time                       { return r.now }
func (r *restless) Act(devices.Time) (a devices.Action) {
	a.From = r.tap
	r.tap = 1 - r.tap
	a.To = r.tap
	return a
}

// Such a control of the user's own ends the run with its name, instead of never.
func TestRestlessControl(t *testing.T) {
	f := folder(inputs{step: time.Hour, steps: 1, volts: []float64{117}}, "regulators.csv", oneRegulator, "regulator-settings.csv", settings("", ""))
	for _, start := range []string{"given", "settled"} {
		if start == "settled" {
			f = settled(f)
		}
		e := prepare(t, f, "", sim.Options{Controls: map[string]sim.Controller{"R.A": &restless{}}})
		if _, err := e.Run(context.Background()); err == nil || !strings.Contains(err.Error(), "R.A") {
			t.Errorf("%s: %v, want an error that names R.A", start, err)
		}
	}
}

// A control of one's own is given to one device by its name: a bank's name is that of a
// device only where the bank has one.
func TestControlsByName(t *testing.T) {
	build := func(ganged string, names ...string) ([]string, error) {
		f := folder(inputs{step: time.Hour, steps: 1, volts: []float64{117}},
			"regulators.csv", "regulator,from,to,phases,ganged,pt ratio,ct primary [A]\nR,S,X,ABC,"+ganged+",60,100\n",
			"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s]\nR,all,120,2,30\n",
			"capacitors.csv", "capacitor,node,phases,size [kvar]\nC,X,ABC,100\n")
		st, err := feeder.Open(f, "")
		if err != nil {
			t.Fatal(err)
		}
		controls, spies := map[string]sim.Controller{}, map[string]*spy{}
		for _, n := range names {
			spies[n] = &spy{}
			controls[n] = spies[n]
		}
		e, err := sim.Prepare(st, sim.Options{Controls: controls})
		if err != nil {
			return nil, err
		}
		w, _ := attend(t, e)
		for n, s := range spies {
			if len(s.seen) == 0 {
				t.Errorf("%s was not asked", n)
			}
		}
		return w.actions, nil
	}
	for _, tt := range []struct {
		ganged  string
		names   []string
		actions int // of those that keep their settings sheet, three each
		refused bool
	}{
		{"no", []string{"R.A", "R.C", "C"}, 3, false},
		{"yes", []string{"R"}, 0, false},
		{"yes", []string{"R.A", "C"}, 0, false},
		{"no", []string{"R"}, 0, true}, // which of the three?
		{"yes", []string{"R.B"}, 0, true},
		{"no", []string{"C."}, 0, true},
		{"no", []string{"Q"}, 0, true},
	} {
		actions, err := build(tt.ganged, tt.names...)
		if (err != nil) != tt.refused || len(actions) != tt.actions {
			t.Errorf("ganged %s, %q: %d actions and error %v", tt.ganged, tt.names, len(actions), err)
		}
		if err != nil && !strings.Contains(err.Error(), "R.A") {
			t.Errorf("%v does not name the devices", err)
		}
	}
}
