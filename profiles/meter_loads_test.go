package profiles

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim/tables"
)

// TestMeterTies: the table, and what is wrong between it, the loads and the data.
func TestMeterTies(t *testing.T) {
	fsys := fstest.MapFS{
		"feeder/meters.csv": {Data: []byte("meter,load,multiplier,net,service [kW],note\nA,L1,,,,\nB,L1,40,yes,96,\nC,L2,,,,\nA,L2,,,,\nB,L1,,,,\nD,L22,,,,\nE,L2,0,,,\n")},
		"m.csv":             {Data: []byte("time,A [kW],B [kW],F [kW],Cc [kW]\n2025-01-01T00:00,1,2,3,4\n2025-01-01T01:00,1.5,2,3,4\n")},
	}
	set, err := OpenMeters(fsys, []MeterBlock{{Files: []string{"m.csv"}, Layout: "wide"}}, "", MeterRules{})
	if err != nil {
		t.Fatal(err)
	}
	var faults tables.Faults
	ties := ReadTies(fsys, "feeder/meters.csv", &faults)
	if len(faults) != 1 || !strings.Contains(faults.Error(), "feeder/meters.csv:8:3: ") || len(ties) != 6 {
		t.Fatalf("%d ties, faults %v", len(ties), faults)
	}
	rules := MeterRules{}.With(ties)
	if ties[0].Multiplier != 1 || ties[1].Multiplier != 40 || !rules.Net["B"] || rules.Net["A"] || rules.ServiceKW["B"] != 96 || len(rules.ServiceKW) != 1 {
		t.Errorf("ties %+v, rules %+v", ties, rules)
	}
	faults, warnings := CheckTies(ties, []string{"L1", "L2", "L3"}, set)
	faults.Sort()
	want := []string{
		`feeder/meters.csv:4: meter "C" has no data in the files of [[meters]]`,
		`feeder/meters.csv:5: meter "A" is tied to load "L2" here and to "L1" at feeder/meters.csv:2: its energy would count twice; tie it to one`,
		`feeder/meters.csv:6: meter "B" is tied to load "L1" twice, see feeder/meters.csv:3; take one row away`,
		`feeder/meters.csv:7: meter "D": there is no load "L22"`,
		`feeder/meters.csv:7: meter "D" has no data in the files of [[meters]]`,
	}
	if len(faults) != len(want) {
		t.Errorf("faults:\n%v", faults)
	}
	for i, f := range faults {
		if i < len(want) && !strings.HasPrefix(f.Error(), want[i]) {
			t.Errorf("got  %s\nwant %s", f.Error(), want[i])
		}
	}
	if len(warnings) != 2 || warnings[0].Text != `meter "Cc" belongs to no load; its 8 kWh are left out` || warnings[1].Text != `meter "F" belongs to no load; its 6 kWh are left out` {
		t.Errorf("warnings %v", warnings)
	}
	if got := Unmetered(ties, []string{"L1", "L3", "L2", "L4"}); fmt.Sprint(got) != "[L3 L4]" {
		t.Errorf("without a meter: %v", got)
	}
}

// TestMeterLoads: two meters of unlike steps and multipliers, one of which begins late,
// add up by hand.
func TestMeterLoads(t *testing.T) {
	fsys := fstest.MapFS{"m.csv": {Data: []byte("time,meter,value [kW],var [kvar]\n" +
		"2025-01-01T00:00,A,4,1\n2025-01-01T01:00,A,6,2\n2025-01-01T02:00,A,5,2\n2025-01-01T03:00,A,4,1\n" +
		"2025-01-01T01:30,B,10,\n2025-01-01T01:45,B,20,3\n2025-01-01T02:00,B,30,3\n2025-01-01T02:15,B,40,3\n")}}
	set, err := OpenMeters(fsys, []MeterBlock{{Files: []string{"m.csv"}}}, "", MeterRules{})
	if err != nil {
		t.Fatal(err)
	}
	ties := []Tie{{Meter: "B", Load: "two", Multiplier: 0.5}, {Meter: "A", Load: "two", Multiplier: 2}, {Meter: "A", Load: "one", Multiplier: 1}, {Meter: "none", Load: "three", Multiplier: 1}}
	start, err := ParseTime("2025-01-01", nil)
	if err != nil {
		t.Fatal(err)
	}
	a := Axis{Start: start, End: start + 4*hour, Step: hour}
	loads, err := set.Loads(ties, a)
	if err != nil || len(loads) != 2 || loads[0].Load != "two" || fmt.Sprint(loads[0].Meters) != "[B A]" {
		t.Fatalf("got %+v, %v", loads, err)
	}
	s, err := NewSampler(a, []*Series{loads[0].Series, loads[1].Series})
	if err != nil {
		t.Fatal(err)
	}
	b := 0.5 / 4
	want := []float64{8, 12 + b*(10+20), 10 + b*(30+40), 8}
	var v [2]float64
	sum := 0.0
	for i, w := range want {
		s.Step(v[:], i)
		if math.Abs(v[0]-w) > 1e-12 {
			t.Errorf("hour %d: %v, want %v", i, v[0], w)
		}
		sum += w
	}
	if math.Abs(loads[0].KWh-sum) > 1e-12 || loads[0].PeakKW != 10+20 || loads[1].KWh != 19 || loads[1].Series.Kvar.Value(1) != 2 {
		t.Errorf("%v kWh, want %v; peak %v", loads[0].KWh, sum, loads[0].PeakKW)
	}
	if o := loads[0].Outside; len(o) != 1 || o[0].Rule != ruleAbsent || o[0].Count != 12 || o[0].Energy != 0 || o[0].Meter != "B" {
		t.Errorf("outside: %+v", o)
	}
	_, err = set.Loads(ties, Axis{Start: start + 9*hour, End: start + 10*hour, Step: hour})
	if err == nil || !strings.Contains(err.Error(), `load "one": its meters have no value inside the period 2025-01-01T09:00:00+00:00 to`) {
		t.Errorf("got %v", err)
	}
}

