package study_test

import (
	"context"
	"errors"
	"io/fs"
	"math"
	"math/cmplx"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"yearflow/sim/demo"
	"yearflow/sim/study"
)

// folder writes a study below a temporary folder: the files of base, then those given.
func folder(t *testing.T, base fs.FS, files map[string]string) study.Place {
	t.Helper()
	dir := t.TempDir()
	if base != nil {
		if err := os.CopyFS(dir, base); err != nil {
			t.Fatal(err)
		}
	}
	for name, text := range files {
		path := filepath.Join(dir, filepath.FromSlash(name))
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	return study.Place{FS: os.DirFS(dir), Results: filepath.Join(dir, "results"), Version: "test"}
}

// shortDemo is the demo over a few summer days.
func shortDemo(t *testing.T, files map[string]string) study.Place {
	t.Helper()
	text, err := fs.ReadFile(demo.Study(), "study.toml")
	if err != nil {
		t.Fatal(err)
	}
	short := strings.NewReplacer("start = 2025-01-01", "start = 2025-06-10", "end = 2026-01-01", "end = 2025-06-13").Replace(string(text))
	all := map[string]string{"study.toml": short}
	for k, v := range files {
		all[k] = v
	}
	return folder(t, demo.Study(), all)
}

func impactOf(t *testing.T, p study.Place, name string, workers int) (*study.Impact, error) {
	t.Helper()
	studies, _, err := study.Choose(p, []string{name})
	if err != nil {
		t.Fatal(err)
	}
	cases, err := study.Run(context.Background(), p, studies, study.Settings{})
	if err != nil {
		t.Fatal(err)
	}
	return study.MakeImpact(context.Background(), p, cases, study.ImpactSettings{Workers: workers})
}

// A generator that delivers nothing changes nothing: the difference of every row of every
// table is zero, and it is not the largest unit, whatever its rating.
func TestImpactOfNothing(t *testing.T) {
	p := shortDemo(t, map[string]string{"cases/nothing/generators.csv": "generator,node,phases,kind,rating [kVA],real [kW]\nnew,M12,ABC,other,5000,0\n"})
	im, err := impactOf(t, p, "nothing", 2)
	if err != nil {
		t.Fatal(err)
	}
	seen := 0
	for _, table := range im.Tables() {
		for col, head := range table.Rows[0] {
			if !strings.HasPrefix(head, "difference") || table.Name == "mitigations.csv" {
				continue
			}
			for _, row := range table.Rows[1:] {
				if row[col] == "" {
					t.Errorf("%s, %v: the difference is blank", table.Name, row[:3])
					continue
				}
				seen++
				if d, err := strconv.ParseFloat(row[col], 64); err != nil || d != 0 {
					t.Errorf("%s, %v: difference %s, want 0", table.Name, row, row[col])
				}
			}
		}
	}
	if seen < 500 {
		t.Errorf("only %d differences were looked at", seen)
	}
}

// A feeder that a pencil can follow: a stiff source, one line of z = 1 + j2 ohm per
// phase, a generator of 3,000 kW at its end and no load.
//
// With E = 12.47/√3 = 7.19956 kV behind z, and P = 1,000 kW a phase delivered into the end
// of the line, V·conj((V − E)/z) = P with V on the real axis gives for V = |V|
//
//	(V² − P·r)² + (P·x)² = E²·V²
//
// (E·V·cos δ = V² − P·r, E·V·sin δ = P·x), so that V² is the larger root of
// V⁴ − (2·P·r + E²)·V² + P²·(r² + x²) = 0.
// The sudden loss takes the end back to E, the sudden return from E to V.
func TestRapidVoltageChangeByHand(t *testing.T) {
	p := folder(t, nil, map[string]string{
		"study.toml":                "title = \"by hand\"\n[period]\nstart = 2025-06-01\nend = 2025-06-01T02:00\nstep = \"1h\"\nzone = \"UTC\"\n[limits]\njudge = \"all\"\n",
		"feeder/source.csv":         "node,nominal [kV]\nhead,12.47\n",
		"feeder/constructions.csv":  "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]\nline,sequence,1,2,1,2,0,0\n",
		"feeder/sections.csv":       "section,from,to,phases,length [km],construction\nS,head,end,ABC,1,line\n",
		"feeder/loads.csv":          "load,node,phases,real [kW],reactive [kvar],zip\nL,end,ABC,0.001,0,power\n",
		"cases/g/generators.csv":    "generator,node,phases,kind,rating [kVA],real [kW]\nG,end,ABC,other,3000,3000\n",
		"cases/more/generators.csv": "generator,node,phases,kind,rating [kVA],real [kW]\nG,end,ABC,other,3000,3000\nH,end,ABC,other,1000,1000\n",
	})
	const e, pw, r, x = 12470 / math.Sqrt2 / 1.2247448713915890, 1e6, 1.0, 2.0
	b := 2*pw*r + e*e
	v := math.Sqrt((b + math.Sqrt(b*b-4*pw*pw*(r*r+x*x))) / 2)
	want := 100 * (v - e) / e // 1.89…
	if i := complex(pw/v, 0); math.Abs(cmplx.Abs(complex(v, 0)-complex(r, x)*i)-e) > 1e-6 {
		t.Fatalf("the hand calculation does not close: V = %g", v)
	}
	im, err := impactOf(t, p, "g", 1)
	if err != nil {
		t.Fatal(err)
	}
	found := 0
	for _, c := range im.Changes {
		sign := -1.0
		if c.Direction == "return" {
			sign = 1
		}
		if c.Node == "end" && c.Event == "units of the case" {
			found++
			if math.Abs(c.With-sign*want) > 2e-4 {
				t.Errorf("%s at %s.%s: %.5f %%, want %.5f %%", c.Direction, c.Node, c.Phase, c.With, sign*want)
			}
			if math.Abs(c.Margin-(3-want)) > 2e-4 || c.Verdict != study.Passes {
				t.Errorf("margin %g and verdict %v, want %g to the 3 %% of medium voltage", c.Margin, c.Verdict, 3-want)
			}
		}
		if c.Node == "head" && math.Abs(c.With) > 1e-9 {
			t.Errorf("the stiff source jumps by %g %%", c.With)
		}
	}
	if found != 6 {
		t.Errorf("%d rows for the end of the line, want 3 phases, lost and back", found)
	}

	// A remedy is judged by the return too: half of the size is lost and comes back with
	// 500 kW a phase. Set voltages are not tried on a feeder without a tap changer.
	half := func(power float64) float64 {
		b := 2*power*r + e*e
		return 100 * (math.Sqrt((b+math.Sqrt(b*b-4*power*power*(r*r+x*x)))/2) - e) / e
	}(0.5e6)
	seen := 0
	for _, m := range im.Mitigations {
		for _, c := range m.Criteria {
			if m.Name == "50 % of the size" && strings.HasSuffix(c.Name, "of units of the case, above 600 V") {
				seen++
				if math.Abs(c.With-half) > 2e-4 || math.Abs(c.Base-want) > 2e-4 || math.Abs(c.Difference-(half-want)) > 4e-4 {
					t.Errorf("%s: %s from %g to %g %%, want from %g to %g", m.Name, c.Name, c.Base, c.With, want, half)
				}
			}
		}
		if why := m.Why; strings.HasPrefix(m.Name, "set voltages") != (why == "the feeder has no tap changer that acts") && m.Name != "reverse mode stay" && m.Name != "dispatch at most 50 %" {
			t.Errorf("%s: not tried because %q", m.Name, why)
		}
	}
	if seen != 2 {
		t.Errorf("half of the size has %d rapid voltage changes of the units of the case above 600 V, want loss and return", seen)
	}

	// Of two units the loss of the largest alone takes the other's voltage along.
	im, err = impactOf(t, p, "more", 2)
	if err != nil {
		t.Fatal(err)
	}
	at := func(power float64) float64 {
		b := 2*power*r + e*e
		return math.Sqrt((b + math.Sqrt(b*b-4*power*power*(r*r+x*x))) / 2)
	}
	want = 100 * (at(4e6/3) - at(1e6/3)) / e
	for _, c := range im.Changes {
		if c.Node == "end" && c.Event == "largest unit" && c.Direction == "loss" && math.Abs(c.With+want) > 2e-4 {
			t.Errorf("loss of the largest unit: %g %%, want %g", c.With, -want)
		}
	}
}

// The screens by hand, after the small generator interconnection procedures of the U.S.
// FERC (15 % of the line section's peak, 100 % of its minimum daytime load; recalled from
// memory): loads of 2,000 kW by day but 1,000 kW at noon and 2,500 kW in the evening,
// a plant of 400 kW in the base and one of 500 kW more.
func TestScreensByHand(t *testing.T) {
	profile := "time,day [pu],sun [pu]\n"
	for h, x := range []string{"0.4", "0.4", "0.4", "0.4", "0.4", "0.4", "0.8", "0.8", "0.8", "0.8", "0.8", "0.8", "0.4", "0.8", "0.8", "0.8", "0.3", "0.8", "0.8", "1.0", "1.0", "0.8", "0.4", "0.4"} {
		sun := "0"
		if h > 6 && h < 18 {
			sun = "1"
		}
		profile += "2025-06-01T" + strconv.Itoa(100 + h)[1:] + ":00," + x + "," + sun + "\n"
	}
	p := folder(t, nil, map[string]string{
		"study.toml":                    "title = \"screens\"\n[period]\nstart = 2025-06-01\nend = 2025-06-02\nstep = \"1h\"\nzone = \"UTC\"\n[[profiles]]\nfiles = [\"profiles/*.csv\"]\n",
		"profiles/day.csv":              profile,
		"feeder/source.csv":             "node,nominal [kV]\nhead,12.47\n",
		"feeder/constructions.csv":      "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]\nline,sequence,0.1,0.2,0.1,0.2,0,0\n",
		"feeder/sections.csv":           "section,from,to,phases,length [km],construction\nS,head,mid,ABC,1,line\nT,reg,end,ABC,1,line\n",
		"feeder/regulators.csv":         "regulator,from,to,phases,pt ratio,ct primary [A]\nR1,mid,reg,ABC,60,200\n",
		"feeder/regulator-settings.csv": "regulator,phase,set [V],bandwidth [V],delay [s]\nR1,all,120,2,30\n",
		"feeder/loads.csv":              "load,node,phases,real [kW],reactive [kvar],zip,profile\nnear,mid,ABC,1500,0,power,day\nfar,end,ABC,1000,0,power,day\n",
		"feeder/generators.csv":         "generator,node,phases,kind,rating [kVA],profile\nold,mid,ABC,solar,400,sun\n",
		"cases/g/generators.csv":        "generator,node,phases,kind,rating [kVA],profile\nG,end,ABC,solar,500,sun\n",
	})
	im, err := impactOf(t, p, "g", 1)
	if err != nil {
		t.Fatal(err)
	}
	want := []struct {
		section                         string
		base, with, load, share, margin float64
		verdict                         study.Verdict
	}{
		{"the feeder", 400, 900, 2500, 36, -21, study.Fails},
		{"the feeder", 400, 900, 1000, 90, 10, study.Passes}, // 12:00; 16:00 is no longer day for the screen
		{"behind regulator R1", 0, 500, 1000, 50, -35, study.Fails},
		{"behind regulator R1", 0, 500, 400, 125, -25, study.Fails},
	}
	if len(im.Screens) != len(want) {
		t.Fatalf("%d screens, want %d: %+v", len(im.Screens), len(want), im.Screens)
	}
	for i, w := range want {
		s := im.Screens[i]
		if s.Section != w.section || s.Base != w.base || s.With != w.with || math.Abs(s.Reference-w.load) > 1e-3 || math.Abs(s.WithShare-w.share) > 1e-3 || math.Abs(s.Margin-w.margin) > 1e-3 || s.Verdict != w.verdict {
			t.Errorf("screen %d: got %+v, want %+v", i, s, w)
		}
	}
}

func TestImpactNeedsUnits(t *testing.T) {
	p := shortDemo(t, nil)
	_, err := impactOf(t, p, "wide-band", 1)
	var none *study.NoUnits
	if !errors.As(err, &none) || !strings.Contains(err.Error(), "cases/wide-band/generators.csv") {
		t.Errorf("a case of settings alone: got %v", err)
	}
	if _, _, err := study.Choose(p, []string{"wide-bend"}); err == nil || !strings.Contains(err.Error(), "wide-band") {
		t.Errorf("an unknown case: got %v", err)
	}
}

// A battery's inverter has a power factor and functions too, and its dispatch a limit. By
// hand, as above: P + jQ a phase delivered into the end of a line of z = 1 + j2 ohm give
//
//	V⁴ − (2·(P·r + Q·x) + E²)·V² + (P² + Q²)·(r² + x²) = 0
//
// and the sudden loss takes the end back to E. 600 kW are ±200 kW a phase; the larger of
// the changes at charging and at discharging counts.
func TestMitigationsOfABattery(t *testing.T) {
	p := folder(t, nil, map[string]string{
		"study.toml":               "title = \"battery\"\n[period]\nstart = 2025-06-01\nend = 2025-06-02\nstep = \"1h\"\nzone = \"UTC\"\n[limits]\njudge = \"all\"\n",
		"feeder/source.csv":        "node,nominal [kV]\nhead,12.47\n",
		"feeder/constructions.csv": "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]\nline,sequence,1,2,1,2,0,0\n",
		"feeder/sections.csv":      "section,from,to,phases,length [km],construction\nS,head,end,ABC,1,line\n",
		"feeder/loads.csv":         "load,node,phases,real [kW],reactive [kvar],zip\nL,end,ABC,0.001,0,power\n",
		"cases/b/batteries.csv":    "battery,node,phases,energy [kWh],power [kW],rating [kVA],dispatch,charge from,charge to,discharge from,discharge to,initial [%]\nB,end,ABC,5000,600,700,schedule,01:00,03:00,17:00,20:00,50\n",
	})
	im, err := impactOf(t, p, "b", 2)
	if err != nil {
		t.Fatal(err)
	}
	const e = 12470 / math.Sqrt2 / 1.2247448713915890
	one := func(p, q float64) float64 {
		b := 2*(p*1+q*2) + e*e
		return 100 * math.Abs(math.Sqrt((b+math.Sqrt(b*b-4*(p*p+q*q)*5))/2)-e) / e
	}
	jump := func(p, q float64) float64 { return math.Max(one(p, q), one(-p, q)) }
	tan := math.Sqrt(1/(0.95*0.95) - 1)
	want := map[string]float64{"power factor 0.95": jump(200e3, -200e3*tan), "dispatch at most 50 %": jump(100e3, 0), "50 % of the size": jump(100e3, 0), "volt-watt": jump(200e3, 0)}
	seen := 0
	for _, m := range im.Mitigations {
		if m.Why != "" && !strings.Contains(m.Why, "tap changer") {
			t.Errorf("%s: not tried because %q", m.Name, m.Why)
		}
		for _, c := range m.Criteria {
			if w, there := want[m.Name]; there && strings.HasSuffix(c.Name, "of units of the case, above 600 V") {
				seen++
				if math.Abs(c.With-w) > 2e-4 {
					t.Errorf("%s: %s is %g %%, want %g", m.Name, c.Name, c.With, w)
				}
			}
		}
	}
	if seen != 2*len(want) {
		t.Errorf("%d changes were looked at, want %d", seen, 2*len(want))
	}
}
