package study_test

import (
	"context"
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"reflect"
	"strconv"
	"strings"
	"testing"

	"yearflow/plots"
	"yearflow/sim/study"
	"yearflow/sim/tables"
)

// smallFeeder is a line of 10 km with a regulator in its middle, customers and sun.
func smallFeeder(hosting string) map[string]string {
	profile := "time,day [pu],sun [pu]\n"
	for d := 1; d <= 2; d++ {
		for h := range 24 {
			sun := math.Max(0, math.Sin(math.Pi*float64(h-6)/12))
			profile += fmt.Sprintf("2025-06-%02dT%02d:00,%.3f,%.4f\n", d, h, 0.5+0.3*math.Sin(float64(h)/3), sun)
		}
	}
	return map[string]string{
		"study.toml":                    "title = \"small\"\n[period]\nstart = 2025-06-01\nend = 2025-06-03\nstep = \"1h\"\nzone = \"UTC\"\n[[profiles]]\nfiles = [\"profiles/*.csv\"]\n" + hosting,
		"profiles/day.csv":              profile,
		"feeder/source.csv":             "node,nominal [kV],voltage [pu]\nhead,12.47,1.035\n",
		"feeder/constructions.csv":      "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km],rating [A]\nline,sequence,0.5,0.4,0.7,1.2,0,0,400\n",
		"feeder/sections.csv":           "section,from,to,phases,length [km],construction\nS,head,mid,ABC,5,line\nT,reg,end,ABC,5,line\n",
		"feeder/regulators.csv":         "regulator,from,to,phases,pt ratio,ct primary [A]\nR1,mid,reg,ABC,60,200\n",
		"feeder/regulator-settings.csv": "regulator,phase,set [V],bandwidth [V],delay [s]\nR1,all,122.5,2,30\n",
		"feeder/loads.csv":              "load,node,phases,real [kW],power factor,zip,profile,customers\nnear,mid,ABC,900,0.95,power,day,120\nfar,end,ABC,700,0.95,power,day,90\n",
	}
}

const smallHosting = "[hosting]\nplaces = [\"mid\", \"end\"]\nprofile = \"sun\"\ngrid = [500, 1000, 1500, 2000, 2500, 3000, 4000]\nseed = 7\nruns = 40\n" +
	"criteria = { \"rapid voltage change above 600 V\" = 50, \"rise of operations\" = \"off\" }\n"

func host(t *testing.T, p study.Place, workers int) (*study.Hosting, error) {
	t.Helper()
	studies, _, err := study.Choose(p, []string{"base"})
	if err != nil {
		t.Fatal(err)
	}
	cases, err := study.Run(context.Background(), p, studies[:1], study.Settings{})
	if err != nil {
		t.Fatal(err)
	}
	return study.MakeHosting(context.Background(), p, cases[0], study.HostingSettings{Workers: workers})
}

// What hosting finds is what a run of the same unit as a case finds, just below and just
// above: the hours above range A at customers, from the results folders.
func TestHostingIsVerifiedByRun(t *testing.T) {
	p := folder(t, nil, smallFeeder(smallHosting))
	h, err := host(t, p, 2)
	if err != nil {
		t.Fatal(err)
	}
	for _, place := range h.Places[:2] {
		if place.Keeps == 0 || math.IsNaN(place.Breaks) || place.First != "hours above A" {
			t.Fatalf("place %s: keeps %g, breaks at %g by %q; the feeder is meant to break by hours above A inside the grid", place.Place, place.Keeps, place.Breaks, place.First)
		}
		hours := func(kW float64) (base, with float64) {
			row := fmt.Sprintf("generator,node,phases,kind,rating [kVA],profile\nG,%s,ABC,solar,%g,sun\n", place.Place, kW)
			files := smallFeeder(smallHosting)
			files["cases/g/generators.csv"] = row
			q := folder(t, nil, files)
			studies, _, err := study.Choose(q, []string{"g"})
			if err != nil {
				t.Fatal(err)
			}
			cases, err := study.Run(context.Background(), q, studies, study.Settings{})
			if err != nil {
				t.Fatal(err)
			}
			var out [2]float64
			for i, c := range cases {
				for _, r := range c.Results.Summary {
					if r.Quantity == "hours with a place above A" {
						out[i], _ = strconv.ParseFloat(r.Value, 64)
					}
				}
			}
			return out[0], out[1]
		}
		const limit = 0.48 // 1 % of 48 h
		if b, w := hours(place.Keeps); w-b > limit {
			t.Errorf("place %s: %g kW is kept, but the run stands above A for %g h more than the base", place.Place, place.Keeps, w-b)
		}
		b, w := hours(place.Breaks)
		if w-b <= limit {
			t.Errorf("place %s: %g kW breaks, but the run stands above A for %g h more than the base only", place.Place, place.Breaks, w-b)
		}
		if math.Abs(w-b-place.Value) > 1e-3 {
			t.Errorf("place %s at %g kW: %g h, the run has %g h", place.Place, place.Breaks, place.Value, w-b)
		}
	}
}

