package sim_test

import (
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
)

// What check says beforehand of the runaway: 360 kW of generation against 144 kW of
// load, in the second of three hours.
func TestReverseRisks(t *testing.T) {
	for mode, want := range map[string]string{
		"follow": "takes the source's side for the one to regulate", "reverse only": "runs to a tap limit", "neutral": "goes to neutral",
		"none": "", "stay": "", "idle": "", "forward only": "",
	} {
		got := prepare(t, backfeed(time.Hour, mode, []float64{120}, []float64{0, 360, 100}), "", sim.Options{}).ReverseRisks()
		if want == "" {
			if len(got) > 0 {
				t.Errorf("%s: %v", mode, got)
			}
			continue
		}
		if len(got) != 1 || got[0].Pos.String() != "feeder/regulator-settings.csv:2:6" || !strings.Contains(got[0].Text, want) ||
			!strings.Contains(got[0].Text, `regulator "R" A: reverse is `+mode) ||
			!strings.Contains(got[0].Text, "at 2025-03-03T01:00:00+00:00 generation behind it in its phase is 360 kW, load 144 kW (the least of the period: 144 kW)") {
			t.Errorf("%s: %v, want %q", mode, got, want)
		}
	}
	// Never more than the load: nothing to say. Nor of a control that is held.
	if got := prepare(t, backfeed(time.Hour, "follow", []float64{120}, []float64{0, 144}), "", sim.Options{}).ReverseRisks(); len(got) > 0 {
		t.Errorf("without backfeed: %v", got)
	}
	held := strings.Replace(strings.Replace(reverseSheet("follow"), "reverse set", "control,reverse set", 1), "follow,2,", "follow,2,held,", 1)
	if got := prepare(t, backfeed(time.Hour, "", []float64{120}, []float64{360}, "regulator-settings.csv", held), "", sim.Options{}).ReverseRisks(); len(got) > 0 {
		t.Errorf("held: %v", got)
	}
	// A second source behind it: what the mode is for.
	tie := []string{"source.csv", "node,nominal [kV],voltage profile\nS,12.470765814495916,volts\nX,12.470765814495916,volts\n",
		"sections.csv", "section,from,to,phases,length [km],construction\nK,S,M,A,1,line\n",
		"constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nline,sequence,0.2,0.4,0.5,1.2\n",
		"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR,M,X,A,60,100\n"}
	if got := prepare(t, backfeed(time.Hour, "follow", []float64{120}, []float64{360}, tie...), "", sim.Options{}).ReverseRisks(); len(got) > 0 {
		t.Errorf("with a source at the other end: %v", got)
	}
}

// By phase, through banks and by pairs: 90 kW of generation on A against loads of 60 kW
// on A, 30 kW across AB (15 on each) and 27 kW behind a Dyn1 bank (9 on each phase):
// 84 kW on A. With 67 kW on A, 91 kW in all, nothing flows back in any phase.
func TestReverseRisksByPhase(t *testing.T) {
	f := func(load, generator string) fstest.MapFS {
		return folder(inputs{step: time.Hour, steps: 1, volts: []float64{120}},
			"regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nR,S,X,ABC,60,100\n",
			"regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],reverse\nR,all,120,2,30,follow\n",
			"transformers.csv", "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],x/r\nT,X,Y,ABC,100,12.47,0.48,Dyn1,4,3\n",
			"loads.csv", "load,node,phases,connection,real [kW]\na,X,A,wye,"+load+"\nd,X,AB,delta,30\ne,Y,ABC,wye,27\nbefore,S,A,wye,500\n",
			"generators.csv", "generator,node,phases,kind,rating [kVA],real [kW]\n"+generator)
	}
	got := prepare(t, f("60", "g,X,A,solar,100,90\n"), "", sim.Options{}).ReverseRisks()
	if len(got) != 1 || !strings.Contains(got[0].Text, `regulator "R" A:`) || !strings.Contains(got[0].Text, "is 90 kW, load 84 kW") {
		t.Errorf("got %v", got)
	}
	if got := prepare(t, f("67", "g,X,A,solar,100,90\n"), "", sim.Options{}).ReverseRisks(); len(got) > 0 {
		t.Errorf("got %v", got)
	}
	// 90 kW behind the bank are 30 kW on each phase; C has 9 kW.
	got = prepare(t, f("60", "g,Y,ABC,solar,100,90\n"), "", sim.Options{}).ReverseRisks()
	if len(got) != 1 || !strings.Contains(got[0].Text, `regulator "R" C:`) || !strings.Contains(got[0].Text, "is 30 kW, load 9 kW") {
		t.Errorf("got %v", got)
	}
	// An inverter with a function, whose phases act as one, counts once.
	smart := f("60", "g,Y,ABC,solar,100,90\n")
	smart["feeder/generators.csv"] = text(strings.Replace(strings.Replace(string(smart["feeder/generators.csv"].Data), "real [kW]\n", "real [kW],function\n", 1), "100,90\n", "100,90,vv\n", 1))
	smart["feeder/inverter-functions.csv"] = text("function,reactive\nvv,voltage-reactive power\n")
	got = prepare(t, smart, "", sim.Options{}).ReverseRisks()
	if len(got) != 1 || !strings.Contains(got[0].Text, "is 30 kW, load 9 kW") {
		t.Errorf("with a function: got %v", got)
	}
}
