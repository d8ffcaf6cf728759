package feeder

import (
	"math"
	"strings"
	"testing"
	"time"
)

const period = "[period]\nstart = 2025-03-01\nend = 2025-04-01\nstep = \"15min\"\nzone = \"America/Denver\"\n"

func TestSettingsFilled(t *testing.T) {
	s := opened(t, with(small(), "study.toml", `title = "All of it"
frequency = 50
`+period+`
[[profiles]]
files = ["profiles/*.csv", "more/x.csv"]
stamped = "end"
interpolate = true
repeat = "week"
zone = "UTC"
[[profiles]]
files = "one.csv"
[run]
start = "given"
voltages = ["n2.A", "n3.B"]
flows = ["s1", "sub", "reg"]
log = "1h"
series = "Parquet"
[limits]
range = { low = 0.95, high = 1.05, "outer low" = 0.9, outer_high = 1.06 }
judge = "all"
allowance = "2.5 V"
[prices]
currency = "EUR"
energy = "tariff"
demand = 8
peak = "system"
operation = 0.5
rate = 0.07
years = 25
[tune]
seed = 3
`), "")
	g := s.Settings
	denver, _ := time.LoadLocation("America/Denver")
	if want := time.Date(2025, 3, 1, 0, 0, 0, 0, denver).UnixNano(); g.Period.Start != want || g.Period.Step != int64(15*time.Minute) {
		t.Errorf("period: %+v", g.Period)
	}
	// March 2025 in Denver has a day of 23 hours.
	if n := g.Period.Steps(); n != (31*24-1)*4 {
		t.Errorf("%d steps, want %d", n, (31*24-1)*4)
	}
	if p := g.Profiles; len(p) != 2 || p[0].Stamped != "end" || !p[0].Interpolate || p[0].Repeat != "week" || p[0].Zone != time.UTC || len(p[0].Files) != 2 ||
		p[1].Files[0] != "one.csv" || p[1].Stamped != "start" || p[1].Repeat != "none" || p[1].Zone.String() != "America/Denver" || p[1].At.Line != 15 {
		t.Errorf("profiles: %+v", p)
	}
	if r := g.Run; !r.Given || r.Voltages != "list" || strings.Join(r.Places, " ") != "n2.A n3.B" || strings.Join(r.Flows, " ") != "s1 sub reg" || r.Log != int64(time.Hour) || !r.Parquet {
		t.Errorf("run: %+v", r)
	}
	if l := g.Limits; l != (Limits{true, 0.95, 1.05, 0.9, 1.06, true, 2.5}) {
		t.Errorf("limits: %+v", l)
	}
	p := g.Prices
	if !math.IsNaN(p.Energy) || p.EnergyProfile != "tariff" || p.Currency != "EUR" || p.Demand != 8 || p.Peak != "system" || p.Operation != 0.5 || p.Rate != 0.07 || p.Years != 25 {
		t.Errorf("prices: %+v", p)
	}
	if s.Tune["seed"] != int64(3) || g.Frequency != 50 || g.ScaleLoad != 1 || g.ScaleGeneration != 1 {
		t.Errorf("tune %v, frequency %v, scale %v %v", s.Tune, g.Frequency, g.ScaleLoad, g.ScaleGeneration)
	}
	if at := s.Place("run.log").String(); at != "study.toml:21:1" {
		t.Errorf("run.log stands at %s", at)
	}
	if u := s.ProfileUses(); u[len(u)-2].Want != WantPrice || u[len(u)-2].Name != "tariff" || u[len(u)-1].Pos.String() != "study.toml:31:1" {
		t.Errorf("profile uses: %+v", u)
	}
}

func TestSettingsDefaults(t *testing.T) {
	s := opened(t, with(small(), "study.toml", "[period]\nstart = 2025-01-01\nend = 2025-01-02T06:30:00\n"), "")
	g := s.Settings
	if g.Frequency != 60 || g.Period.Step != int64(time.Hour) || g.Period.Zone != time.UTC || g.Run.Given || g.Run.Voltages != "auto" || g.Run.Log != 0 || g.Run.Parquet ||
		g.Limits != (Limits{}) || g.Prices.Currency != "USD" || !math.IsNaN(g.Prices.Energy) || g.Prices.Years != 20 {
		t.Errorf("got %+v", g)
	}
	if assumed(s.Model, "period.zone") != "UTC" || assumed(s.Model, "period.step") != "1h" {
		t.Errorf("zone and step are not among what is assumed: %+v", s.Model.Assumed)
	}
}

