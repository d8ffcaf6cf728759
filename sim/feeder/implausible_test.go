package feeder

import (
	"math"
	"strings"
	"testing"
)

// edit replaces one text of a file of the small study.
func edit(t *testing.T, file, old, new string) []string {
	t.Helper()
	text := string(small()[file].Data)
	if strings.Count(text, old) != 1 {
		t.Fatalf("%s has %q %d times, want once", file, old, strings.Count(text, old))
	}
	return []string{file, strings.Replace(text, old, new, 1)}
}

func TestSmallStudyIsPlausible(t *testing.T) {
	if got := opened(t, small(), "").Implausible(); len(got) > 0 {
		t.Errorf("got %v", got)
	}
}

func TestImplausible(t *testing.T) {
	const (
		sections     = "feeder/sections.csv"
		transformers = "feeder/transformers.csv"
		source       = "feeder/source.csv"
		loads        = "feeder/loads.csv"
		settings     = "feeder/regulator-settings.csv"
		banks        = "feeder/capacitor-settings.csv"
	)
	for _, tt := range []struct {
		name  string
		files []string
		at    string
		want  string
	}{
		{"100 miles", edit(t, sections, "ABC,5280", "ABC,528000"), "feeder/sections.csv:2", `section "s1" is 160.93 km (100 mi) long; usual: some 10 m to 10 km`},
		{"load above its transformer", edit(t, loads, "B,wye,12,", "B,wye,30,"), "feeder/transformers.csv:3", `transformer "pole" of 25 kVA feeds load "l2" of 30.612 kVA`},
		{"loads above their transformer", edit(t, loads, "B,wye,12,-0.98,home,3\n", "B,wye,20,1,,1\nl5,house,B,wye,20,1,,1\n"), "feeder/transformers.csv:3", `feeds loads of 40 kVA at profile 1; usual: up to 1.5 times the rating`},
		{"volts for per unit", []string{source, "node,nominal [kV],voltage [pu]\ngrid,69,122\n"}, "feeder/source.csv:2", `source "grid": voltage is 122 p.u.; usual: 0.95 to 1.08 p.u.`},
		{"per unit for volts", edit(t, settings, "122,2", "1.02,2"), "feeder/regulator-settings.csv:2", "set is 1.02 V; usual: 118 to 126 V"},
		// 300 + j98.61 and 25 + j12.11 kVA on phase A: 343.34 kVA at 12.47/√3 kV.
		{"ampacity", edit(t, "feeder/constructions.csv", "6,3,500", "6,3,45"), "feeder/sections.csv:2", `section "s1": the loads behind its phase A draw 47.689 A at profile 1, its rating is 45 A`},
		{"pt ratio", edit(t, "feeder/regulators.csv", "ABC,60,", "ABC,20,"), "feeder/regulators.csv:2", `pt ratio 20 turns nominal voltage (12.47 kV line-to-line) into 359.98 V; usual: 115 to 125 V`},
		{"bandwidth", edit(t, settings, "122,2", "122,1"), "feeder/regulator-settings.csv:2", "bandwidth 1 V is below two taps of 0.7625 V each"},
		{"kvar span", edit(t, banks, "100,-100", "50,-50"), "feeder/capacitor-settings.csv:2", "its span, 100 kvar, is 1 times the 100 kvar that the bank shifts"},
		{"capacitor and regulator", edit(t, settings, "122,2,30", "122,2,60"), "feeder/capacitor-settings.csv:2", `capacitor "cap" and regulator "reg", which see each other's actions, both wait 60 s`},
		{"X/R of a line", edit(t, "feeder/constructions.csv", "sequence,0.3,0.6", "sequence,0.03,0.6"), "feeder/constructions.csv:2", `its X/R is 20 (`},
		{"X/R of a transformer", edit(t, transformers, "Dyn1,8,15", "Dyn1,8,150"), "feeder/transformers.csv:2", "x/r is 150; usual: 1 to 40"},
		{"impedance", edit(t, transformers, "Dyn1,8,15", "Dyn1,80,15"), "feeder/transformers.csv:2", "impedance is 80 %; usual: 1.5 to 10 %"},
		{"no-load loss in kW", edit(t, transformers, "1.5,55,0.5", "1.5,550,3"), "feeder/transformers.csv:3", "no-load loss is 2.2 % of its rating"},
		{"capacitor rated to neutral", []string{"feeder/capacitors.csv", "capacitor,node,phases,size [kvar],nominal [kV]\ncap,n2,ABC,300,7.2\n"}, "feeder/capacitors.csv:2", "is it the line-to-neutral one?"},
		{"override in p.u.", edit(t, banks, "117,127", "0.975,1.06"), "feeder/capacitor-settings.csv:2", "voltage on (the override) is 0.975 V"},
		{"sides exchanged", edit(t, transformers, "12.47,Dyn1", "138,Dyn1"), "feeder/transformers.csv:2", "its low side, 138 kV, is above its high side, 69 kV"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			got := opened(t, with(small(), tt.files...), "").Implausible()
			for _, f := range got {
				if f.Pos.String() == tt.at && strings.Contains(f.Text, tt.want) {
					return
				}
			}
			t.Errorf("nothing at %s with %q in: %v", tt.at, tt.want, got)
		})
	}
}

