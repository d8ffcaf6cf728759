package feeder

import (
	"math"
	"strings"
	"testing"
)

func TestSourceImpedance(t *testing.T) {
	source := func(row string) string {
		return "node,nominal [kV],short circuit 3ph [MVA],x/r 3ph,short circuit 1ph [MVA],x/r 1ph\ngrid,69," + row + "\n"
	}
	// 69²/1000 = 4.761 ohm at X/R 10; 3·69²/900 − 2·Z1 is Z0.
	m := opened(t, with(small(), "feeder/source.csv", source("1000,10,900,10")), "").Model
	s := m.Sources[0]
	r1 := 4.761 / math.Sqrt(101)
	r0 := 3*69*69/900.0/math.Sqrt(101) - 2*r1
	if math.Abs(real(s.Z1)-r1) > 1e-12 || math.Abs(imag(s.Z1)-10*r1) > 1e-12 || math.Abs(real(s.Z0)-r0) > 1e-12 || math.Abs(imag(s.Z0)-10*r0) > 1e-12 || s.Stiff() {
		t.Errorf("Z1 %v, Z0 %v; want %v and %v times 1+10j", s.Z1, s.Z0, r1, r0)
	}
	s = opened(t, with(small(), "feeder/source.csv", source("1000,10,,")), "").Model.Sources[0]
	if s.Z0 != s.Z1 {
		t.Errorf("blank single-phase short circuit: Z0 %v, want Z1 %v", s.Z0, s.Z1)
	}
	if !opened(t, with(small(), "feeder/source.csv", source(",,,")), "").Model.Sources[0].Stiff() {
		t.Error("a source without short circuits is stiff")
	}
	wantFault(t, with(small(), "feeder/source.csv", source(",10,,")), "feeder/source.csv:2", "short circuit 3ph [MVA] is blank")
	wantFault(t, with(small(), "feeder/source.csv", source("1000,,,")), "feeder/source.csv:2", "x/r 3ph is blank")
	wantFault(t, with(small(), "feeder/source.csv", source("1000,10,,8")), "feeder/source.csv:2", "x/r 1ph is given without")
	wantFault(t, with(small(), "feeder/source.csv", source("1000,10,2000,10")), "feeder/source.csv:2", "which no source has")
}

func TestRegulatorUnits(t *testing.T) {
	bank := func(connection, ganged string) string {
		return "regulator,from,to,phases,connection,ganged,pt ratio,ct primary [A]\nreg,bus,n1,ABC," + connection + "," + ganged + ",104,300\n"
	}
	settings := func(rows string) string {
		return "regulator,phase,set [V],bandwidth [V],delay [s],tap,highest tap\n" + rows
	}
	for _, tt := range []struct{ connection, units string }{
		{"wye", "A B C"}, {"open-delta AB-CB", "AB CB"}, {"Open-Delta bc-ac", "BC AC"}, {"open-delta CA-BA", "CA BA"}, {"closed-delta", "AB BC CA"},
	} {
		g := opened(t, with(small(), "feeder/regulators.csv", bank(tt.connection, ""), "feeder/regulator-settings.csv", settings("reg,All,120,2,30,3,10\n")), "").Model.Regulators[0]
		got := ""
		for _, u := range g.Units {
			got += " " + u.Name(g.Connection)
			if u.Settings == nil || u.Settings.Tap != 3 || u.Settings.HighestTap != 10 || u.Settings.LowestTap != -16 || u.Watched {
				t.Errorf("%s %s: %+v", tt.connection, u.Name(g.Connection), u)
			}
		}
		if got != " "+tt.units {
			t.Errorf("%s has units%s, want %s", tt.connection, got, tt.units)
		}
	}
	g := opened(t, with(small(), "feeder/regulators.csv", bank("", "yes"), "feeder/regulator-settings.csv", settings("reg,B,120,2,30,,\n")), "").Model.Regulators[0]
	if !g.Ganged || g.Units[0].Watched || !g.Units[1].Watched || g.Units[1].Settings.Set != 120 || g.Units[2].Settings != nil {
		t.Errorf("ganged, B watched: %+v", g.Units)
	}
	fsys := with(small(), "feeder/regulators.csv", bank("", "yes"), "feeder/regulator-settings.csv", settings("reg,all,120,2,30,,\n"),
		"cases/c/regulator-settings.csv", "regulator,phase,set [V]\nreg,all,124\n")
	g = opened(t, fsys, "c").Model.Regulators[0]
	if !g.Units[0].Watched || g.Units[1].Watched || g.Units[0].Settings.Set != 124 || g.Units[0].Settings.Delay != 30 {
		t.Errorf("ganged, all watches the first, a case's all is that one: %+v", g.Units)
	}
	for _, tt := range []struct{ connection, ganged, rows, at, want string }{
		{"", "yes", "reg,A,120,2,30,,\nreg,B,120,2,30,,\n", "feeder/regulator-settings.csv:3:2", "is ganged and has one watched phase"},
		{"closed-delta", "", "reg,A,120,2,30,,\n", "feeder/regulator-settings.csv:2:2", `has no unit "A"; its units are AB, BC, CA`},
		{"", "", "rig,A,120,2,30,,\n", "feeder/regulator-settings.csv:2:1", `unknown regulator "rig"; did you mean "reg"?`},
		{"", "", "reg,A,120,2,0.5,,\n", "feeder/regulator-settings.csv:2:5", "delay is at least 1 s"},
		{"", "", "reg,A,120,2,30,17,\n", "feeder/regulator-settings.csv:2:6", "tap 17 is outside -16 to 16"},
		{"", "", "reg,A,120,2,30,,20\n", "feeder/regulator-settings.csv:2:7", "highest tap 20 is outside its 16 steps"},
		{"open-delta AB-BC", "", "", "feeder/regulators.csv:2:5", "is not one of wye, open-delta AB-CB"},
	} {
		wantFault(t, with(small(), "feeder/regulators.csv", bank(tt.connection, tt.ganged), "feeder/regulator-settings.csv", settings(tt.rows)), tt.at, tt.want)
	}
	s := opened(t, with(small(), "feeder/regulator-settings.csv", settings("reg,A,120,2,30,,\n")), "")
	if len(s.Warnings) != 2 || !strings.Contains(s.Warnings[1].Text, `regulator "reg" C has no settings: it stays at tap 0`) {
		t.Errorf("warnings: %v", s.Warnings)
	}
}

