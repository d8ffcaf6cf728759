package conductor

import (
	"math"
	"strings"
	"testing"
)

func TestImpossibleOverheadLines(t *testing.T) {
	for _, c := range []struct {
		name   string
		change func(*Line)
		want   []string
	}{
		{"no positions", func(l *Line) { l.Phase = nil }, []string{"0 phase positions"}},
		{"four positions", func(l *Line) { l.Phase = append(l.Phase, Point{3, 9}) }, []string{"4 phase positions"}},
		{"same place", func(l *Line) { l.Phase[2] = l.Phase[0] }, []string{"position 1 and position 3 are at the same place"}},
		{"neutral in a phase", func(l *Line) { *l.Neutral = l.Phase[1] }, []string{"position 2 and the neutral are at the same place"}},
		{"overlap", func(l *Line) { l.Phase[1].X = l.Phase[0].X + 0.01 }, []string{"position 1 and position 2 overlap", "0.3937 in apart", "0.721 in"}},
		{"underground", func(l *Line) { l.Phase[1].Y = -1 }, []string{"position 2 is at y = -3.281 ft", "y > 0"}},
		{"on the ground", func(l *Line) { l.Neutral.Y = 0 }, []string{"the neutral is at y = 0 ft"}},
		{"no place", func(l *Line) { l.Phase[0].X = math.NaN() }, []string{"position 1 has no place"}},
		{"infinitely high", func(l *Line) { l.Phase[0].Y = math.Inf(1) }, []string{"position 1 has no place"}},
		{"metres as km", func(l *Line) { l.Phase[2].X = 7000 }, []string{"position 1 and position 3", "beyond the depth"}},
		{"no frequency", func(l *Line) { l.Frequency = 0 }, []string{"frequency 0 Hz"}},
		{"earth of metal", func(l *Line) { l.EarthResistivity = -100 }, []string{"earth resistivity -100 ohm m", "100 is usual"}},
		{"earth of NaN", func(l *Line) { l.EarthResistivity = math.NaN() }, []string{"earth resistivity NaN"}},
		{"no resistance", func(l *Line) { l.PhaseConductor.R = 0 }, []string{`phase conductor "336.4 26/7 ACSR": resistance 0 ohm/km`}},
		{"no GMR", func(l *Line) { l.NeutralConductor.GMR = -1 }, []string{`neutral conductor "4/0 6/1 ACSR": GMR -1 m`}},
		{"radius for diameter", func(l *Line) { l.PhaseConductor.Diameter /= 2 }, []string{"GMR 0.0244 ft is more than half the diameter 0.3605 in"}},
		{"two at once", func(l *Line) { l.Frequency = -1; l.PhaseConductor.R = math.Inf(1) }, []string{"frequency -1 Hz", "resistance +Inf"}},
		{"out of the numbers", func(l *Line) { l.Frequency = 1e300; l.EarthResistivity = 1e300 }, []string{"too large"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			l := kersting41(t)
			c.change(&l)
			m, err := l.Overhead()
			refused(t, m, err, c.want)
		})
	}
}

func TestImpossibleCables(t *testing.T) {
	type method func(CableLine) (Matrices, error)
	cn, ts := "250 AA CN 15kV 1/3", "1/0 AA TS 15kV"
	for _, c := range []struct {
		name, cable string
		build       method
		change      func(*CableLine)
		want        []string
	}{
		{"cables overlap", cn, CableLine.ConcentricNeutral, func(l *CableLine) { l.Phase[1].X = 0.02 }, []string{"position 1 and position 2 overlap"}},
		{"neutral in the cable", ts, CableLine.TapeShield, func(l *CableLine) { l.Neutral.X = l.Phase[0].X + 0.01; l.Neutral.Y = l.Phase[0].Y },
			[]string{"position 1 and the neutral overlap"}},
		{"two strands", cn, CableLine.ConcentricNeutral, func(l *CableLine) { l.Cable.Strands = 2 }, []string{"2 strands", "at least 3"}},
		{"too many strands", cn, CableLine.ConcentricNeutral, func(l *CableLine) { l.Cable.Strands = 130 }, []string{"130 strands of 0.0641 in do not fit"}},
		{"no outside", cn, CableLine.ConcentricNeutral, func(l *CableLine) { l.Cable.OutsideDiameter = 0 }, []string{"outside diameter 0 m"}},
		{"inside out", cn, CableLine.ConcentricNeutral, func(l *CableLine) { l.Cable.OutsideDiameter = 0.5 * inch }, []string{"no room for the core of 0.567 in"}},
		{"no strand", cn, CableLine.ConcentricNeutral, func(l *CableLine) { l.Strand = Conductor{} }, []string{"strand: resistance 0", "strand: GMR 0"}},
		{"no shield", ts, CableLine.TapeShield, func(l *CableLine) { l.Cable.ShieldDiameter = math.NaN() }, []string{"shield diameter NaN m"}},
		{"thin air", ts, CableLine.TapeShield, func(l *CableLine) { l.Cable.ShieldThickness = 0 }, []string{"shield thickness 0 m"}},
		{"thick tape", ts, CableLine.TapeShield, func(l *CableLine) { l.Cable.ShieldThickness = 300 * mil }, []string{"no room for the core", "300 mil"}},
		{"no metal", ts, CableLine.TapeShield, func(l *CableLine) { l.Cable.ShieldResistivity = 0 }, []string{"shield resistivity 0 ohm m"}},
		{"less than vacuum", ts, CableLine.TapeShield, func(l *CableLine) { l.Cable.Permittivity = 0.23 }, []string{"permittivity 0.23", "2.3 is usual"}},
		{"no core", ts, CableLine.TapeShield, func(l *CableLine) { l.Core.R = -1 }, []string{`core "1/0 AA": resistance -1`}},
		{"no positions", cn, CableLine.ConcentricNeutral, func(l *CableLine) { l.Phase = nil }, []string{"0 phase positions"}},
		{"no frequency", cn, CableLine.ConcentricNeutral, func(l *CableLine) { l.Frequency = math.NaN() }, []string{"frequency NaN Hz"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			l := buried(t, c.cable, "1/0 Cu", 0, -4, 0.5, -4, 1, -4, 1.5, -4)
			c.change(&l)
			m, err := c.build(l)
			refused(t, m, err, c.want)
		})
	}
}

