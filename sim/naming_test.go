package sim_test

import (
	"errors"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// A wrong profile name is told once, at the cell that holds it, whether the table or a
// case put it there.
func TestProfileNamesAreToldAtTheirCell(t *testing.T) {
	const study = "[period]\nstart = 2025-01-01\nend = 2025-01-02\nstep = \"1h\"\nzone = \"UTC\"\n[[profiles]]\nfiles = [\"p/*.csv\"]\nrepeat = \"day\"\n"
	const loads = "load,node,phases,profile,real [kW]\nshop,sub,ABC,day,10\nmill,sub,ABC,day,10\n"
	for _, tt := range []struct{ name, file, text, caseName, want string }{
		{"load", "feeder/loads.csv", strings.Replace(loads, "mill,sub,ABC,day", "mill,sub,ABC,dya", 1), "", `feeder/loads.csv:3:4: no profile named "dya"; did you mean "day"?`},
		{"source of three phases", "feeder/source.csv", "node,nominal [kV],voltage profile\nsub,12.47,grid\n", "", `feeder/source.csv:2:3: no profile named "grid"; there are: air, day`},
		{"source of another kind", "feeder/source.csv", "node,nominal [kV],voltage profile\nsub,12.47,air\n", "", `feeder/source.csv:2:3: profile "air" is in [degC] (p/a.csv:1:3): here it must be in [pu] or [V]`},
		{"case", "cases/new/loads.csv", "load,profile\nmill,dya\n", "new", `cases/new/loads.csv:2:2: no profile named "dya"; did you mean "day"?`},
		{"price", "study.toml", study + "[prices]\nenergy = \"air\"\n", "", `study.toml:10:1: profile "air" is in [degC] (p/a.csv:1:3): here it must be in [USD/kWh]`},
		{"no file", "study.toml", strings.Replace(study, "p/*", "q/*", 1), "", `feeder/loads.csv:2:4: no profile named "day": the study reads no profiles; [[profiles]] with files = ["profiles/*.csv"] in study.toml names their files
feeder/loads.csv:3:4: no profile named "day": the study reads no profiles; [[profiles]] with files = ["profiles/*.csv"] in study.toml names their files`},
	} {
		t.Run(tt.name, func(t *testing.T) {
			files := fstest.MapFS{}
			for name, text := range map[string]string{"study.toml": study, "feeder/source.csv": "node,nominal [kV]\nsub,12.47\n",
				"feeder/loads.csv": loads, "p/a.csv": "time,day [pu],    air [degC]\n2025-01-01T00:00,0.5,3\n2025-01-01T12:00,1,9\n", tt.file: tt.text} {
				files[name] = &fstest.MapFile{Data: []byte(text)}
			}
			st, err := feeder.Open(files, tt.caseName)
			if err != nil {
				t.Fatal(err)
			}
			_, err = sim.Prepare(st, sim.Options{})
			var faults tables.Faults
			if !errors.As(err, &faults) {
				t.Fatalf("want tables.Faults, got %v", err)
			}
			if faults.Error() != tt.want {
				t.Errorf("got\n%v\nwant\n%s", faults, tt.want)
			}
		})
	}
}

// A pattern that no file matches is odd, not wrong: nothing may name a profile.
func TestPatternWithoutFiles(t *testing.T) {
	st, err := feeder.Open(fstest.MapFS{
		"study.toml":        {Data: []byte("[period]\nstart = 2025-01-01\nend = 2025-01-02\nstep = \"1h\"\nzone = \"UTC\"\n[[profiles]]\nfiles = [\"profiles/*.csv\"]\n")},
		"feeder/source.csv": {Data: []byte("node,nominal [kV]\nsub,12.47\n")},
	}, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	found := 0
	for _, w := range e.Warnings {
		if w.Error() == `study.toml:6:3: files "profiles/*.csv": no file matches, so nothing is read` {
			found++
		}
	}
	if found != 1 {
		t.Errorf("warnings: %v", e.Warnings)
	}
}
