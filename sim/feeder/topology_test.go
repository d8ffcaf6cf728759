package feeder

import (
	"math"
	"strings"
	"testing"
)

// banks is a study of two transformers in a row, and loads in delta, that nothing
// grounds behind the second one.
func banks(connection string) string {
	return "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection\nsub,grid,bus,ABC,10000,69,12.47,Dyn1\nmill,n2,shop,ABC,500,12.47,0.48," + connection + "\n"
}

func TestGroundedByWindings(t *testing.T) {
	for _, tt := range []struct {
		connection   string
		primary, low bool
	}{
		{"YNyn0", true, true}, {"Dyn1", true, true}, {"Dd0", true, false}, {"YNd1", true, false}, {"YNy0", true, false}, {"Dy1", true, false},
		{"open-wye/open-delta AB-BC", true, false}, {"open-delta/open-delta AB-BC", true, false},
	} {
		m := opened(t, with(small(), "feeder/transformers.csv", banks(tt.connection), "feeder/loads.csv",
			"load,node,phases,connection,real [kW]\nl,shop,ABC,delta,30\n"), "").Model
		i, _ := m.NodeIndex("shop")
		if m.Nodes[i].Grounded != tt.low || m.Nodes[i].Nominal != 0.48 {
			t.Errorf("%s: its low side is grounded %v, want %v; nominal %v kV", tt.connection, m.Nodes[i].Grounded, tt.low, m.Nodes[i].Nominal)
		}
		// A delta-delta substation leaves the primary to what else grounds it.
		m = opened(t, with(small(), "feeder/transformers.csv", strings.Replace(banks(tt.connection), "Dyn1", "Dd0", 1), "feeder/regulators.csv", "regulator,from,to,phases,connection,pt ratio,ct primary [A]\nreg,bus,n1,ABC,closed-delta,104,300\n",
			"feeder/capacitors.csv", "", "feeder/capacitor-settings.csv", "", "feeder/generators.csv", "",
			"feeder/loads.csv", "load,node,phases,connection,real [kW]\nl,shop,ABC,delta,30\n"), "").Model
		i, _ = m.NodeIndex("n2")
		if want := strings.HasPrefix(tt.connection, "YN") || strings.HasPrefix(tt.connection, "open-wye"); m.Nodes[i].Grounded != want {
			t.Errorf("%s behind delta-delta: the primary is grounded %v, want %v", tt.connection, m.Nodes[i].Grounded, want)
		}
	}
}

func TestToGroundWhereNothingGrounds(t *testing.T) {
	base := with(small(), "feeder/transformers.csv", banks("Dd0"), "feeder/loads.csv", "")
	wantFault(t, with(base, "feeder/loads.csv", "load,node,phases,real [kW]\nl,shop,ABC,30\n"), "feeder/loads.csv:2", `load "l" stands to ground, but nothing grounds`)
	wantFault(t, with(base, "feeder/capacitors.csv", "capacitor,node,phases,size [kvar]\ncap,shop,ABC,30\n"), "feeder/capacitors.csv:2", `capacitor "cap" stands to ground`)
	wantFault(t, with(base, "feeder/generators.csv", "generator,node,phases,kind,rating [kVA],real [kW]\ng,shop,ABC,engine,5,5\n"), "feeder/generators.csv:2", `generator "g" stands to ground`)
	wantFault(t, with(base, "feeder/capacitors.csv", "capacitor,node,phases,connection,size [kvar]\ncap,shop,ABC,delta,30\n",
		"feeder/capacitor-settings.csv", "capacitor,control,phase,voltage on [V],voltage off [V]\ncap,voltage,B,118,124\n"), "feeder/capacitor-settings.csv:2", "name a pair such as AB")
	wantFault(t, with(base, "feeder/capacitors.csv", "capacitor,node,phases,connection,size [kvar]\ncap,shop,ABC,delta,30\n",
		"feeder/capacitor-settings.csv", "capacitor,control,watched section,phase,current on [A],current off [A]\ncap,current,s1,B,80,60\n"), "feeder/capacitor-settings.csv:2", "names phase B, but nothing grounds")
	opened(t, with(base, "feeder/capacitors.csv", "capacitor,node,phases,connection,size [kvar]\ncap,shop,ABC,delta,30\n",
		"feeder/capacitor-settings.csv", "capacitor,control,phase,voltage on [V],voltage off [V]\ncap,voltage,BC,118,124\n"), "")
	floating := with(small(), "feeder/transformers.csv", strings.Replace(banks("Dd0"), "Dyn1", "Dd0", 1), "feeder/loads.csv", "", "feeder/generators.csv", "", "feeder/capacitors.csv", "", "feeder/capacitor-settings.csv", "")
	wantFault(t, floating, "feeder/regulators.csv:2", `regulator "reg", connected in wye, stands to ground`)
}

