package study

import (
	"reflect"
	"strings"
	"testing"
	"testing/fstest"
)

// sunnyFeeder is the small feeder with two plants, and cases that set what one of them
// does with reactive power.
func sunnyFeeder() fstest.MapFS {
	f := smallFeeder()
	file := func(s string) *fstest.MapFile { return &fstest.MapFile{Data: []byte(s)} }
	f["feeder/generators.csv"] = file("generator,node,phases,kind,rating [kVA],real [kW],power factor\nG1,L,ABC,solar,400,300,1\nG2,L,ABC,engine,100,60,1\n")
	f["cases/curves/inverter-functions.csv"] = file("function,category,reactive,v4 [pu],q4 [pu],open loop response time [s],voltage-active power,active v1 [pu],priority\n" +
		"vv,B,voltage-reactive power,1.09,-0.40,,yes,1.05,reactive\n")
	f["cases/curves/generators.csv"] = file("generator,power factor,function\nG1,-,vv\n")
	f["cases/absorbs/generators.csv"] = file("generator,power factor\nG1,-0.95\n")
	return f
}

func sheetOf(c *Comparison, name string) (out map[string][]string) {
	out = map[string][]string{}
	for _, r := range sheetRows(c.Cases[0].Study.Model, c.Cases[c.index(name)].Study.Model) {
		if r.Device != "R1" && r.Device != "C1" {
			out[r.Device] = append(out[r.Device], strings.TrimSpace(r.Setting+" "+r.Unit)+": "+r.Present+" > "+r.New)
		}
	}
	return out
}

// The points that the table leaves blank are entered as the defaults of category B: IEEE
// Std 1547-2018, Table 8 (V1 0.92, V2 0.98, V3 1.02, Q1 0.44, Q2 and Q3 0, 5 s) and Table
// 10 (V2 1.10, 10 s).
func TestAnInvertersSheetHasEveryPointOfItsCurve(t *testing.T) {
	c := compared(t, placed(t, sunnyFeeder()), "curves", "absorbs")
	vv := func(s string) string { return "voltage-reactive power: " + s }
	want := map[string][]string{"G1": {
		"nameplate rating: 1 pu of active and of reactive power kVA: 400 > 400",
		"normal operating performance category:  > B",
		"reactive power function: constant power factor > voltage-reactive power",
		"power factor: 1 > ", "excitation: none: unity > ",
		vv("V_ref pu:  > 1"), vv("V_ref follows the voltage by itself:  > off"),
		vv("V1 pu:  > 0.92"), vv("Q1 pu:  > 0.44"), vv("V2 pu:  > 0.98"), vv("Q2 pu:  > 0"),
		vv("V3 pu:  > 1.02"), vv("Q3 pu:  > 0"), vv("V4 pu:  > 1.09"), vv("Q4 pu:  > -0.4"),
		"open loop response time s:  > 5",
		"voltage-active power:  > on", "voltage-active power: V1 pu:  > 1.05", "voltage-active power: V2 pu:  > 1.1", "voltage-active power: P2 pu:  > 0",
		"voltage-active power: open loop response time s:  > 10",
		"active power limit pu:  > none", "priority at the rating:  > reactive power", "reactive power without active power (at night):  > off",
	}}
	if got := sheetOf(c, "curves"); !reflect.DeepEqual(got, want) {
		t.Errorf("sheet\n got %q\nwant %q", got, want)
	}
	want = map[string][]string{"G1": {
		"nameplate rating: 1 pu of active and of reactive power kVA: 400 > 400",
		"reactive power function: constant power factor > constant power factor",
		"power factor: 1 > 0.95", "excitation: none: unity > absorbing",
	}}
	if got := sheetOf(c, "absorbs"); !reflect.DeepEqual(got, want) {
		t.Errorf("sheet\n got %q\nwant %q", got, want)
	}
	for _, r := range c.Ranking {
		has := false
		for _, s := range c.Sheets {
			has = has || s.Case == r.Case
		}
		if want := r.Undominated && r.Case != "base"; has != want {
			t.Errorf("case %s, undominated %v: has a sheet %v", r.Case, r.Undominated, has)
		}
		if said(c.Cautions, r.Case, "changes what the feeder serves") {
			t.Errorf("case %s changes settings alone, but a caution says otherwise", r.Case)
		}
	}
}

// A base whose plants have functions shows them in every sheet, and a case that takes a
// function away says what stands in its place.
func TestAnInvertersSheetWithoutItsFunction(t *testing.T) {
	f := sunnyFeeder()
	file := func(s string) *fstest.MapFile { return &fstest.MapFile{Data: []byte(s)} }
	f["feeder/generators.csv"] = file("generator,node,phases,kind,rating [kVA],real [kW],function\nG1,L,ABC,solar,400,300,wv\n")
	f["feeder/inverter-functions.csv"] = file("function,category,reactive,active power limit [%],at night\nwv,A,active power-reactive power,80,yes\n")
	f["cases/off/generators.csv"] = file("generator,function\nG1,-\n")
	for _, name := range []string{"cases/curves/inverter-functions.csv", "cases/curves/generators.csv", "cases/absorbs/generators.csv"} {
		delete(f, name)
	}
	wv := func(s string) string { return "active power-reactive power: " + s }
	// IEEE Std 1547-2018, Table 9, category A: P 0.2, 0.5, 1; Q 0, 0, -0.25.
	want := map[string][]string{"G1": {
		"nameplate rating: 1 pu of active and of reactive power kVA: 400 > 400",
		"normal operating performance category: A > ",
		"reactive power function: active power-reactive power > constant power factor",
		"power factor:  > 1", "excitation:  > none: unity",
		wv("P1 pu: 0.2 > "), wv("Q1 pu: 0 > "), wv("P2 pu: 0.5 > "), wv("Q2 pu: 0 > "), wv("P3 pu: 1 > "), wv("Q3 pu: -0.25 > "),
		"open loop response time s: 10 > ", "voltage-active power: off > ", "active power limit pu: 0.8 > ",
		"priority at the rating: reactive power > ", "reactive power without active power (at night): on > ",
	}}
	if got := sheetOf(compared(t, placed(t, f), "off"), "off"); !reflect.DeepEqual(got, want) {
		t.Errorf("sheet\n got %q\nwant %q", got, want)
	}
}
