package study

import (
	"context"
	"fmt"
	"strings"
	"testing"
	"testing/fstest"
)

// smallFeeder is two days by the hour on a feeder with a regulator, a capacitor that
// switches, a centre-tapped service and two loads, and four cases: one that says what is
// there anyway, one with a wider band, one that cannot be solved at its peaks, and one
// of another period.
func smallFeeder() fstest.MapFS {
	file := func(s string) *fstest.MapFile { return &fstest.MapFile{Data: []byte(s)} }
	var shape strings.Builder
	shape.WriteString("time,day [pu],dear [USD/kWh]\n")
	for h := range 48 {
		load := []float64{0.3, 0.25, 0.3, 0.5, 0.8, 1, 0.7, 0.45}[h/3%8]
		fmt.Fprintf(&shape, "2025-03-%02dT%02d:00,%g,%g\n", 1+h/24, h%24, load, 0.05+0.1*load)
	}
	return fstest.MapFS{
		"study.toml": file("title = \"Two days\"\n[period]\nstart = 2025-03-01\nend = 2025-03-03\nstep = \"1h\"\nzone = \"UTC\"\n" +
			"[[profiles]]\nfiles = [\"profiles/*.csv\"]\n[prices]\nenergy = 0.1\ndemand = 8\noperation = 0.5\nrate = 0.07\nyears = 20\n"),
		"profiles/shape.csv":       file(shape.String()),
		"feeder/source.csv":        file("node,nominal [kV],voltage [pu]\nS,12.47,1.02\n"),
		"feeder/constructions.csv": file("construction,kind,r1 [ohm/mi],x1 [ohm/mi],r0 [ohm/mi],x0 [ohm/mi],phase conductor,neutral conductor,insulation [in]\nZ,sequence,0.3,0.6,0.7,1.9,,,\nT,triplex,,,,,1/0 AA,1/0 AA,0.08\n"),
		"feeder/sections.csv": file("section,from,to,phases,length [mi],construction\nS-R,S,R,ABC,2,Z\nr-L,r,L,ABC,3,Z\nL-M,L,M,A,1,Z\n" +
			"x-y,x,y,12,0.02,T\n"),
		"feeder/transformers.csv":           file("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,no-load loss [W],resistance [%],reactance [%]\nTx,M,x,A,50,7.2,0.24,center-tap,120,1.1,1.8\n"),
		"feeder/regulators.csv":             file("regulator,from,to,phases,pt ratio,ct primary [A],no-load loss [W]\nR1,R,r,ABC,60,150,50\n"),
		"feeder/regulator-settings.csv":     file("regulator,phase,set [V],bandwidth [V],delay [s],ldc r [V],ldc x [V]\nR1,all,121,2,30,3,4\n"),
		"feeder/capacitors.csv":             file("capacitor,node,phases,size [kvar]\nC1,L,ABC,600\n"),
		"feeder/capacitor-settings.csv":     file("capacitor,control,voltage on [V],voltage off [V],delay [s]\nC1,voltage,117,124,90\n"),
		"feeder/loads.csv":                  file("load,node,phases,real [kW],power factor,profile,customers\nL1,L,ABC,2400,0.92,day,200\nL2,y,12,30,0.95,day,5\n"),
		"cases/same/regulator-settings.csv": file("regulator,phase,bandwidth [V]\nR1,all,2\n"),
		"cases/wide/regulator-settings.csv": file("regulator,phase,bandwidth [V],ldc r [V],ldc x [V]\nR1,all,4,0,0\n"),
		"cases/heavy/case.toml":             file("[scale]\nload = 9\n"),
		"cases/short/case.toml":             file("[period]\nstart = 2025-03-01\nend = 2025-03-02\n"),
	}
}

// placed is a study with a folder for its results.
func placed(t *testing.T, fsys fstest.MapFS) Place {
	t.Helper()
	return Place{FS: fsys, Results: t.TempDir(), Version: "test"}
}

// ran chooses and runs cases.
func ran(t *testing.T, p Place, s Settings, names ...string) ([]*Case, []LeftOut) {
	t.Helper()
	studies, left, err := Choose(p, names)
	if err != nil {
		t.Fatal(err)
	}
	cases, err := Run(context.Background(), p, studies, s)
	if err != nil {
		t.Fatal(err)
	}
	return cases, left
}

func compared(t *testing.T, p Place, names ...string) *Comparison {
	t.Helper()
	cases, left := ran(t, p, Settings{}, names...)
	c, err := Compare(cases, left)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func estimated(t *testing.T, p Place, s LossSettings) *LossEstimate {
	t.Helper()
	l, err := Losses(context.Background(), p, s)
	if err != nil {
		t.Fatal(err)
	}
	return l
}

// tableOf returns a table of a document by name.
func tableOf(t *testing.T, files []NamedTable, name string) [][]string {
	t.Helper()
	for _, f := range files {
		if f.Name == name {
			return f.Rows
		}
	}
	t.Fatalf("there is no table %s", name)
	return nil
}

// at returns the cell of the row whose first cells are key.
func at(t *testing.T, rows [][]string, column string, key ...string) string {
	t.Helper()
	for _, r := range rows[1:] {
		if strings.Join(r[:len(key)], "|") != strings.Join(key, "|") {
			continue
		}
		for i, h := range rows[0] {
			if h == column {
				return r[i]
			}
		}
		t.Fatalf("there is no column %q in %v", column, rows[0])
	}
	t.Fatalf("there is no row %v", key)
	return ""
}