func TestImpossibleTriplex(t *testing.T) {
	aa := handbookConductor(t, "1/0 AA")
	good := TriplexLine{Frequency: 60, EarthResistivity: 100, PhaseConductor: aa, NeutralConductor: aa, Insulation: 0.08 * inch}
	for _, c := range []struct {
		want   string
		change func(*TriplexLine)
	}{
		{"insulation 0 m", func(l *TriplexLine) { l.Insulation = 0 }},
		{"frequency 0 Hz", func(l *TriplexLine) { l.Frequency = 0 }},
		{"neutral conductor", func(l *TriplexLine) { l.NeutralConductor = Conductor{} }},
		{"nearer than the conductors", func(l *TriplexLine) { l.EarthResistivity = 1e-12 }},
	} {
		l := good
		c.change(&l)
		m, err := l.Triplex()
		refused(t, m, err, []string{c.want})
	}
}

// refused checks that err says everything wanted and that nothing usable came with it.
func refused(t *testing.T, m Matrices, err error, want []string) {
	t.Helper()
	if err == nil {
		t.Fatalf("taken: %v; want an error with %q", m, want)
	}
	for _, w := range want {
		if !strings.Contains(err.Error(), w) {
			t.Errorf("error %q does not say %q", err, w)
		}
	}
	if m != (Matrices{}) {
		t.Errorf("matrices beside an error: %v", m)
	}
}

// Strands of 0.0641 in on a circle of 1.2259 in leave room for π/asin(0.0641/1.2259) = 60.05 of them.
func TestFullRingOfStrands(t *testing.T) {
	l := buried(t, "250 AA CN 15kV 1/3", "", 0, -4)
	l.Cable.Strands = 60
	must(t)(l.ConcentricNeutral())
	l.Cable.Strands = 61
	m, err := l.ConcentricNeutral()
	refused(t, m, err, []string{"61 strands"})
}

// Cables laid against each other touch and are taken, however inches round.
func TestTouchingCables(t *testing.T) {
	for _, name := range []string{"250 AA CN 15kV 1/3", "1/0 AA CN 15kV full"} {
		d := handbookCable(t, name).OutsideDiameter / foot
		must(t)(buried(t, name, "", 0, -4, d, -4, d/2, -4+d*math.Sqrt(3)/2).ConcentricNeutral())
	}
}

// No numbers make a panic, and what is taken is a passive line of finite numbers.
func FuzzOverhead(f *testing.F) {
	f.Add(60.0, 100.0, 0.19, 0.00744, 0.0183, 0.37, 0.00248, 0.0143, 0.0, 8.5, 0.76, 8.5, 1.2, 7.6)
	f.Add(50.0, 1e-9, 1e-300, 1e-300, 1e300, 0.37, 0.1, 0.2, 0.0, 1e-300, 0.76, 1e300, 1.2, -7.6)
	f.Add(1e300, 1e300, 1.0, 0.1, 0.2, 1.0, 0.1, 0.2, 0.0, 0.2, 0.2, 0.2, 0.4, 0.2)
	f.Fuzz(func(t *testing.T, freq, rho, r, gmr, d, rn, gmrn, dn, x1, y1, x2, y2, xn, yn float64) {
		c, n := Conductor{R: r, GMR: gmr, Diameter: d}, Conductor{R: rn, GMR: gmrn, Diameter: dn}
		l := Line{Frequency: freq, EarthResistivity: rho, Phase: []Point{{x1, y1}, {x2, y2}}, PhaseConductor: c,
			Neutral: &Point{xn, yn}, NeutralConductor: n}
		m, err := l.Overhead()
		k := CableLine{Frequency: freq, EarthResistivity: rho, Phase: l.Phase, Core: c, Strand: n, Neutral: l.Neutral, NeutralConductor: n,
			Cable: Cable{OutsideDiameter: rn, Strands: 12, ShieldDiameter: rn, ShieldThickness: gmrn, ShieldResistivity: rho, Permittivity: 2.3}}
		cn, cnErr := k.ConcentricNeutral()
		ts, tsErr := k.TapeShield()
		for _, got := range []struct {
			m   Matrices
			err error
		}{{m, err}, {cn, cnErr}, {ts, tsErr}} {
			if got.err != nil {
				continue
			}
			for i := range 2 {
				if z := got.m.Z[i][i]; !(real(z) > 0) || !finite(imag(z)) || !(got.m.B[i][i] >= 0) || !finite(got.m.B[i][i]) {
					t.Errorf("taken: %v", got.m)
				}
			}
		}
	})
}