func TestCapacitorControls(t *testing.T) {
	settings := func(head, row string) string { return "capacitor,control," + head + "\ncap," + row + "\n" }
	control := func(head, row string) CapacitorSettings {
		t.Helper()
		c := opened(t, with(small(), "feeder/capacitor-settings.csv", settings(head, row)), "").Model.Capacitors[0].Control
		if c == nil {
			t.Fatal("no control")
		}
		return *c
	}
	c := control("voltage on [V],voltage off [V],phase,daily limit", "voltage,118,124,BC,6")
	if c.Control != CapacitorVoltage || c.On != 118 || c.Off != 124 || len(c.Phase) != 2 || c.DailyLimit != 6 || c.Delay != 60 || c.Lockout != 300 || !math.IsNaN(c.OverrideOn) {
		t.Errorf("voltage: %+v", c)
	}
	c = control("current on [A],current off [A],watched section,delay [min]", "current,80,60,reg,1.5")
	if c.Control != CapacitorCurrent || *c.Watched != (Watched{"regulator", 0}) || c.Delay != 90 || c.Phase != nil {
		t.Errorf("current: %+v", c)
	}
	c = control("power factor on,power factor off,watched section", "power factor,0.95,-0.99,sub")
	if c.Control != CapacitorPowerFactor || *c.Watched != (Watched{"transformer", 0}) || c.On != 0.95 || c.Off != -0.99 {
		t.Errorf("power factor: %+v", c)
	}
	c = control("temperature on [degF],temperature off [degF],profile,voltage off [V]", "temperature,86,77,air,126")
	if c.Control != CapacitorTemperature || c.On != 30 || c.Off != 25 || c.Profile != "air" || c.OverrideOff != 126 || !math.IsNaN(c.OverrideOn) {
		t.Errorf("temperature: %+v", c)
	}
	c = control("time on,time off,days", "time,17:30,05:00,Weekdays")
	if c.Control != CapacitorTime || c.TimeOn != 63000 || c.TimeOff != 18000 || !c.Weekdays {
		t.Errorf("time: %+v", c)
	}
	if c = control("phase", "held,"); c.Control != CapacitorHeld {
		t.Errorf("held: %+v", c)
	}
	for _, tt := range []struct{ head, row, at, want string }{
		{"kvar on [kvar],kvar off [kvar]", "kvar,100,-100", "2", "needs a watched section"},
		{"kvar on [kvar],kvar off [kvar],watched section", "kvar,100,-100,s7", "2:5", `there is no section, switch, transformer or regulator "s7"; did you mean "s1"?`},
		{"kvar on [kvar],watched section", "kvar,100,s1", "2", "control kvar needs kvar on and kvar off"},
		{"kvar on [kvar],kvar off [kvar],watched section,phase", "kvar,100,-100,s2,A", "2:6", `section "s2" has no phase A; it has B`},
		{"kvar on [kvar],kvar off [kvar],watched section,phase", "kvar,100,-100,s1,AB", "2:6", "want one phase"},
		{"voltage on [V],voltage off [V]", "voltage,120,120", "2:4", "voltage on and off are the same"},
		{"power factor on,power factor off,watched section", "power factor,1.2,-0.99,s1", "2:3", "between -1 and 1 and not 0"},
		{"temperature on [degC],temperature off [degC]", "temperature,30,25", "2", "needs the profile"},
		{"time on,time off", "time,24:00,5:00", "2:3", `time on "24:00": want hh:mm`},
		{"time on,time off", "time,5:00,", "2", "time off is blank"},
		{"time on,time off", "time,5:00,05:00", "2:4", "are the same"},
		{"time on,time off,voltage on [V],voltage off [V]", "time,5:00,6:00,127,117", "2:5", "on must be the lower"},
	} {
		wantFault(t, with(small(), "feeder/capacitor-settings.csv", settings(tt.head, tt.row)), "feeder/capacitor-settings.csv:"+tt.at, tt.want)
	}
	wantFault(t, with(small(), "feeder/capacitor-settings.csv", "capacitor,control\nkap,held\n"), "feeder/capacitor-settings.csv:2:1", `unknown capacitor "kap"; did you mean "cap"?`)
}