// The same numbers come from one worker and from three, and other orders of adoption from
// another seed.
func TestHostingDoesNotDependOnWorkers(t *testing.T) {
	p := folder(t, nil, smallFeeder(smallHosting))
	one, err := host(t, p, 1)
	if err != nil {
		t.Fatal(err)
	}
	three, err := host(t, p, 3)
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(one.Tables(), three.Tables()) {
		t.Error("the tables differ")
	}
	r := one.Rollout
	if r.Why != "" || len(r.Levels) != 20 || r.Levels[19].KW != 1050 || r.Sites != 2 {
		t.Errorf("roll-out over %d sites to %g kW (%s), want 2 sites to 210 customers of 5 kW", r.Sites, r.Levels[len(r.Levels)-1].KW, r.Why)
	}
	for i, l := range r.Levels {
		if i > 0 && l.Mean < r.Levels[i-1].Mean {
			t.Errorf("level %d installs less than the one before", i+1)
		}
	}
}

func TestHostingBadInput(t *testing.T) {
	for _, x := range []struct{ name, hosting, want string }{
		{"nothing to go by", "", "profile"},
		{"unknown key", "[hosting]\nprofile = \"sun\"\nplace = [\"mid\"]\n", "places"},
		{"unknown node", "[hosting]\nprofile = \"sun\"\nplaces = [\"mod\"]\n", "mid"},
		{"unknown profile", "[hosting]\nprofile = \"moon\"\n", "moon"},
		{"falling grid", "[hosting]\nprofile = \"sun\"\ngrid = [500, 400]\n", "rise"},
		{"unknown criterion", "[hosting]\nprofile = \"sun\"\ncriteria = { \"load\" = 100 }\n", "loading"},
		{"no runs", "[hosting]\nprofile = \"sun\"\nruns = 0\n", "1 or more"},
	} {
		t.Run(x.name, func(t *testing.T) {
			_, err := host(t, folder(t, nil, smallFeeder(x.hosting)), 1)
			var faults tables.Faults
			if !errors.As(err, &faults) || !strings.Contains(err.Error(), x.want) || !strings.Contains(err.Error(), "study.toml") {
				t.Errorf("got %v, want an error at study.toml that says %q", err, x.want)
			}
		})
	}
}

// Every number of both documents is that of the table that it names.
func TestImpactAndHostingDocuments(t *testing.T) {
	files := smallFeeder(smallHosting)
	files["cases/g/generators.csv"] = "generator,node,phases,kind,rating [kVA],profile\nG,end,ABC,solar,1500,sun\n"
	p := folder(t, nil, files)
	im, err := impactOf(t, p, "g", 2)
	if err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(p.Results, "impact-g")
	if err := im.Write(dir, p, document(t, "impact.html", func(d string) (*plots.Document, error) { return plots.ImpactDocument(d, p.Results) })); err != nil {
		t.Fatal(err)
	}
	numbers(t, dir, "impact.html", 200)
	h, err := host(t, p, 2)
	if err != nil {
		t.Fatal(err)
	}
	dir = filepath.Join(p.Results, "hosting")
	if err := h.Write(dir, p, document(t, "hosting.html", func(d string) (*plots.Document, error) { return plots.HostingDocument(d, p.Results) })); err != nil {
		t.Fatal(err)
	}
	numbers(t, dir, "hosting.html", 30)
}
