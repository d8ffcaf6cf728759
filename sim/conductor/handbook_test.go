package conductor

import (
	"math"
	"strconv"
	"strings"
	"testing"
)

// circularMils returns the area that a conductor's name tells, in kcmil: AWG n is a
// wire of 0.005·92^((36−n)/39) in (ASTM B258), and 1/0 to 4/0 are n = 0 to −3.
func circularMils(t *testing.T, name string) float64 {
	t.Helper()
	size, _, _ := strings.Cut(name, " ")
	zeros, isOught := strings.CutSuffix(size, "/0")
	v := number(t, zeros)
	if !isOught && (v >= 250 || strings.Contains(size, ".")) {
		return v
	}
	if isOught {
		v = 1 - v
	}
	d := 5 * math.Pow(92, (36-v)/39) // mil
	return d * d / 1000
}

// family returns what a conductor's name has after the size: metal and stranding.
func family(name string) string {
	_, f, _ := strings.Cut(name, " ")
	return f
}

func TestHandbookRows(t *testing.T) {
	cs, ks := Handbook()
	if len(cs) < 40 || len(ks) < 12 {
		t.Errorf("%d conductors and %d cables; at least 40 and 12 are promised", len(cs), len(ks))
	}
	names := map[string]bool{}
	for _, c := range cs {
		if names[c.Name] {
			t.Errorf("%s: twice", c.Name)
		}
		names[c.Name] = true
		if !strings.Contains(c.Source, "recalled from memory") {
			t.Errorf("%s: source %q does not say how it is known", c.Name, c.Source)
		}
		if c.GMR >= c.Diameter/2 || c.R <= 0 || c.Rating <= 0 {
			t.Errorf("%s: impossible: %+v", c.Name, c)
		}
	}
	for _, k := range ks {
		if names[k.Name] {
			t.Errorf("%s: twice", k.Name)
		}
		names[k.Name] = true
		if !names[k.Conductor] || k.Strands > 0 && !names[k.Strand] {
			t.Errorf("%s: core %q or strand %q is not in the handbook", k.Name, k.Conductor, k.Strand)
		}
		if k.Source == "" || !(k.Rating > 0) || k.Permittivity != DefaultPermittivity {
			t.Errorf("%s: incomplete: %+v", k.Name, k)
		}
		if (k.Strands > 0) == (k.ShieldDiameter > 0) {
			t.Errorf("%s: neither or both of a neutral and a shield", k.Name)
		}
	}
}

// Within a family more metal means less resistance, a thicker conductor and no lower rating.
func TestHandbookGoesWithSize(t *testing.T) {
	cs, _ := Handbook()
	for i, a := range cs {
		for _, b := range cs[:i] {
			if family(a.Name) != family(b.Name) {
				continue
			}
			p, q := a, b // p the smaller
			if circularMils(t, p.Name) > circularMils(t, q.Name) {
				p, q = q, p
			}
			if p.R <= q.R || p.Diameter >= q.Diameter || p.Rating > q.Rating {
				t.Errorf("%s and %s are out of order: %+v %+v", p.Name, q.Name, p, q)
			}
		}
	}
}

// Resistance times area is the metal's. Annealed copper has 1/58 ohm mm2/m at 20 °C
// (IEC 60028), which is 54.76 ohm kcmil/mi; aluminium has 61 % of that conductivity
// and 0.00403 per degree, hard copper 97.3 % and 0.00382 (common practice); with 30
// degrees and 2 % of length for the lay: 102.6 and 64.0 ohm kcmil/mi. The small
// neutral wires are solid and given cooler, thick conductors have some skin effect.
func TestHandbookResistances(t *testing.T) {
	cs, _ := Handbook()
	for _, c := range cs {
		got := c.R * mile * circularMils(t, c.Name)
		switch want, tol := 102.5, 0.02; {
		case strings.HasSuffix(c.Name, "AA"):
			near(t, c.Name, got, want, tol*want)
		case strings.HasSuffix(c.Name, "Cu"):
			near(t, c.Name, got, 63.2, 0.035*63.2) // between 61.1 and 65.2
		default: // ACSR: the steel's losses add up to 20 % in one layer of aluminium, up to 7 % in three
			if got < 0.98*want || got > 1.24*want {
				t.Errorf("%s: %g ohm kcmil/mi", c.Name, got)
			}
		}
	}
}

