package sim_test

import (
	"fmt"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
)

// A capacitor C at the source itself moves no voltage: what it sees is what the profile
// says, 120 V × (source, p.u.).
func atSource(in inputs, columns, cells string, pairs ...string) fstest.MapFS {
	return folder(in, append([]string{"capacitors.csv", "capacitor,node,phases,size [kvar],state\nC,S,ABC,300,open\n",
		"capacitor-settings.csv", "capacitor,control," + columns + "\nC," + cells + "\n"}, pairs...)...)
}

// By voltage: closes below 118 V, opens above 122 V, delay 60 s, lockout 300 s; steps of
// a minute.
//
//	  0 s  117: asks to close, due at 60        60 s  closes
//	120 s  123: asks to open, due at 180       180 s  opens, locked until 480
//	240 s  117: asks to close; the delay runs meanwhile, until 300; due at 480
//	480 s  closes, 240 s after it asked
//	540 s  123: asks to open                   600 s  opens: openings know no lockout
func TestCapacitorDelayAndLockout(t *testing.T) {
	w, _ := walk(t, atSource(inputs{step: time.Minute, steps: 12, volts: []float64{117, 117, 123, 123, 117, 117, 117, 117, 117, 123, 123, 120}},
		"voltage on [V],voltage off [V],delay [s],lockout [s]", "voltage,118,122,60,300"), sim.Options{})
	w.want(`
		60 C 0 1 control 117 118 60
		180 C 1 0 control 123 122 60
		480 C 0 1 control 117 118 240
		600 C 1 0 control 123 122 60`)
	// A request that the lockout holds back still stands: 0 to 60, 120 to 180, 240 to
	// 480 and 540 to 600 s are settling.
	for _, s := range w.spans {
		if want := s.from >= 60 && s.from < 120 || s.from >= 180 && s.from < 240 || s.from >= 480 && s.from < 540 || s.from >= 600; s.settled != want {
			t.Errorf("settled %v from %v s", s.settled, s.from)
		}
		if want := s.from >= 60 && s.from < 180 || s.from >= 480 && s.from < 600; s.closed[0] != want {
			t.Errorf("closed %v from %v s", s.closed[0], s.from)
		}
	}
}

// A request that vanishes for a minute begins anew: clocks of capacitors restart. And
// where the lockout ends before the delay, the delay counts.
//
//	0 s 117 asks; 60 s 120 does not; 120 s 117 asks, due at 210: closes within the minute from 180 s
//	240 s 123 asks, due at 330: opens, locked until 360; 360 s 117 asks, due at 450
func TestCapacitorClockRestarts(t *testing.T) {
	w, _ := walk(t, atSource(inputs{step: time.Minute, steps: 10, volts: []float64{117, 120, 117, 117, 123, 123, 117}},
		"voltage on [V],voltage off [V],delay [s],lockout [s]", "voltage,118,122,90,30"), sim.Options{})
	w.want(`
		210 C 0 1 control 117 118 90
		330 C 1 0 control 123 122 90
		450 C 0 1 control 117 118 90`)
}

// By temperature, closing above 30 °C and opening below 25 °C, with an override by
// voltage, 115 V and 125 V, deadband 2 V; delay 60 s, lockout 60 s, by the minute.
//
//	  0 s  35 °C: asks to close                       60 s  closes
//	120 s  126 V: the override asks to open          180 s  opens, and stays open until the
//	       voltage is back below 125 − 2 = 123 V, whatever the control wants:
//	240 s  124 V, 300 s  123 V (on the edge: not yet), 360 s  122.9 V: asks to close
//	420 s  closes
//	480 s  20 °C: asks to open                       540 s  opens, locked until 600
//	600 s  114 V: the override asks to close         660 s  closes, and stays until above 117 V:
//	720 s  116 V, 780 s  117 V (not yet), 840 s  117.1 V: asks to open
//	900 s  opens
func TestCapacitorOverride(t *testing.T) {
	w, _ := walk(t, atSource(inputs{step: time.Minute, steps: 17,
		volts: []float64{120, 120, 126, 126, 124, 123, 122.9, 122, 120, 120, 114, 114, 116, 117, 117.1, 117.1},
		more:  "outside [degC]", value: []float64{35, 35, 35, 35, 35, 35, 35, 35, 20}},
		"profile,temperature on [degC],temperature off [degC],voltage on [V],voltage off [V],override deadband [V],delay [s],lockout [s]",
		"temperature,outside,30,25,115,125,2,60,60"), sim.Options{})
	w.want(`
		60 C 0 1 control 35 30 60
		180 C 1 0 override high 126 125 60
		420 C 0 1 control 35 30 60
		540 C 1 0 control 20 25 60
		660 C 0 1 override low 114 115 60
		900 C 1 0 control 20 25 60`)
}