func TestIslandsAndStrayPhases(t *testing.T) {
	sections := string(small()["feeder/sections.csv"].Data)
	wantFault(t, with(small(), "feeder/sections.csv", sections+"s8,x1,x2,ABC,100,trunk\ns9,x2,x3,A,100,trunk\n"), "feeder/sections.csv:4:2", "no path leads from a source to: x1, x2, x3")
	wantFault(t, with(small(), "feeder/sections.csv", sections+"s9,x1,x2,A,100,trunk\n", "feeder/switches.csv", "switch,from,to,phases,state\ntie,n2,x1,ABC,open\n"),
		"feeder/sections.csv:4", `no path leads from a source to: x1, x2; switch "tie" is open`)
	// A misspelt source cuts off everything: the slip is among the few names it reaches.
	wantFault(t, with(small(), "feeder/source.csv", "node,nominal [kV]\ngird,69\n"), "feeder/", "no path leads from a source to: bus, grid, house, n1, n2, n3; a source (feeder/source.csv:2) reaches only: gird")
	// n3 hangs on phase B alone; a lateral behind it asks for C. It is told once.
	fsys := with(small(), "feeder/sections.csv", sections+"s3,n3,n4,BC,100,trunk\ns4,n4,n5,C,100,trunk\n")
	wantFault(t, fsys, "feeder/sections.csv:4", `section "s3" has phase C at node "n3", but no path leads from there to phase C of a source; a source reaches B there`)
	if _, err := Open(fsys, ""); strings.Count(err.Error(), "\n") > 0 {
		t.Errorf("one missing phase is told more than once:\n%v", err)
	}
	// A three-phase bank behind a single-phase lateral lacks two.
	wantFault(t, with(small(), "feeder/transformers.csv", strings.Replace(banks("Dyn1"), "mill,n2", "mill,n3", 1)), "feeder/transformers.csv:3", `transformer "mill" has phase A at node "n3"`)
	wantFault(t, with(small(), "feeder/loads.csv", "load,node,phases,real [kW]\nl,n3,A,5\n"), "feeder/loads.csv:2:3", `load "l": node "n3" has no phase A; it has B`)
}

// A section that is a fault itself leaves its nodes without phases; that is not told.
func TestFaultOfASectionIsToldOnce(t *testing.T) {
	for _, tt := range []struct{ old, new, want string }{
		{"n1,n2,ABC", "n1,,ABC", "feeder/sections.csv:2:3: column to: the cell is blank"},
		{"n1,n2,ABC", "n1,n2,ABX", `feeder/sections.csv:2:4: section "s1": phases "ABX": want some of A, B, C`},
		{"5280", "52x", `feeder/sections.csv:2:5: column length [ft]: want a number, got "52x"`},
		{"phases", "phase", `feeder/sections.csv:1:4: unknown column "phase"; did you mean "phases"?`},
	} {
		_, err := Open(with(small(), "feeder/sections.csv", strings.Replace(string(small()["feeder/sections.csv"].Data), tt.old, tt.new, 1)), "")
		if err == nil || !strings.Contains(err.Error(), tt.want) {
			t.Errorf("want %s, got %v", tt.want, err)
			continue
		}
		for _, line := range strings.Split(err.Error(), "\n") {
			if !strings.HasPrefix(line, "feeder/sections.csv") {
				t.Errorf("%s: it is told again: %s", tt.want, line)
			}
		}
	}
}

func TestLowSideOfAUnitAcrossAPair(t *testing.T) {
	table := "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection\nsub,grid,bus,ABC,10000,69,12.47,Dyn1\npole,n2,house,AB,25,12.47,0.24,1ph\n"
	load := func(phases, connection string) string {
		return "load,node,phases,connection,real [kW]\nl,house," + phases + "," + connection + ",5\n"
	}
	m := opened(t, with(small(), "feeder/transformers.csv", table, "feeder/loads.csv", load("A", "wye")), "").Model
	i, _ := m.NodeIndex("house")
	if n := m.Nodes[i]; word(n.Phases) != "A" || math.Abs(n.Nominal-0.24*math.Sqrt(3)) > 1e-12 || !n.Grounded {
		t.Errorf("low side to ground: %+v", n)
	}
	m = opened(t, with(small(), "feeder/transformers.csv", table, "feeder/loads.csv", load("AB", "delta")), "").Model
	i, _ = m.NodeIndex("house")
	if n := m.Nodes[i]; word(n.Phases) != "AB" || n.Nominal != 0.24 || n.Grounded {
		t.Errorf("low side across the pair: %+v", n)
	}
	wantFault(t, with(small(), "feeder/transformers.csv", table, "feeder/loads.csv", load("B", "wye")), "feeder/transformers.csv:3", "write its phases as BA")
}

