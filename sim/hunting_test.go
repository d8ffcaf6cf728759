package sim_test

import (
	"fmt"
	"strings"
	"testing"
	"time"

	"yearflow/sim"
)

// A device hunts when it changes direction more than 10 times within 3,600 s. The band
// of 0.5 V is narrower than a step of 0.75 V; delay 30 s. Source 119.7 V for two hours:
//
//	tap 0: 119.7, below 119.75        tap 1: 120.448125, above 120.25
//
// It acts every 30 s from 30 s on: raise, lower, raise... The k-th change of direction
// is at 30 + 30·k, the 11th at 360 s, where it begins to hunt. It goes on acting. At
// 7,200 s the source has 120 V: tap 1, where the 239th action left it at 7,170 s, makes
// 120.75 V, so that the request that stands is acted on once more, and tap 0 is inside.
// The last eleven changes stand at 7,200, 7,170, ... 6,900 s; the hour from the oldest
// ends at 10,500 s: it hunts for 10,500 − 360 = 10,140 s.
func TestHuntingAlone(t *testing.T) {
	w, out := walk(t, folder(inputs{step: time.Hour, steps: 4, volts: []float64{119.7, 119.7, 120}}, "regulators.csv", oneRegulator,
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s]\nR,A,120,0.5,30\n"), sim.Options{})
	if len(w.actions) != 240 {
		t.Errorf("%d actions, want 240; the last is %q", len(w.actions), w.actions[len(w.actions)-1])
	}
	if len(out.Hunting) != 1 || seconds(out.Hunting[0].Time) != 360 || out.Hunting[0].Device != 0 {
		t.Errorf("hunting: %v, want one beginning at 360 s", out.Hunting)
	}
	hunted := 0.0
	for _, s := range w.spans {
		if s.hunting {
			hunted += s.to - s.from
		}
		if want := s.from >= 360 && s.from < 10500; s.hunting != want {
			t.Errorf("hunting is %v from %v s", s.hunting, s.from)
		}
	}
	if hunted != 10140 {
		t.Errorf("it hunts for %v s, want 10140", hunted)
	}
}

// A regulator and a capacitor that chase each other. Behind 10 ohm of reactance and the
// regulator stands a bank of 129.6 kvar: k = 10·129600/7200² = 0.025, and
//
//	V = V0·r/(1 − k·r²) closed, V0·r open; r = 1 + 0.00625·tap, V0 = 119.6 V
//
// The regulator (10 s, 5 s) keeps 119.3 to 120.7 V; the bank (60 s, no lockout) closes
// below 119.8 V and opens above 120.2 V, less than its rise of 3 V:
//
//	 60 s  119.6: closes → 122.66667           180 s  closes, and so on every 120 s
//	 70 s  → −1: 121.86106    75 s  → −2: 121.05622    80 s  → −3: 120.25212
//	120 s  opens (above 120.2 since 60 s) → 117.3575
//	130 s  → −2: 118.105     135 s  → −1: 118.8525     140 s  → 0: 119.6
//
// Changes of direction: the bank's first at 120 s, its 11th at 720 s; the regulator's
// first at 130 s, its 11th at 730 s.
func TestTwoDevicesChaseEachOther(t *testing.T) {
	w, out := walk(t, folder(inputs{step: time.Hour, steps: 1, volts: []float64{119.6}},
		"sections.csv", "section,from,to,phases,length [km],construction\nL,S,M,A,10,coil\n",
		"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\ncoil,sequence,0,1,0,1\n",
		"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR,M,X,A,60,100\n",
		"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s]\nR,A,120,1.4,10\n",
		"capacitors.csv", "capacitor,node,phases,size [kvar],state\nC,X,A,129.6,open\n",
		"capacitor-settings.csv", "capacitor,control,voltage on [V],voltage off [V],delay [s],lockout [s]\nC,voltage,119.8,120.2,60,0\n"), sim.Options{})
	var want []string
	add := func(format string, args ...any) { want = append(want, fmt.Sprintf(format, args...)) }
	for at := 0; at < 3600; at += 120 {
		add("%d C 0 1 control 119.6 119.8 60", at+60)
		add("%d R.A 0 -1 band high 122.66667 120.7 10", at+70)
		add("%d R.A -1 -2 band high 121.86106 120.7 5", at+75)
		add("%d R.A -2 -3 band high 121.05622 120.7 5", at+80)
		if at+120 == 3600 {
			break // due at the end: it belongs to a step that does not come
		}
		add("%d C 1 0 control 120.25212 120.2 60", at+120)
		add("%d R.A -3 -2 band low 117.3575 119.3 10", at+130)
		add("%d R.A -2 -1 band low 118.105 119.3 5", at+135)
		add("%d R.A -1 0 band low 118.8525 119.3 5", at+140)
	}
	w.want(strings.Join(want, "\n"))
	if len(out.Hunting) != 2 {
		t.Fatalf("hunting: %v, want both", out.Hunting)
	}
	for i, want := range []struct {
		at     float64
		device string
	}{{720, "C"}, {730, "R"}} {
		h := out.Hunting[i]
		if seconds(h.Time) != want.at || w.e.Plan.Devices[h.Device].Name != want.device {
			t.Errorf("%s hunts from %v s, want %s from %v s", w.e.Plan.Devices[h.Device].Name, seconds(h.Time), want.device, want.at)
		}
	}
	// By device: the bank from 720 s, the regulator from 730 s, to the end.
	for _, s := range w.spans {
		for i, d := range s.devices {
			from := map[string]float64{"R": 730, "C": 720}[w.e.Plan.Devices[i].Name]
			if d.Hunting != (s.from >= from) {
				t.Errorf("%s hunts: %v from %v s", w.e.Plan.Devices[i].Name, d.Hunting, s.from)
			}
		}
	}
}
