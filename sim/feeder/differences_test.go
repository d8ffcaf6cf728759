package feeder

import (
	"reflect"
	"testing"
	"testing/fstest"
)

// differing is a small study with a case that changes, adds and removes.
func differing() fstest.MapFS {
	file := func(s string) *fstest.MapFile { return &fstest.MapFile{Data: []byte(s)} }
	return fstest.MapFS{
		"study.toml":               file("[period]\nstart = 2025-01-01\nend = 2025-01-02\nzone = \"UTC\"\n[prices]\nenergy = 0.1\n"),
		"feeder/source.csv":        file("node,nominal [kV]\nS,12.47\n"),
		"feeder/sections.csv":      file("section,from,to,phases,length [ft],construction\nS-R,S,R,ABC,1000,Z\nr-L,r,L,ABC,2000,Z\n"),
		"feeder/constructions.csv": file("construction,kind,r1 [ohm/mi],x1 [ohm/mi],r0 [ohm/mi],x0 [ohm/mi]\nZ,sequence,0.3,0.6,0.6,1.9\n"),
		"feeder/regulators.csv":    file("regulator,from,to,phases,pt ratio,ct primary [A]\nR1,R,r,ABC,60,100\n"),
		"feeder/loads.csv":         file("load,node,phases,real [kW],power factor\nL1,L,ABC,300,0.95\nL2,L,A,30,0.95\n"),
		"cases/same/case.toml":     file("title = \"the same, said again\"\n[prices]\nenergy = 0.1\n"),
		"cases/same/loads.csv":     file("load,real [kW],zip,note\nL1,300,power,what is there anyway\n"),
		"cases/other/case.toml":    file("[scale]\nload = 1.1\n"),
		"cases/other/loads.csv":    file("load,node,phases,real [kW],remove\nL1,,,0,\nL2,,,,yes\nL3,L,B,7,\n"),
		"cases/other/sections.csv": file("section,length [m]\nS-R,400\n"),
		"cases/other/zip.csv":      file("zip,pz,pi,pp,qz,qi,qp\nhalf,0.5,0,0.5,0.5,0,0.5\n"),
		"feeder/regulator-settings.csv": file("regulator,phase,set [V],bandwidth [V],delay [s]\n" +
			"R1,all,120,2,30\n"),
		"cases/other/regulator-settings.csv": file("regulator,phase,bandwidth [V],highest tap\nR1,all,3,\nR1,B,-,0\n"),
	}
}

func TestDifferencesOfACaseThatSaysTheSameAreNone(t *testing.T) {
	fsys := differing()
	base, err := Open(fsys, "")
	if err != nil {
		t.Fatal(err)
	}
	same, err := Open(fsys, "same")
	if err != nil {
		t.Fatal(err)
	}
	if d := Differences(base, same); len(d) != 0 {
		t.Errorf("differences of equal studies: %v", d)
	}
}

func TestDifferencesNameEveryCell(t *testing.T) {
	fsys := differing()
	// A row twice in a case's table is a fault: one row for B alone.
	fsys["cases/other/regulator-settings.csv"].Data = []byte("regulator,phase,bandwidth [V]\nR1,A,3\nR1,C,3\n")
	base, err := Open(fsys, "")
	if err != nil {
		t.Fatal(err)
	}
	other, err := Open(fsys, "other")
	if err != nil {
		t.Fatal(err)
	}
	var got [][5]string
	for _, d := range Differences(base, other) {
		got = append(got, [5]string{d.Table, d.Key, d.Title(), d.Base, d.Other})
		if d.At.File == "" {
			t.Errorf("%s %s: no place", d.Table, d.Key)
		}
	}
	want := [][5]string{
		{"study.toml", "scale.load", "", "1", "1.1"},
		{"sections", "S-R", "length [km]", "0.3048", "0.4"},
		{"regulator-settings", "R1, A", "bandwidth [V]", "2", "3"},
		{"regulator-settings", "R1, C", "bandwidth [V]", "2", "3"},
		{"loads", "L1", "real [kW]", "300", "0"},
		{"loads", "L2", "(row)", "present", ""},
		{"loads", "L3", "(row)", "", "present"},
		{"loads", "L3", "node", "", "L"},
		{"loads", "L3", "phases", "", "B"},
		{"loads", "L3", "connection", "", "wye"},
		{"loads", "L3", "real [kW]", "", "7"},
		{"loads", "L3", "zip", "", "power"},
		{"loads", "L3", "customers", "", "1"},
		{"zip", "half", "(row)", "", "present"},
		{"zip", "half", "pz", "", "0.5"},
		{"zip", "half", "pi", "", "0"},
		{"zip", "half", "pp", "", "0.5"},
		{"zip", "half", "qz", "", "0.5"},
		{"zip", "half", "qi", "", "0"},
		{"zip", "half", "qp", "", "0.5"},
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("differences\n got %v\nwant %v", got, want)
	}
}

// The tables are walked in the order of their fields, under the names of tableNames.
func TestDifferencesKnowEveryTable(t *testing.T) {
	read := tableNames()
	n := 0
	of := reflect.TypeFor[feederTables]()
	for i := range of.NumField() {
		f := of.Field(i)
		if f.Type.Kind() == reflect.Slice && f.Type.Elem().Kind() == reflect.Struct && f.Name != "assumed" {
			if n < len(read) && f.Type.Elem().Field(0).Name != "Row" {
				t.Errorf("field %s is no table", f.Name)
			}
			n++
		}
	}
	if n != len(read) {
		t.Errorf("%d tables of rows, %d names", n, len(read))
	}
}