func TestNominalVoltages(t *testing.T) {
	nodes := func(rows string) string { return "node,nominal [kV]\n" + rows }
	m := opened(t, with(small(), "feeder/nodes.csv", nodes("n2,12\n")), "").Model
	i, _ := m.NodeIndex("bus")
	if m.Nodes[i].Nominal != 12 {
		t.Errorf("nodes.csv gives the whole part 12 kV, bus has %v", m.Nodes[i].Nominal)
	}
	wantFault(t, with(small(), "feeder/nodes.csv", nodes("n2,12\nbus,12.47\n")), "feeder/nodes.csv:3:2", `node "bus" makes its part of the feeder 12.47 kV, node "n2" makes it 12 kV (feeder/nodes.csv:2:2)`)
	// Two banks of different rating feed one part.
	two := "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection\nsub,grid,bus,ABC,10000,69,12.47,Dyn1\nsub2,grid,n2,ABC,10000,69,12,Dyn1\npole,n3,house,B,25,7.2,0.24,1ph\n"
	wantFault(t, with(small(), "feeder/transformers.csv", two), "feeder/transformers.csv:3", `transformer "sub2" makes its part of the feeder 12 kV, transformer "sub" makes it 12.47 kV`)
	m = opened(t, with(small(), "feeder/transformers.csv", two, "feeder/nodes.csv", nodes("n2,12.2\n")), "").Model
	if i, _ := m.NodeIndex("n1"); m.Nodes[i].Nominal != 12.2 {
		t.Errorf("nodes.csv settles it at 12.2 kV, n1 has %v", m.Nodes[i].Nominal)
	}
	// A bank 10 % off what it meets is a warning.
	off := strings.Replace(two, "sub2,grid,n2,ABC,10000,69,12,Dyn1\n", "", 1)
	s := opened(t, with(small(), "feeder/transformers.csv", strings.Replace(off, "7.2", "7.97", 1)), "")
	if len(s.Warnings) != 1 || !strings.Contains(s.Warnings[0].Error(), `feeder/transformers.csv:3: transformer "pole": its high side is rated 13.804 kV line-to-line and meets 12.47 kV at node "n3" (-9.7 %`) {
		t.Errorf("warnings: %v", s.Warnings)
	}
}

func TestParallelBanksOfAnotherPhaseShift(t *testing.T) {
	table := func(other string) string {
		return "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection\nsub,grid,bus,ABC,10000,69,12.47,Dyn1\nsub2,grid,bus,ABC,10000,69,12.47," + other + "\npole,n3,house,B,25,7.2,0.24,1ph\n"
	}
	for other, ok := range map[string]bool{"Dyn1": true, "YNd1": true, "Dyn11": false, "YNyn0": false} {
		fsys := with(small(), "feeder/transformers.csv", table(other))
		if ok {
			opened(t, fsys, "")
			continue
		}
		wantFault(t, fsys, "feeder/transformers.csv:3", `transformer "sub2" (`+other+`) is in parallel with a bank of another phase shift`)
	}
}

func TestIdealLoops(t *testing.T) {
	regs := "regulator,from,to,phases,pt ratio,ct primary [A],rating [A],impedance [%]\nreg,bus,n1,ABC,60,300,,\n"
	wantFault(t, with(small(), "feeder/switches.csv", "switch,from,to,phases,state\nbypass,bus,n1,B,closed\n"), "feeder/regulators.csv:2", "regulator reg, switch bypass: switches and regulators in parallel")
	opened(t, with(small(), "feeder/switches.csv", "switch,from,to,phases,state\nbypass,bus,n1,B,open\n"), "")
	opened(t, with(small(), "feeder/switches.csv", "switch,from,to,phases,state\nbypass,bus,n1,B,closed\n", "feeder/regulators.csv", strings.Replace(regs, ",,\n", ",300,0.5\n", 1)), "")
	wantFault(t, with(small(), "feeder/source.csv", "node,nominal [kV]\ngrid,69\ngrid2,69\n", "feeder/switches.csv", "switch,from,to,phases,state\ntie,grid,grid2,ABC,closed\n"), "feeder/switches.csv:2", "switch tie: switches and regulators in parallel, in a loop or across stiff sources")
}