func TestLoadAmounts(t *testing.T) {
	loads := func(row string) string {
		return "load,node,phases,connection,real [kW],connected [kVA],energy [kWh],reactive [kvar],power factor,zip,profile\nl," + row + "\n"
	}
	load := func(row string, more ...string) Load {
		t.Helper()
		return opened(t, with(with(small(), "feeder/loads.csv", loads(row)), more...), "").Model.Loads[0]
	}
	l := load("n2,ABC,delta,100,,,50,,current,")
	if len(l.Pairs) != 3 || l.Pairs[2] != (Pair{C, A}) || l.KVAR != 50 || l.KVARPerKW != 0.5 || l.ZIP != (ZIP{PI: 1, QI: 1}) {
		t.Errorf("delta: %+v", l)
	}
	l = load("n2,CB,wye,,,,,0.8,,p")
	if word(l.Phases) != "BC" || !Unknown(l.KW) || math.Abs(l.KVARPerKW-0.75) > 1e-12 || l.EnergyKWh != nil || l.Profile != "p" {
		t.Errorf("by a profile: %+v", l)
	}
	l = load("n2,A,wye,,,5000,,0.8,,p")
	if !Unknown(l.KW) || len(l.EnergyKWh) != 1 || l.EnergyKWh[0] != (MonthEnergy{"", 5000}) {
		t.Errorf("by energy: %+v", l)
	}
	l = load("n2,A,wye,,,,,,,p", "feeder/energies.csv", "load,month,energy [MWh]\nl,2025-02,3\nl,2025-01,4\n")
	if len(l.EnergyKWh) != 2 || l.EnergyKWh[0] != (MonthEnergy{"2025-01", 4000}) {
		t.Errorf("by month: %+v", l)
	}
	// Coefficients rounded to two digits: the rest goes to constant power.
	l = load("n2,A,wye,1,,,,,res,", "feeder/zip.csv", "zip,pz,pi,pp,qz,qi,qp\nres,1.5,-2.31,1.8,7.41,-11.97,5.55\n")
	if math.Abs(l.ZIP.PP-1.81) > 1e-12 || math.Abs(l.ZIP.QP-5.56) > 1e-12 {
		t.Errorf("zip: %+v", l.ZIP)
	}
	for _, tt := range []struct{ row, at, want string }{
		{"n2,A,wye,1,,5,,,,", "2", "real [kW] and energy [kWh] are two sources of one value"},
		{"n2,A,wye,,10,,,,,", "2", "connected [kVA] is a weight and no amount: [allocation] in study.toml names what was measured"},
		{"n2,A,wye,,,,,,,", "2", "how much is it?"},
		{"n2,A,wye,1,,,1,0.9,,", "2:9", "reactive [kvar] and power factor are two sources of one value"},
		{"n2,A,wye,,,,1,,,p", "2:8", "reactive [kvar] goes with real [kW] only"},
		{"n2,A,wye,1,,,,95,,", "2:9", "between -1 and 1 and not 0, got 95; 95 % is 0.95"},
		{"n2,A,wye,1,,,,0,,", "2:9", "between -1 and 1 and not 0, got 0"},
		{"n2,A,wye,1,,,,,pwer,", "2:10", `unknown zip "pwer"; did you mean "power"?`},
		{"n2,A,delta,1,,,,,,", "2:3", "a delta connection stands on a pair such as AB, or on ABC"},
		{"n2,AA,wye,1,,,,,,", "2:3", "A stands twice"},
		{"n2,12,wye,1,,,,,,", "2:3", "has no phase 1"},
		{"n2,AN,wye,1,,,,,,", "2:3", "want some of A, B, C"},
		{"n9,A,wye,1,,,,,,", "2:2", `unknown node "n9"; did you mean "n1"?`},
		{"n2,A,wye,-1,,,,,,", "2:5", "must not be negative, got -1"},
	} {
		wantFault(t, with(small(), "feeder/loads.csv", loads(tt.row)), "feeder/loads.csv:"+tt.at, tt.want)
	}
	wantFault(t, with(small(), "feeder/zip.csv", "zip,pz,pi,pp,qz,qi,qp\nres,0.5,0.5,0.1,0,0,1\n"), "feeder/zip.csv:2:2", "pz, pi and pp add up to 1.1; want 1 within 0.02")
	wantFault(t, with(small(), "feeder/zip.csv", "zip,pz,pi,pp,qz,qi,qp\npower,0,0,1,0,0,1\n"), "feeder/zip.csv:2:1", `zip "power" is built in`)
	wantFault(t, with(small(), "feeder/energies.csv", "load,month,energy [kWh]\nl1,2025-1,3\n"), "feeder/energies.csv:2:2", "want one such as 2025-01")
	wantFault(t, with(small(), "feeder/energies.csv", "load,month,energy [kWh]\nl7,2025-01,3\n"), "feeder/energies.csv:2:1", `unknown load "l7"`)
	s := opened(t, with(small(), "feeder/loads.csv", ""), "")
	if len(s.Model.Loads) != 0 || len(s.Warnings) != 1 || !strings.Contains(s.Warnings[0].Text, "the feeder has no loads") {
		t.Errorf("no loads: %v", s.Warnings)
	}
}

