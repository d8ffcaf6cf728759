package feeder

import (
	"errors"
	"fmt"
	"math"
	"math/cmplx"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim/tables"
)

// files makes a study's folder of name, text pairs.
func files(pairs ...string) fstest.MapFS {
	out := fstest.MapFS{}
	for i := 0; i < len(pairs); i += 2 {
		out[pairs[i]] = &fstest.MapFile{Data: []byte(pairs[i+1])}
	}
	return out
}

// with returns a copy of a folder with other files laid over it; blank: taken out.
func with(base fstest.MapFS, pairs ...string) fstest.MapFS {
	out := fstest.MapFS{}
	for n, f := range base {
		out[n] = f
	}
	for n, f := range files(pairs...) {
		if len(f.Data) == 0 {
			delete(out, n)
			continue
		}
		out[n] = f
	}
	return out
}

// small is a study that has one of everything: a source, a delta-wye substation
// bank, a trunk with a regulator, a lateral with a service transformer.
func small() fstest.MapFS {
	return files(
		"study.toml", `title = "Small"
[period]
start = 2025-01-01
end = 2025-01-02
step = "1h"
zone = "America/Denver"
`,
		"feeder/source.csv", "node,nominal [kV]\ngrid,69\n",
		"feeder/transformers.csv", `transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],x/r,no-load loss [W],exciting current [%]
sub,grid,bus,ABC,10000,69,12.47,Dyn1,8,15,9000,0.4
pole,n3,house,B,25,7.2,0.24,1ph,2,1.5,55,0.5
`,
		"feeder/regulators.csv", `regulator,from,to,phases,pt ratio,ct primary [A]
reg,bus,n1,ABC,60,300
`,
		"feeder/regulator-settings.csv", `regulator,phase,set [V],bandwidth [V],delay [s]
reg,all,122,2,30
`,
		"feeder/constructions.csv", `construction,kind,r1 [ohm/mi],x1 [ohm/mi],r0 [ohm/mi],x0 [ohm/mi],b1 [uS/mi],b0 [uS/mi],rating [A]
trunk,sequence,0.3,0.6,0.8,1.9,6,3,500
`,
		"feeder/sections.csv", `section,from,to,phases,length [ft],construction
s1,n1,n2,ABC,5280,trunk
s2,n2,n3,B,1000,trunk
`,
		"feeder/capacitors.csv", "capacitor,node,phases,size [kvar]\ncap,n2,ABC,300\n",
		"feeder/capacitor-settings.csv", `capacitor,control,watched section,phase,kvar on [kvar],kvar off [kvar],voltage on [V],voltage off [V]
cap,kvar,s1,B,100,-100,117,127
`,
		"feeder/loads.csv", `load,node,phases,connection,real [kW],power factor,profile,customers
l1,n2,ABC,wye,900,0.95,home,200
l2,house,B,wye,12,-0.98,home,3
l3,n2,AB,delta,50,0.9,,1
`,
		"feeder/generators.csv", "generator,node,phases,kind,rating [kVA],profile\npv,n2,ABC,solar,500,sun\n",
	)
}

// opened is a study that must have no fault.
func opened(t *testing.T, fsys fstest.MapFS, caseName string) *Study {
	t.Helper()
	s, err := Open(fsys, caseName)
	if err != nil {
		t.Fatalf("Open: %v", err)
	}
	return s
}

// wantFault checks that a study has a fault at a place, with a text in it.
func wantFault(t *testing.T, fsys fstest.MapFS, at, text string) {
	t.Helper()
	_, err := Open(fsys, "")
	var fs tables.Faults
	if !errors.As(err, &fs) {
		t.Fatalf("Open: got %v, want a fault at %s: %s", err, at, text)
	}
	for _, f := range fs {
		if strings.HasPrefix(f.Pos.String(), at) && strings.Contains(f.Text, text) {
			return
		}
	}
	t.Errorf("no fault at %s with %q in:\n%v", at, text, err)
}

