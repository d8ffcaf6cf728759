package sim_test

import (
	"slices"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
	"yearflow/sim/results"
)

// A run begins settled: from the tap of the table the controls come to rest on the
// first step's inputs. 117 V need three taps for the band 119 to 121 V. These actions
// are not operations; clocks are forgotten. In the second hour the run goes on from 3.
func TestStartUpSettles(t *testing.T) {
	f := func() fstest.MapFS {
		return folder(inputs{step: time.Hour, steps: 2, volts: []float64{117, 120}}, "regulators.csv", oneRegulator,
			"regulator-settings.csv", settings("", ""))
	}
	w, out := walk(t, settled(f()), sim.Options{})
	// 120·1.01875 = 122.25: down at 3630 s to 121.5, at 3635 s to 120.75.
	w.want(`
		3630 R.A 3 2 band high 122.25 121 30
		3635 R.A 2 1 band high 121.5 121 5`)
	if out.Taps[0] != 3 || len(out.StillMoving) != 0 {
		t.Errorf("after start-up: taps %v, moving %v; want 3 and none", out.Taps, out.StillMoving)
	}
	if s := w.spans[0]; s.from != 0 || s.to != 3600 || !s.settled || s.taps[0] != 3 {
		t.Errorf("the first interval is %+v", s)
	}
	// As given, it begins at the table's tap and these are operations.
	w, out = walk(t, f(), sim.Options{})
	if len(w.actions) != 5 || out.Taps[0] != 0 {
		t.Errorf("as given: %v from %v", w.actions, out.Taps)
	}
}

// Start-up takes no action that is due at 24 h or later, and names what still moves. A
// delay of 86,399 s is taken, one of 86,400 s is not; then the run begins with a fresh
// clock, so that the first action comes a day later.
func TestStartUpEndsAfterADay(t *testing.T) {
	for _, tt := range []struct {
		delay  string
		tap    int
		moving []string
		want   string
	}{
		// 118.5·1.00625 = 119.240625, inside.
		{"86399", 1, nil, ""},
		{"86400", 0, []string{"R.A"}, "86400 R.A 0 1 band low 118.5 119 86400"},
	} {
		w, out := walk(t, settled(folder(inputs{step: time.Hour, steps: 25, volts: []float64{118.5}}, "regulators.csv", oneRegulator,
			"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s]\nR,A,120,2,"+tt.delay+"\n")), sim.Options{})
		w.want(tt.want)
		if out.Taps[0] != tt.tap || !slices.Equal(out.StillMoving, tt.moving) {
			t.Errorf("delay %s s: tap %d, moving %v; want %d, %v", tt.delay, out.Taps[0], out.StillMoving, tt.tap, tt.moving)
		}
	}
}

// A device that never rests is named after 24 h: the band of 0.5 V is narrower than a
// step. From 30 s on it acts every 30 s, up and down; 86,370 s is the last below 24 h,
// the 2,879th, a raise: the run begins at tap 1.
func TestStartUpNamesWhatMoves(t *testing.T) {
	w, out := walk(t, settled(folder(inputs{step: time.Minute, steps: 1, volts: []float64{119.7}}, "regulators.csv", oneRegulator,
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s]\nR,A,120,0.5,30\n")), sim.Options{})
	if out.Taps[0] != 1 || !slices.Equal(out.StillMoving, []string{"R.A"}) {
		t.Errorf("tap %v, moving %v; want 1 and R.A", out.Taps, out.StillMoving)
	}
	w.want("30 R.A 1 0 band high 120.448125 120.25 30")
	if len(out.Hunting) != 0 {
		t.Error("start-up is counted as hunting")
	}
}

// The time of day stands still while a run starts up: at 00:00 a window from 00:15 to
// 12:00 is shut, and the bank stays open though event time passes 00:15 while the
// regulator comes to rest. It closes in the run.
func TestTimeOfDayStandsStillAtStartUp(t *testing.T) {
	w, out := walk(t, settled(folder(inputs{step: time.Hour, steps: 1, volts: []float64{117}}, "regulators.csv", oneRegulator,
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],tap time [s]\nR,A,120,2,1200,600\n",
		"capacitors.csv", "capacitor,node,phases,size [kvar],state\nC,S,ABC,300,closed\n",
		"capacitor-settings.csv", "capacitor,control,time on,time off\nC,time,00:15,12:00\n")), sim.Options{})
	if out.Closed[0] || out.Taps[0] != 3 {
		t.Errorf("after start-up: closed %v, taps %v; want open and 3", out.Closed, out.Taps)
	}
	w.want("960 C 0 1 time 0.266667 0.25 60") // 00:16
}

// Start-up forgets lockouts and counts: a bank that opened in start-up, with a lockout of
// two hours and one switching a day, closes in the second minute after its delay.
func TestStartUpForgetsLockoutAndCount(t *testing.T) {
	w, out := walk(t, settled(atSource(inputs{step: time.Minute, steps: 4, volts: []float64{123, 117}},
		"voltage on [V],voltage off [V],delay [s],lockout [s],daily limit", "voltage,118,122,60,7200,1",
		"capacitors.csv", "capacitor,node,phases,size [kvar],state\nC,S,ABC,300,closed\n")), sim.Options{})
	if out.Closed[0] {
		t.Error("closed after start-up")
	}
	w.want("120 C 0 1 control 117 118 60")
}

// Without a solution at start-up the run begins from the positions of the tables.
func TestStartUpWithoutASolution(t *testing.T) {
	w, out := walk(t, settled(resonant([]float64{1, 0, 0, 0}, []float64{118}, "regulator-settings.csv",
		"regulator,phase,set [V],bandwidth [V],delay [s],tap\nR,A,120,2,90,-1\n")), sim.Options{})
	if out.Taps[0] != -1 {
		t.Errorf("taps %v after start-up, want -1 as in the table", out.Taps)
	}
	if w.steps[0].Status != results.Unsolved || w.steps[1].Status != results.OK {
		t.Errorf("steps are %v and %v", w.steps[0].Status, w.steps[1].Status)
	}
	// 60 s: 118·0.99375 = 117.2625 asks, due at 150; 155 s 118; 160 s 118.7375.
	w.want(`
		150 R.A -1 0 band low 117.2625 119 90
		155 R.A 0 1 band low 118 119 5
		160 R.A 1 2 band low 118.7375 119 5`)
}

// Two runs of one engine are the same run.
func TestRunTwice(t *testing.T) {
	e := prepare(t, settled(folder(inputs{step: time.Hour, steps: 3, volts: []float64{117, 121, 118}, load: []float64{10, 5, 2}},
		"regulators.csv", cascade, "sections.csv", cascadeSections, "constructions.csv", resistance,
		"loads.csv", "load,node,phases,real [kW],zip,profile\nhouse,Y,A,72,current,load\n",
		"regulator-settings.csv", cascaded(30, 45))), "", sim.Options{})
	first, _ := attend(t, e)
	second, _ := attend(t, e)
	if len(first.actions) == 0 || !slices.Equal(first.actions, second.actions) {
		t.Errorf("first %q, then %q", first.actions, second.actions)
	}
}