// Start-up forgets the latch of an override. At 126 V it opens in start-up; in the
// second minute, at 124 V, the control's wish to close is asked for at once, though the
// voltage is not yet below 123 V.
func TestStartUpForgetsTheLatch(t *testing.T) {
	f := atSource(inputs{step: time.Minute, steps: 4, volts: []float64{126, 124}, more: "outside [degC]", value: []float64{35}},
		"profile,temperature on [degC],temperature off [degC],voltage on [V],voltage off [V],delay [s]", "temperature,outside,30,25,115,125,60",
		"capacitors.csv", "capacitor,node,phases,size [kvar],state\nC,S,ABC,300,closed\n")
	w, out := walk(t, settled(f), sim.Options{})
	if out.Closed[0] {
		t.Error("closed after start-up")
	}
	w.want("120 C 0 1 control 35 30 60")
}

// A daily limit of 2, by the hour: closes (1), opens (2), and then asks for nothing
// until midnight, 86,400 s.
func TestDailyLimit(t *testing.T) {
	volts := []float64{117, 123}
	for len(volts) < 25 {
		volts = append(volts, 117)
	}
	volts = append(volts, 123, 117)
	w, _ := walk(t, atSource(inputs{step: time.Hour, steps: 30, volts: volts},
		"voltage on [V],voltage off [V],daily limit", "voltage,118,122,2"), sim.Options{})
	w.want(`
		60 C 0 1 control 117 118 60
		3660 C 1 0 control 123 122 60
		86460 C 0 1 control 117 118 60
		90060 C 1 0 control 123 122 60`)
	for _, s := range w.spans {
		if s.from >= 7200 && s.to <= 86400 && !s.settled {
			t.Errorf("not settled from %v s: at the limit it does not ask", s.from)
		}
	}
}

// shifted moves a study's period to begin and end at another hour, with steps of a day.
func shifted(f fstest.MapFS, hour string) fstest.MapFS {
	s := string(f["study.toml"].Data)
	s = strings.ReplaceAll(s, "T00:00:00", "T"+hour+":00:00")
	f["study.toml"] = &fstest.MapFile{Data: []byte(s)}
	return f
}

// A switching time and midnight are events inside a step. Closed from 08:00 to 18:00,
// one switching a day, steps of 24 h from 06:00:
//
//	08:01 closes (28,860 s); at 18:00 it wants open, but the day has had its one
//	24:00 the new day: asks to open, 24:01 opens (86,460 s), its one; 32:00 nothing
//	56:00 is 08:00 of the third day: closes at 201,660 s; at 18:00 it waits for midnight
//	again, and opens at 72:01, 259,260 s
func TestMidnightInsideAStep(t *testing.T) {
	f := shifted(atSource(inputs{step: 24 * time.Hour, steps: 3, volts: []float64{120}}, "time on,time off,daily limit", "time,08:00,18:00,1"), "06")
	s := string(f["profiles/inputs.csv"].Data)
	f["profiles/inputs.csv"] = &fstest.MapFile{Data: []byte(s + "2025-03-07T00:00:00,1\n")}
	w, _ := walk(t, f, sim.Options{})
	w.want(`
		28860 C 0 1 time 8.016667 8 60
		86460 C 1 0 time 0.016667 18 60
		201660 C 0 1 time 8.016667 8 60
		259260 C 1 0 time 0.016667 18 60`)
}

// A window that wraps past midnight, on weekdays: closed from 22:30 to 05:15. On days
// that it does not name it wants open, and past midnight the new day counts: Friday's
// window ends with Friday, and Monday begins inside its own.
func TestWindowPastMidnight(t *testing.T) {
	const close, open = "%d C 0 1 time %.6f 22.5 60", "%d C 1 0 time %.6f 5.25 60"
	clock := func(day, h, m int) (int, float64) { return day*86400 + h*3600 + m*60, float64(h) + float64(m)/60 }
	line := func(format string, day, h, m int) string {
		s, hours := clock(day, h, m)
		return fmt.Sprintf(format, s, hours)
	}
	var want []string
	want = append(want, line(close, 0, 0, 1)) // Monday, inside the window
	for d := range 5 {
		want = append(want, line(open, d, 5, 16), line(close, d, 22, 31))
	}
	// Tuesday to Friday open at 05:16 what closed at 22:31; Saturday opens at 00:01.
	want = append(want, line(open, 5, 0, 1), line(close, 7, 0, 1), line(open, 7, 5, 16), line(close, 7, 22, 31))
	for _, step := range []time.Duration{6 * time.Hour, 24 * time.Hour, time.Hour} {
		w, _ := walk(t, atSource(inputs{step: step, steps: int(8 * 24 * time.Hour / step), volts: []float64{120}},
			"time on,time off,days", "time,22:30,05:15,weekdays"), sim.Options{})
		w.want(strings.Join(want, "\n"))
	}
}