func TestOpenSmall(t *testing.T) {
	s := opened(t, small(), "")
	m := s.Model
	if s.Title != "Small" || s.Case != Base || m.Frequency != 60 {
		t.Errorf("title %q, case %q, frequency %v", s.Title, s.Case, m.Frequency)
	}
	for i, want := range []struct {
		name, phases string
		kV           float64
		customers    [PhaseCount]float64
		part         int
	}{
		{"bus", "ABC", 12.47, [PhaseCount]float64{}, 0},
		{"grid", "ABC", 69, [PhaseCount]float64{}, 1},
		// 0.24 kV to ground on one phase is √3·0.24 kV line-to-line.
		{"house", "B", 0.24 * math.Sqrt(3), [PhaseCount]float64{0, 3, 0}, 2},
		{"n1", "ABC", 12.47, [PhaseCount]float64{}, 0},
		// The three-phase load's 200 at each phase, the one between A and B at both.
		{"n2", "ABC", 12.47, [PhaseCount]float64{201, 201, 200}, 0},
		{"n3", "B", 12.47, [PhaseCount]float64{}, 0},
	} {
		n := m.Nodes[i]
		if n.Name != want.name || word(n.Phases) != want.phases || math.Abs(n.Nominal-want.kV) > 1e-12 || n.Customers != want.customers || n.Part != want.part || !n.Grounded {
			t.Errorf("node %d: got %+v, want %+v", i, n, want)
		}
		if j, ok := m.NodeIndex(want.name); j != i || !ok {
			t.Errorf("NodeIndex(%q) = %d, %v", want.name, j, ok)
		}
	}
	if l := m.Sections[0].LengthKM; l != 1.609344 || m.Sections[0].Rating != 500 {
		t.Errorf("section s1: %v km rated %v A, want a mile and its construction's 500 A", l, m.Sections[0].Rating)
	}
	// Sequence to phase values: self (z0 + 2·z1)/3, here (0.8 + 0.6 + j(1.9 + 1.2))/3 ohm/mi.
	if z, want := m.Constructions[0].Matrices.Z[0][0]*1.609344, complex(1.4/3, 3.1/3); cmplx.Abs(z-want) > 1e-12 {
		t.Errorf("self impedance %v ohm/mi, want %v", z, want)
	}
	if b, want := m.Constructions[0].Matrices.B[1][1]*1.609344e6, 5.0; math.Abs(b-want) > 1e-12 {
		t.Errorf("self susceptance %v uS/mi, want (3 + 2·6)/3", b)
	}
	if r := m.Regulators[0]; len(r.Units) != 3 || r.Units[2].Settings.Set != 122 || r.Units[2].Settings.HighestTap != 16 || r.Units[2].Settings.LowestTap != -16 || r.Range != 0.1 {
		t.Errorf("regulator: %+v", r)
	}
	c := m.Capacitors[0]
	if c.NominalKV != 12.47 || !c.Closed || c.Control.On != 100 || c.Control.Off != -100 || c.Control.OverrideOff != 127 || *c.Control.Watched != (Watched{"section", 0}) || c.Control.Phase[0] != B {
		t.Errorf("capacitor: %+v, control %+v", c, c.Control)
	}
	// Lagging 0.95 takes 900·tan(acos 0.95) kvar; -0.98 is leading and gives.
	if q, want := m.Loads[0].KVAR, 900*math.Tan(math.Acos(0.95)); math.Abs(q-want) > 1e-9 {
		t.Errorf("load l1: %v kvar, want %v", q, want)
	}
	if q, want := m.Loads[1].KVAR, -12*math.Tan(math.Acos(0.98)); math.Abs(q-want) > 1e-9 {
		t.Errorf("load l2: %v kvar, want %v", q, want)
	}
	if l := m.Loads[2]; l.Connection != Delta || len(l.Pairs) != 1 || l.Pairs[0] != (Pair{A, B}) || l.Phases != nil {
		t.Errorf("load l3: %+v", l)
	}
	if g := m.Generators[0]; !Unknown(g.KW) || g.KVA != 500 || g.PF != 1 || g.Profile != "sun" {
		t.Errorf("generator: %+v", g)
	}
	uses := ""
	for _, u := range s.ProfileUses() {
		uses += u.Name + " " + u.Want + " " + u.Pos.String() + "\n"
	}
	if want := "home multiplier feeder/loads.csv:2:7\nhome multiplier feeder/loads.csv:3:7\nsun multiplier or power feeder/generators.csv:2:6\n"; uses != want {
		t.Errorf("profile uses:\n%swant:\n%s", uses, want)
	}
	if d := s.Describe(); d.Nodes != 6 || d.NodePhases != 14 || d.Parts != 3 || d.LoadKW != 962 || d.CapacitorKVAR != 300 || d.Controlled != 1 ||
		d.TransformerKVA != 10025 || d.RegulatorUnits != 3 || d.Customers != 204 || len(d.ByConstruction) != 1 || d.ByConstruction[0].LengthKM != d.LengthKM {
		t.Errorf("Describe: %+v", d)
	}
	if want := "feeder/capacitor-settings.csv feeder/capacitors.csv feeder/constructions.csv feeder/generators.csv feeder/loads.csv feeder/regulator-settings.csv feeder/regulators.csv feeder/sections.csv feeder/source.csv feeder/transformers.csv study.toml"; strings.Join(s.Files, " ") != want {
		t.Errorf("files: %v", s.Files)
	}
	if len(s.Warnings) > 0 {
		t.Errorf("warnings: %v", s.Warnings)
	}
}