func TestSettingsFaults(t *testing.T) {
	for _, tt := range []struct{ name, toml, at, want string }{
		{"unknown key", period + "[run]\nvoltage = \"all\"\n", "study.toml:7:1", `unknown key "run.voltage"; did you mean "voltages"?`},
		{"unknown table", period + "[runs]\nlog = \"1h\"\n", "study.toml:6:2", `unknown key "runs"; did you mean "run"?`},
		{"scale", period + "[scale]\nload = 2\n", "study.toml:6:2", "scale belongs to a case"},
		{"syntax", "title = \n" + period, "study.toml:1", ""},
		{"table as a value", "period = 3\n", "study.toml:1", "want [period] with its keys below it"},
		{"no start", "[period]\nend = 2025-01-02\n", "study.toml:1:2", "period.start: is missing"},
		{"end before start", strings.Replace(period, "2025-04-01", "2025-02-01", 1), "study.toml:3:1", "is not after the start"},
		{"no date", strings.Replace(period, "2025-03-01", "\"1 March\"", 1), "study.toml:2:1", `got "1 March"`},
		{"with an offset", strings.Replace(period, "2025-03-01", "2025-03-01T00:00:00Z", 1), "study.toml:2:1", "without an offset"},
		{"hour that is left out", strings.Replace(period, "2025-03-01", "2025-03-09T02:30:00", 1), "study.toml:2:1", "there is no 02:30 on 2025-03-09"},
		{"year", strings.Replace(period, "2025-03-01", "0025-03-01", 1), "study.toml:2:1", "the year 25"},
		{"step", strings.Replace(period, "15min", "7min", 1), "study.toml:4:1", "does not divide a day"},
		{"step of no time", strings.Replace(period, "15min", "15", 1), "study.toml:4:1", "want a length of time"},
		{"step as a number", strings.Replace(period, "\"15min\"", "15", 1), "study.toml:4:1", "want a text in quotation marks, got 15"},
		{"zone", strings.Replace(period, "Denver", "Denvr", 1), "study.toml:5:1", `unknown time zone "America/Denvr"`},
		{"local zone", strings.Replace(period, "America/Denver", "Local", 1), "study.toml:5:1", "want the name of a time zone"},
		{"frequency", "frequency = 400\n" + period, "study.toml:1:1", "want 50 or 60 Hz, got 400"},
		{"title", "title = 7\n" + period, "study.toml:1:1", "title: want a text in quotation marks, got 7"},
		{"folder", "feeder = \"../other\"\n" + period, "study.toml:1:1", `there is no folder "../other"`},
		{"stamped", period + "[[profiles]]\nfiles = []\nstamped = \"middle\"\n", "study.toml:8:1", `profiles[0].stamped: "middle" is not one of start, end, instant`},
		{"files", period + "[[profiles]]\nrepeat = \"day\"\n", "study.toml:6:3", "profiles[0].files: is missing"},
		{"list of numbers", period + "[run]\nflows = [1]\n", "study.toml:7:1", "want a list of texts"},
		{"flag", period + "[[profiles]]\nfiles = []\ninterpolate = 1\n", "study.toml:8:1", "want true or false, got 1"},
		{"log", period + "[run]\nlog = \"20min\"\n", "study.toml:7:1", "is no whole number of steps that divides a day"},
		{"series", period + "[run]\nseries = \"feather\"\n", "study.toml:7:1", `run.series: "feather" is not one of csv, parquet`},
		{"series as a flag", period + "[run]\nseries = true\n", "study.toml:7:1", "want a text in quotation marks, got true"},
		{"node.phase", period + "[run]\nvoltages = [\"n3.A\"]\n", "study.toml:7:1", `there is no node.phase "n3.A"`},
		{"flow", period + "[run]\nflows = [\"s9\"]\n", "study.toml:7:1", `there is no section, transformer or regulator "s9"`},
		{"range", period + "[limits]\nrange = \"EN 50160\"\n", "study.toml:7:1", `"EN 50160" is not known`},
		{"range key", period + "[limits]\nrange = { low = 0.9, hihg = 1.1 }\n", "study.toml:7:1", `unknown key "hihg"; did you mean "high"?`},
		{"range order", period + "[limits]\nrange = { low = 1.1, high = 0.9 }\n", "study.toml:7:1", "want outer low ≤ low < high ≤ outer high"},
		{"range in volts", period + "[limits]\nrange = { low = 114, high = 126 }\n", "study.toml:7:1", "the limits are in p.u."},
		{"allowance", period + "[limits]\nallowance = \"3\"\n", "study.toml:7:1", "want volts on the 120 V base"},
		{"price", period + "[prices]\noperation = -1\n", "study.toml:7:1", "must not be negative, got -1"},
		{"rate", period + "[prices]\nrate = 7\n", "study.toml:7:1", "want a share a year such as 0.07"},
		{"number", period + "[prices]\ndemand = nan\n", "study.toml:7:1", "want a number"},
	} {
		t.Run(tt.name, func(t *testing.T) {
			fsys := with(small(), "study.toml", tt.toml)
			wantFault(t, fsys, tt.at, tt.want)
			if _, err := Open(fsys, ""); strings.Contains(err.Error(), "\n") {
				t.Errorf("more than one fault:\n%v", err)
			}
		})
	}
}