// TestMeterNearEnd: a meter whose first days are not there goes on as a week later, and
// beyond a week it was not there.
func TestMeterNearEnd(t *testing.T) {
	values := veeValues(30, hour, 2)
	set, m := veeMeter(t, values, hour, MeterRules{}, MeterBlock{})
	start, end := m.Span()
	a := Axis{Start: start - 9*day, End: end + day, Step: hour}
	loads, err := set.Loads([]Tie{{Meter: "A", Load: "L", Multiplier: 1}}, a)
	if err != nil {
		t.Fatal(err)
	}
	s := loads[0].Series
	for k := range s.Len() {
		from, _ := s.Interval(k)
		want := 0.0
		switch {
		case from >= end:
			want = m.Value(int((from - 7*day - start) / hour))
		case from >= start:
			want = m.Value(int((from - start) / hour))
		case from >= start-7*day:
			want = m.Value(int((from + 7*day - start) / hour))
		}
		if s.Value(k) != want {
			t.Fatalf("%s: %v, want %v", Format(from, nil), s.Value(k), want)
		}
	}
	if o := loads[0].Outside; len(o) != 2 || o[0].Count != 8*24 || o[1].Count != 2*24 || o[1].Energy != 0 || o[0].Energy <= 0 {
		t.Errorf("outside: %+v", o)
	}
}

// TestEnergyCheck: kWh labelled kW and the other way round, for steps of 15, 30 and 60
// minutes; what is merely another year is not told.
func TestEnergyCheck(t *testing.T) {
	at := tables.Pos{File: "loads.csv", Line: 7}
	for _, c := range []struct {
		claim EnergyClaim
		want  string
	}{
		{EnergyClaim{Step: 15 * minute, MeteredKWh: 2500, TableKWh: 10000}, "about 0.25 times as much: values in kWh every 15 min seem to be labelled [kW]"},
		{EnergyClaim{Step: 15 * minute, MeteredKWh: 43000, TableKWh: 10000}, "about 4 times as much: values in kW every 15 min seem to be labelled [kWh]"},
		{EnergyClaim{Step: 30 * minute, MeteredKWh: 20500, TableKWh: 10000}, "about 2 times as much"},
		{EnergyClaim{Step: 5 * minute, MeteredKW: 1.1, TableKW: 12}, "a peak of 1.1 kW metered, 12 kW in the table, about 0.08333 times as much"},
		{EnergyClaim{Step: 15 * minute, MeteredKWh: math.NaN(), MeteredKW: 20, TableKW: 5}, "about 4 times"},
		{EnergyClaim{Step: hour, MeteredKWh: 9.9e6, TableKWh: 10000}, "about 1000 times as much: the unit seems to be [Wh]"},
		{EnergyClaim{Step: hour, MeteredKWh: 10, TableKWh: 10000}, "about 0.001 times as much: the unit seems to be [MWh]"},
		{EnergyClaim{Step: hour, MeteredKWh: 40000, TableKWh: 10000}, "4 times as much: look at the meter's multiplier"},
		{EnergyClaim{Step: 15 * minute, MeteredKWh: 80 * 10000, TableKWh: 10000}, "80 times as much: look at the meter's multiplier"},
		{EnergyClaim{Step: 15 * minute, MeteredKWh: 13000, TableKWh: 10000}, ""},
		{EnergyClaim{Step: 15 * minute, MeteredKWh: 5000, TableKWh: 10000}, ""},
		{EnergyClaim{Step: 15 * minute, MeteredKWh: 5000}, ""},
		{EnergyClaim{MeteredKWh: 5000, TableKWh: 5000}, ""},
	} {
		c.claim.Load, c.claim.At = "L", at
		f, odd := EnergyCheck(c.claim)
		if odd != (c.want != "") || !strings.Contains(f.Text, c.want) || odd && f.Pos != at {
			t.Errorf("%+v: got %q, want %q", c.claim, f.Text, c.want)
		}
	}
}