func TestPlantFaults(t *testing.T) {
	g := "generator,node,phases,kind,rating [kVA],profile,dc [kW],function\n"
	wantFault(t, with(small(), "feeder/generators.csv", "generator,node,phases,kind,rating [kVA],dc [kW]\ng,n2,ABC,wind,5,6\n"), "feeder/generators.csv:2:6", "belongs to kind solar")
	wantFault(t, with(small(), "feeder/generators.csv", g+"g,n2,ABC,solar,5,sun,6,\n"), "feeder/generators.csv:2", "given twice")
	wantFault(t, with(small(), "feeder/generators.csv", "generator,node,phases,kind,rating [kVA],real [kW],function\ng,n2,ABC,solar,5,5,vv\n"), "feeder/generators.csv:2:7", `no function "vv"`)
	wantFault(t, with(small(), "feeder/generators.csv", "generator,node,phases,kind,rating [kVA]\ng,n2,ABC,solar,5\n"), "feeder/generators.csv:2", "give real [kW], a profile")
	b := "battery,node,phases,energy [kWh],power [kW],dispatch,target [kW],watched section,reserve [%]\n"
	wantFault(t, with(small(), "feeder/batteries.csv", b+"b,n2,ABC,40,10,peak shaving,,s1,\n"), "feeder/batteries.csv:2", "needs target")
	wantFault(t, with(small(), "feeder/batteries.csv", b+"b,n2,ABC,40,10,self-consumption,,,\n"), "feeder/batteries.csv:2", "needs a watched section")
	wantFault(t, with(small(), "feeder/batteries.csv", b+"b,n2,ABC,40,10,schedule,,,120\n"), "feeder/batteries.csv:2:9", "at most 100 %")
	c := "charger,node,phases,power [kW],arrival,departure,energy [kWh],charging,from,to\n"
	wantFault(t, with(small(), "feeder/chargers.csv", c+"c,n2,A,7,18:00,25:00,20,unmanaged,,\n"), "feeder/chargers.csv:2:6", "want hh:mm")
	wantFault(t, with(small(), "feeder/chargers.csv", c+"c,n2,A,7,18:00,7:00,20,unmanaged,1:00,5:00\n"), "feeder/chargers.csv:2", "it is unmanaged")
	f := "function,reactive,v1 [pu],reactive power [%]\n"
	wantFault(t, with(small(), "feeder/inverter-functions.csv", f+"f,constant reactive power,,\n"), "feeder/inverter-functions.csv:2", "reactive power is blank")
	wantFault(t, with(small(), "feeder/inverter-functions.csv", f+"f,constant power factor,0.9,\n"), "feeder/inverter-functions.csv:2:3", "belongs to voltage-reactive power")
	wantFault(t, with(small(), "feeder/load.csv", "a,b\n"), "feeder/load.csv", "this table is not known; did you mean loads.csv?")
	wantFault(t, with(small(), "cases/c/x.toml", "x", "feeder/Loads.CSV", "a"), "feeder/Loads.CSV", "did you mean loads.csv?")
}