func TestUnknownKeysAreToldAtOnce(t *testing.T) {
	_, err := Open(with(small(), "study.toml", period+"a = 1\n[run]\nb = 2\n[limits]\nc = 3\n"), "")
	for _, want := range []string{"study.toml:6:1", "study.toml:8:1", "study.toml:10:1"} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("no fault at %s: %v", want, err)
		}
	}
}

func TestCaseSettings(t *testing.T) {
	fsys := with(small(), "study.toml", period+"[run]\nlog = \"1h\"\n[limits]\njudge = \"all\"\n[[profiles]]\nfiles = [\"a.csv\"]\n[tune]\nseed = 1\nbudget = 9\n",
		"cases/growth/case.toml", "[scale]\nload = 1.2\ngeneration = 0.5\n[run]\nstart = \"given\"\n[[profiles]]\nfiles = [\"b.csv\"]\nrepeat = \"day\"\n[tune]\nseed = 2\n",
		"cases/other/loads.csv", "load,real [kW]\nl1,1000\n")
	s := opened(t, fsys, "growth")
	g := s.Settings
	if g.ScaleLoad != 1.2 || g.ScaleGeneration != 0.5 || !g.Run.Given || g.Run.Log != int64(time.Hour) || !g.Limits.All {
		t.Errorf("got %+v", g)
	}
	if len(g.Profiles) != 1 || g.Profiles[0].Files[0] != "b.csv" || g.Profiles[0].At.File != "cases/growth/case.toml" {
		t.Errorf("a case's profiles replace the study's: %+v", g.Profiles)
	}
	if s.Tune["seed"] != int64(2) || s.Tune["budget"] != int64(9) {
		t.Errorf("tune: %v", s.Tune)
	}
	if strings.Join(s.Cases, " ") != "growth other" || s.Case != "growth" {
		t.Errorf("cases %v, case %q", s.Cases, s.Case)
	}
	if _, err := Open(fsys, "grwth"); err == nil || !strings.Contains(err.Error(), `there is no case "grwth"; did you mean "growth"?`) {
		t.Errorf("unknown case: %v", err)
	}
	bad := with(fsys, "cases/growth/case.toml", "[scale]\nload = -1\n[run]\nlog = \"7min\"\n")
	_, err := Open(bad, "growth")
	for _, want := range []string{"cases/growth/case.toml:2:1: scale.load: must not be negative", "cases/growth/case.toml:4:1: run.log"} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("want %s in: %v", want, err)
		}
	}
}
