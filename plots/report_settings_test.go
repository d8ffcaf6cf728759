package plots

import (
	"io/fs"
	"maps"
	"strings"
	"testing"
	"testing/fstest"
)

// withSettings is a results folder of a case with a settings.csv.
func withSettings(t *testing.T, caseName, settings string) fs.FS {
	t.Helper()
	from := small().write()
	out := fstest.MapFS{}
	err := fs.WalkDir(from, ".", func(name string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		data, err := fs.ReadFile(from, name)
		if name == "run.json" {
			data = []byte(strings.Replace(string(data), `"case":"base"`, `"case":"`+caseName+`"`, 1))
		}
		out[name] = &fstest.MapFile{Data: data}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	out["settings.csv"] = &fstest.MapFile{Data: []byte("device,phase,setting,kind,unit,value,base\n" + settings)}
	return out
}

const someSettings = `R1,A,set voltage,regulator,V,123,121
R1,A,time delay,regulator,s,45,45
R1,A,PT ratio,regulator,,60,60
R2,B (ganged),set voltage,regulator,V,122,
C1,,control,capacitor,,kvar,kvar
C1,,closes at,capacitor,,400 kvar,350 kvar
g1,,nameplate rating: 1 pu of active and of reactive power,inverter,kVA,500,500
g1,,reactive power function,inverter,,voltage-reactive power,constant power factor
g1,,voltage-reactive power: V1,inverter,pu,0.92,
g2,,nameplate rating: 1 pu of active and of reactive power,inverter,kVA,200,200
g2,,reactive power function,inverter,,voltage-reactive power,constant power factor
g2,,voltage-reactive power: V1,inverter,pu,0.92,
g3,,reactive power function,inverter,,constant reactive power,constant power factor
`

// The settings in force stand beside those of the base where they differ; inverters that
// are set alike share a table; every number names its cell.
func TestReportShowsTheSettingsInForce(t *testing.T) {
	folder := withSettings(t, "high", someSettings)
	page := reportFrom(t, folder, false)
	wellFormed(t, page)
	wrong, _ := wrongNumbers(page, folder)
	for _, text := range wrong {
		t.Error(text)
	}
	_, section, _ := strings.Cut(page, "Settings in force</h2>")
	section, _, _ = strings.Cut(section, "</section>")
	for _, want := range []string{
		"8 settings of 6 devices are not what the base has: R1, R2, C1, g1, g2, g3.",
		`data-source="settings.csv#R1;A;set voltage/value"`, `data-source="settings.csv#R1;A;set voltage/base"`, "in the base",
		"R2.B (ganged) (not in the base)", "400 kvar", "350 kvar",
		"Inverter functions of g1, g2", "Inverter functions of g3", ">0.92<",
	} {
		if !strings.Contains(section, want) {
			t.Errorf("%q is missing in %s", want, section)
		}
	}
	if n := strings.Count(section, ">0.92<"); n != 1 {
		t.Errorf("V1 of two inverters that are set alike stands %d times, want once", n)
	}
	if strings.Contains(section, `settings.csv#R1;A;time delay/base`) {
		t.Error("a setting that the base has too is shown twice")
	}
	base := reportFrom(t, withSettings(t, "base", "R1,A,set voltage,regulator,V,121,121\n"), false)
	if strings.Contains(base, "in the base") || strings.Contains(base, "not what the base has") {
		t.Error("the report of the base holds it against itself")
	}
	none := reportFrom(t, withSettings(t, "base", ""), false)
	if !strings.Contains(none, "No regulator, capacitor or inverter of this study has a control") {
		t.Error("nobody says that there is no control")
	}
	old := maps.Clone(folder.(fstest.MapFS))
	delete(old, "settings.csv")
	if !strings.Contains(reportFrom(t, old, false), "holds no settings.csv") {
		t.Error("nobody says that the folder has no settings.csv")
	}
}

// Where loads were allocated the report says how much of them.
func TestReportSaysHowMuchLoadIsAllocated(t *testing.T) {
	folder := withSettings(t, "base", someSettings).(fstest.MapFS)
	said := "energy of all loads"
	if strings.Contains(reportFrom(t, folder, false), said) {
		t.Error("nothing was allocated, and the report says how much")
	}
	folder["summary.csv"].Data = append(folder["summary.csv"].Data, "allocation steps met,700,1\nallocation steps listed,20,1\nallocated share of load energy,87.5000,%\n"...)
	page := reportFrom(t, folder, false)
	for _, want := range []string{said, "summary.csv#allocated share of load energy/value", ">87.50<"} {
		if !strings.Contains(page, want) {
			t.Errorf("%q is missing", want)
		}
	}
	wrong, _ := wrongNumbers(page, folder)
	for _, text := range wrong {
		t.Error(text)
	}
}