func TestCascadeOfEqualDelays(t *testing.T) {
	fsys := with(small(), "feeder/regulators.csv", "regulator,from,to,phases,pt ratio,ct primary [A]\nreg,bus,n1,ABC,60,300\nline,n2,n8,ABC,60,100\n",
		"feeder/regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s]\nreg,all,122,2,30\nline,all,122,2,30\n")
	got := opened(t, fsys, "").Implausible()
	if len(got) != 1 || !strings.Contains(got[0].Error(), `feeder/regulator-settings.csv:3: regulator "line" and regulator "reg" upstream of it both wait 30 s`) {
		t.Errorf("got %v", got)
	}
	fsys = with(fsys, "feeder/regulator-settings.csv", "regulator,phase,set [V],bandwidth [V],delay [s],control\nreg,all,122,2,30,held\nline,all,122,2,30,\n")
	if got := opened(t, fsys, "").Implausible(); len(got) > 0 {
		t.Errorf("a held control waits for nothing: %v", got)
	}
}

// The rise that a bank makes is that of the check value in the trade's formula:
// 600 kvar at 12.47 kV behind 3 ohm raise by 1.1575 % (kvar·X/(10·kV²)).
func TestRiseOfABank(t *testing.T) {
	fsys := files("study.toml", period,
		"feeder/source.csv", "node,nominal [kV]\ngrid,12.47\n",
		"feeder/constructions.csv", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nline,sequence,0.5,1.5,1,3\n",
		"feeder/sections.csv", "section,from,to,phases,length [km],construction\ns,grid,end,ABC,2,line\n",
		"feeder/capacitors.csv", "capacitor,node,phases,size [kvar]\ncap,end,ABC,600\n",
		"feeder/capacitor-settings.csv", "capacitor,control,voltage on [V],voltage off [V]\ncap,voltage,120,122\n")
	s := opened(t, fsys, "")
	c := &checker{m: s.Model, r: newRadial(s.Model, 1)}
	if got, want := c.rise(&s.Model.Capacitors[0])/1.2, 1.1575; math.Abs(got-want) > 1e-4 {
		t.Errorf("rise %v %%, want %v %%", got, want)
	}
	// 1.1575 % of 120 V is 1.3891 V; 2/1.3891 is below 1.5.
	got := s.Implausible()
	if len(got) != 1 || !strings.Contains(got[0].Text, "its span, 2 V, is 1.4398 times the rise that the bank makes, about 1.3891 V") {
		t.Errorf("got %v", got)
	}
}

// Behind a bank the loads are shared among its high phases, and a step in voltage
// turns reactance with its square.
func TestRadialThroughABank(t *testing.T) {
	m := opened(t, small(), "").Model
	r := newRadial(m, 2)
	pole := r.behind[edge{"transformer", 1}]
	if math.Abs(real(pole.power[B])-24) > 1e-9 || pole.power[A] != 0 || pole.name != "l2" {
		t.Errorf("behind the pole: %+v, want 2·12 kW on B", pole)
	}
	sub := r.behind[edge{"transformer", 0}]
	if math.Abs(real(sub.power[A])-2*962.0/3) > 1e-9 {
		t.Errorf("behind the substation: %+v, want a third of 2·962 kW", sub)
	}
	bus, _ := m.NodeIndex("bus")
	// 8 % at X/R 15 on 10 MVA at 12.47 kV.
	if want := 0.08 * 15 / math.Sqrt(226) * 12.47 * 12.47 / 10; math.Abs(r.x[bus]-want) > 1e-9 {
		t.Errorf("reactance to the bus %v ohm, want %v", r.x[bus], want)
	}
	house, _ := m.NodeIndex("house")
	n3, _ := m.NodeIndex("n3")
	ratio := 0.24 / 7.2
	if want := r.x[n3]*ratio*ratio + 0.02*1.5/math.Sqrt(3.25)*0.24*0.24*1000/25; math.Abs(r.x[house]-want) > 1e-9 {
		t.Errorf("reactance to the house %v ohm, want %v", r.x[house], want)
	}
}

// What stands on the legs of a centre tap counts at the phase that feeds it, and a leg
// carries its own power at half of the full winding's voltage.
func TestLegsBehindATransformer(t *testing.T) {
	fsys := with(small(), "feeder/transformers.csv", `transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],x/r,no-load loss [W],exciting current [%]
sub,grid,bus,ABC,10000,69,12.47,Dyn1,8,15,9000,0.4
pole,n3,tank,B,25,7.2,0.24,center-tap,2,1.5,55,0.5
`)
	fsys["feeder/constructions.csv"].Data = append(fsys["feeder/constructions.csv"].Data, "drop,sequence,0.5,0.2,0.5,0.2,0,0,100\n"...)
	fsys["feeder/sections.csv"].Data = append(fsys["feeder/sections.csv"].Data, "service,tank,house,12,100,drop\n"...)
	fsys = with(fsys, edit(t, "feeder/loads.csv", "house,B,wye,12,-0.98", "house,12,wye,12,1")...)
	fsys["feeder/loads.csv"].Data = append(fsys["feeder/loads.csv"].Data, "lights,house,1,wye,7,1,,1\n"...)
	s := opened(t, fsys, "")
	r := newRadial(s.Model, 1)
	if at := r.behind[edge{"transformer", 1}].power; math.Abs(real(at[B])-19) > 1e-9 || at[A] != 0 || at[Leg1] != 0 {
		t.Errorf("at the pole stand %v kVA, want 19 on B", at)
	}
	// Half of 12 kW and 7 kW at 120 V: 108.33 A.
	got := s.Implausible()
	if len(got) != 1 || !strings.Contains(got[0].Text, "the loads behind its phase 1 draw 108.33 A") {
		t.Errorf("got %v", got)
	}
}