// assumed looks an assumption up by what it is about.
func assumed(m *Model, what string) string {
	for _, a := range m.Assumed {
		if a.What == what {
			return a.Value
		}
	}
	return "(not assumed)"
}

func TestAssumedForBlanks(t *testing.T) {
	m := opened(t, small(), "").Model
	for what, want := range map[string]string{
		"regulators: steps each way (blank in 1 row)":        "16",
		"regulator-settings: tap time [s] (blank in 3 rows)": "5",
		"capacitor-settings: lockout [s] (blank in 1 row)":   "300",
		"loads: zip (blank in 3 rows)":                       "power",
		"sections: rating [A] (blank in 2 rows)":             "that of the construction",
		"capacitor \"cap\": nominal [kV]":                    "12.47 (its node's)",
		"loads: connection (blank in 1 row)":                 "(not assumed)",
		"transformer \"pole\": resistance and reactance [%]": "(not assumed)",
		"construction trunk: earth resistivity [ohm m]":      "(not assumed)",
		"generators: power factor (blank in 1 row)":          "1",
		"source: voltage at (blank in 1 row)":                "behind",
	} {
		if got := assumed(m, what); got != want {
			t.Errorf("%s: %s, want %s", what, got, want)
		}
	}
}

// Blank impedances are those of a typical unit: 25 kVA, 1.2 % and 2.05 % impedance.
func TestTypicalTransformer(t *testing.T) {
	s := opened(t, with(small(), "feeder/transformers.csv", `transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection
sub,grid,bus,ABC,10000,69,12.47,Dyn1
pole,n3,house,B,25,7.2,0.24,1ph
`), "")
	pole := s.Model.Transformers[1]
	if pole.R != 0.012 || math.Abs(math.Hypot(pole.R, pole.X)-0.0205) > 1e-12 {
		t.Errorf("R %v, X %v", pole.R, pole.X)
	}
	if got, want := assumed(s.Model, `transformer "pole": resistance and reactance [%]`), "1.2 and 1.66 (typical of a unit of 25 kVA)"; got != want {
		t.Errorf("assumed %q, want %q", got, want)
	}
	if sub := s.Model.Transformers[0]; math.Abs(math.Hypot(sub.R, sub.X)-0.08) > 1e-12 {
		t.Errorf("substation: R %v, X %v", sub.R, sub.X)
	}
}