// watched is a feeder S ═ X whose section L, a milliohm, carries a load of 300 kW and
// 200 kvar × (load) at X, where the bank C of 240 kvar stands: at 120 V it draws
// 200·load − 240 kvar through L when it is closed, and voltages change by 2e-6.
func watched(load []float64, section, columns, cells string) fstest.MapFS {
	return folder(inputs{step: time.Hour, steps: len(load), volts: []float64{120}, load: load},
		"sections.csv", "section,from,to,phases,length [km],construction,rating [A]\n"+section+",ABC,1,link,100\n",
		"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nlink,sequence,0.001,0,0.001,0\n",
		"loads.csv", "load,node,phases,real [kW],reactive [kvar],profile\nmill,X,ABC,300,200,load\n",
		"capacitors.csv", "capacitor,node,phases,size [kvar],state\nC,X,ABC,240,open\n",
		"capacitor-settings.csv", "capacitor,control,watched section,"+columns+"\nC,"+cells+"\n")
}

// By kvar, positive towards the to end. Closes above 150, opens below −160:
//
//	load 1: 200 → closes, −40. Load 0.5: 100 − 240 = −140. Load 0.3: 60 − 240 = −180 → opens
//
// Watched the other way round, with the section entered from X to S, every sign turns
// over. By phase A it is a third.
func TestCapacitorByKvar(t *testing.T) {
	load := []float64{1, 0.5, 0.3}
	w, _ := walk(t, watched(load, "L,S,X", "kvar on [kvar],kvar off [kvar]", "kvar,L,150,-160"), sim.Options{})
	w.want(`
		60 C 0 1 control 200.0 150 60
		7260 C 1 0 control -180.0 -160 60`)
	w, _ = walk(t, watched(load, "L,X,S", "kvar on [kvar],kvar off [kvar]", "kvar,L,-150,160"), sim.Options{})
	w.want(`
		60 C 0 1 control -200.0 -150 60
		7260 C 1 0 control 180.0 160 60`)
	w, _ = walk(t, watched(load, "L,S,X", "phase,kvar on [kvar],kvar off [kvar]", "kvar,L,A,50,-50"), sim.Options{})
	w.want(`
		60 C 0 1 control 66.7 50 60
		7260 C 1 0 control -60.0 -50 60`)
}

// By power factor: closes beyond 0.9 lagging, opens beyond 0.98 leading.
//
//	load 0.2: 72.1 kVA, 3.34 A; 0.832 lagging, but below 5 % of 100 A nothing is asked
//	load 1: 300 kW, 200 kvar: 0.83205 lagging → closes; then −40 kvar, 0.99123 leading
//	load 0.2: 60 kW, −200 kvar: 0.28735 leading, 9.67 A → opens, and sees too little again
func TestCapacitorByPowerFactor(t *testing.T) {
	w, _ := walk(t, watched([]float64{0.2, 1, 0.2}, "L,S,X", "power factor on,power factor off", "power factor,L,0.9,-0.98"), sim.Options{})
	w.want(`
		3660 C 0 1 control 0.83205 0.9 60
		7260 C 1 0 control -0.28735 -0.98 60`)
}

// By current, the highest of the phases: at 7.2 kV √(300² + 200²)/21.6 = 16.69 A closes
// above 12 A; √(300² + 40²)/21.6 = 14.01 A; load 0.25: √(75² + 190²)/21.6 = 9.457 A
// opens below 10 A. A phase of its own sees its own: a load on A alone does not move
// a control on B.
func TestCapacitorByCurrent(t *testing.T) {
	w, _ := walk(t, watched([]float64{1, 0.25}, "L,S,X", "current on [A],current off [A]", "current,L,12,10"), sim.Options{})
	w.want(`
		60 C 0 1 control 16.69 12 60
		3660 C 1 0 control 9.457 10 60`)
	for phase, actions := range map[string]int{"": 1, "A": 1, "B": 0} {
		f := watched([]float64{1}, "L,S,X", "phase,current on [A],current off [A]", "current,L,"+phase+",12,0.1")
		f["feeder/loads.csv"] = &fstest.MapFile{Data: []byte("load,node,phases,real [kW]\nmill,X,A,100\n")} // 13.9 A
		if w, _ := walk(t, f, sim.Options{}); len(w.actions) != actions {
			t.Errorf("phase %q: %v, want %d actions", phase, w.actions, actions)
		}
	}
}