// Stranding fixes diameter and GMR: equal strands of diameter d in 1, 2, 3 or 4
// layers around one make 3, 5, 7 or 9 d, and GMR over radius is that of the pattern (Westinghouse
// Transmission and Distribution Reference Book, ch. 3, recalled from memory).
func TestHandbookStranding(t *testing.T) {
	cs, _ := Handbook()
	for _, c := range cs {
		var strands, across, ratio float64
		switch family(c.Name) {
		case "30/7 ACSR": // aluminium and steel of one size
			strands, across, ratio = 30, 7, 0.826
		case "54/7 ACSR":
			strands, across, ratio = 54, 9, 0.8099
		case "26/7 ACSR": // thicker aluminium over thinner steel: 7.33 strands across
			strands, across, ratio = 26, 6.335, 0.812
		default: // 6/1 and 7/1 hold the steel's magnetism in their GMR; the others follow below
			continue
		}
		strand := math.Sqrt(circularMils(t, c.Name)/strands*1000) * mil
		near(t, c.Name+" diameter", c.Diameter/mil, across*strand/mil, 0.003*c.Diameter/mil)
		near(t, c.Name+" GMR/radius", 2*c.GMR/c.Diameter, ratio, 0.005)
	}
	for _, row := range []struct {
		name           string
		strands        float64
		across, spread float64
		ratio          float64
	}{
		{"2 AA", 7, 3, 0.005, 0.7256}, {"1/0 AA", 7, 3, 0.005, 0.7256}, {"4/0 AA", 7, 3, 0.005, 0.7256},
		{"1 AA", 7, 3, 0.005, 0.7256}, {"266.8 AA", 7, 3, 0.005, 0.7256},
		{"336.4 AA", 19, 5, 0.005, 0.7577}, {"350 AA", 19, 5, 0.005, 0.7577}, {"397.5 AA", 19, 5, 0.005, 0.7577},
		{"477 AA", 37, 7, 0.005, 0.7678}, {"500 AA", 37, 7, 0.005, 0.7678}, {"556.5 AA", 37, 7, 0.005, 0.7678},
		{"700 AA", 37, 7, 0.005, 0.7678}, {"750 AA", 37, 7, 0.005, 0.7678}, {"795 AA", 37, 7, 0.005, 0.7678},
		{"14 Cu", 1, 1, 0.005, 0.7788}, {"12 Cu", 1, 1, 0.005, 0.7788}, {"10 Cu", 1, 1, 0.005, 0.7788}, {"8 Cu", 1, 1, 0.005, 0.7788},
		{"2 Cu", 7, 3, 0.005, 0.7256}, {"1 Cu", 7, 3, 0.005, 0.7256}, {"1/0 Cu", 7, 3, 0.005, 0.7256}, {"2/0 Cu", 7, 3, 0.005, 0.7256},
		{"3/0 Cu", 7, 3, 0.005, 0.7256}, {"4/0 Cu", 7, 3, 0.005, 0.7256},
		{"250 Cu", 19, 5, 0.005, 0.7577}, {"300 Cu", 19, 5, 0.005, 0.7577}, {"350 Cu", 19, 5, 0.005, 0.7577}, {"400 Cu", 19, 5, 0.005, 0.7577},
		{"500 Cu", 37, 7, 0.005, 0.7678},
	} {
		c := handbookConductor(t, row.name)
		d := row.across * math.Sqrt(circularMils(t, row.name)/row.strands*1000) // mil
		near(t, row.name+" diameter in mil", c.Diameter/mil, d, row.spread*d)
		near(t, row.name+" GMR/radius", 2*c.GMR/c.Diameter, row.ratio, 0.005)
	}
}

// Rows printed with the IEEE PES 4-, 13- and 34-node test feeders (W. H. Kersting;
// values from memory of the published documents): GMR ft, ohm/mi, in, A.
func TestHandbookAgainstFeeders(t *testing.T) {
	for _, row := range []struct {
		name                     string
		gmr, ohm, diameter, amps float64
	}{
		{"336.4 26/7 ACSR", 0.0244, 0.306, 0.721, 530},
		{"556.5 26/7 ACSR", 0.0313, 0.1859, 0.927, 730},
		{"4/0 6/1 ACSR", 0.00814, 0.592, 0.563, 340},
		{"1/0 6/1 ACSR", 0.00446, 1.12, 0.398, 230},
		{"2 6/1 ACSR", 0.00418, 1.69, 0.316, 180},
		{"4 6/1 ACSR", 0.00437, 2.57, 0.250, 140},
		{"250 AA", 0.0171, 0.41, 0.567, 329},
		{"1/0 AA", 0.0111, 0.97, 0.368, 202},
		{"1/0 Cu", 0.01113, 0.607, 0.368, 310},
		{"14 Cu", 0.00208, 14.8722, 0.0641, 20},
	} {
		c := handbookConductor(t, row.name)
		for _, v := range []struct {
			what      string
			got, want float64
		}{
			{"GMR", c.GMR / foot, row.gmr}, {"R", c.R * mile, row.ohm}, {"diameter", c.Diameter / inch, row.diameter}, {"rating", c.Rating, row.amps},
		} {
			near(t, row.name+" "+v.what, v.got, v.want, 1e-12*v.want)
		}
	}
	cn, ts := handbookCable(t, "250 AA CN 15kV 1/3"), handbookCable(t, "1/0 AA TS 15kV")
	if cn.Strands != 13 || cn.Strand != "14 Cu" || math.Abs(cn.OutsideDiameter/inch-1.29) > 1e-12 {
		t.Errorf("cable of configuration 606: %+v", cn)
	}
	if math.Abs(ts.ShieldDiameter/inch-0.88) > 1e-12 || math.Abs(ts.ShieldThickness/mil-5) > 1e-12 {
		t.Errorf("cable of configuration 607: %+v", ts)
	}
}

// Every cable of the handbook can be built, and its neutral is what its name says:
// a third of the core's conductance, or all of it, as near as whole strands come.
func TestHandbookCables(t *testing.T) {
	_, ks := Handbook()
	for _, k := range ks {
		l := buried(t, k.Name, "", 0, -4, 0.6, -4, 1.2, -4)
		if k.Strands == 0 {
			must(t)(l.TapeShield())
			continue
		}
		must(t)(l.ConcentricNeutral())
		share := l.Core.R / (l.Strand.R / float64(k.Strands))
		want := 1.0
		if strings.HasSuffix(k.Name, "1/3") {
			want = 1.0 / 3
		}
		// Common practice: no neutral has fewer than six strands, which is more than a third of a small core.
		if share < 0.75*want || share > 1.25*want && k.Strands > 6 {
			t.Errorf("%s: the neutral conducts %.3f of the core, its name says %s", k.Name, share, strconv.FormatFloat(want, 'f', 3, 64))
		}
	}
}

// The slices are the caller's own.
func TestHandbookIsNotShared(t *testing.T) {
	cs, ks := Handbook()
	cs[0].Name, ks[0].Name = "changed", "changed"
	again, kagain := Handbook()
	if again[0].Name == "changed" || kagain[0].Name == "changed" {
		t.Error("a change shows in the next call")
	}
}