// Any two of the five columns give the same transformer: 50 kVA, 1.02 %, X/R 2.
func TestTwoOfFiveGiveTheImpedance(t *testing.T) {
	r, x := 1.02, 2.04
	z := math.Hypot(r, x)
	cells := map[string]string{"impedance [%]": fmt.Sprint(z), "x/r": "2", "load loss [W]": "510", "resistance [%]": "1.02", "reactance [%]": "2.04"}
	names := []string{"impedance [%]", "x/r", "load loss [W]", "resistance [%]", "reactance [%]"}
	for i, a := range names {
		for _, b := range names[i+1:] {
			table := "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection," + a + "," + b + "\nsub,grid,bus,ABC,50,69,12.47,Dyn1," + cells[a] + "," + cells[b] + "\n" +
				"pole,n3,house,B,25,7.2,0.24,1ph,,\n"
			fsys := with(small(), "feeder/transformers.csv", table)
			if a == "load loss [W]" && b == "resistance [%]" {
				wantFault(t, fsys, "feeder/transformers.csv:2:10", "load loss and resistance are two sources of one value")
				continue
			}
			got := opened(t, fsys, "").Model.Transformers[0]
			if math.Abs(got.R-r/100) > 1e-12 || math.Abs(got.X-x/100) > 1e-12 {
				t.Errorf("%s and %s: R %v, X %v", a, b, got.R, got.X)
			}
		}
	}
}

func TestConnections(t *testing.T) {
	for _, tt := range []struct{ written, want, fault string }{
		{"YNyn0", "YNyn0", ""}, {"ynYN0", "YNyn0", ""}, {"YNy0", "YNy0", ""}, {"Dyn1", "Dyn1", ""}, {"dyn11", "Dyn11", ""}, {"Dy5", "Dy5", ""},
		{"Dd0", "Dd0", ""}, {"Dd10", "Dd10", ""}, {"YNd1", "YNd1", ""}, {"Yd11", "Yd11", ""}, {"YNyn6", "YNyn6", ""},
		{"Grounded Wye / Grounded Wye", "YNyn0", ""}, {"grounded wye/wye", "YNy0", ""}, {"delta / grounded wye", "Dyn1", ""}, {"delta/wye", "Dy1", ""},
		{"grounded wye / delta", "YNd1", ""}, {"wye / delta", "Yd1", ""}, {"delta / delta", "Dd0", ""},
		{"1PH", "1ph", ""}, {"open-wye/open-delta AB-BC", "open-wye/open-delta AB-BC", ""}, {"open-delta/open-delta ab-cb", "open-delta/open-delta AB-CB", ""},
		{"Yyn0", "", "the zero sequence of a wye-wye bank"}, {"Yy0", "", "is refused"}, {"wye / wye", "", "is refused"},
		{"Dyn0", "", "these windings have odd clock numbers"}, {"Dd1", "", "these windings have even clock numbers"}, {"Dyn13", "", "from 0 to 11"},
		{"center-tap", "center-tap", ""}, {"unit", "unit", ""},
		{"Dyn1x", "", `did you mean "Dyn1"?`}, {"delta / groundd wye", "", `did you mean "delta / grounded wye"?`}, {"zigzag", "", "unknown connection"},
		{"open-wye/open-delta", "", "want the two pairs"}, {"open-delta/open-delta AB-AB", "", "do not reach all three phases"}, {"Dyn01", "", "unknown connection"},
	} {
		got, pairs, err := parseConnection(tt.written)
		for i, p := range pairs {
			got += string(" -"[i]) + p.String()
		}
		if got != tt.want || (err != nil) != (tt.fault != "") || err != nil && !strings.Contains(err.Error(), tt.fault) {
			t.Errorf("%q: got %q, %v; want %q %s", tt.written, got, err, tt.want, tt.fault)
		}
	}
}
