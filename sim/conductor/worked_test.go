package conductor

import (
	"math"
	"math/cmplx"
	"testing"
)

// kersting41 is the line of Kersting, Distribution System Modeling and Analysis,
// examples 4.1 and 5.1 (recalled from memory): 336.4 26/7 with a 4/0 neutral.
func kersting41(t testing.TB) Line {
	return pole(t, "336.4 26/7 ACSR", "4/0 6/1 ACSR", 0, 29, 2.5, 29, 7, 29, 4, 25)
}

// nearZ compares the lower triangle, row by row, in ohm/mi.
func nearZ(t *testing.T, what string, m Matrices, want []complex128, tol float64) {
	t.Helper()
	for i, k := 0, 0; i < m.N; i++ {
		for j := 0; j <= i; j, k = j+1, k+1 {
			if d := cmplx.Abs(m.Z[i][j]*mile - want[k]); !(d <= tol) {
				t.Errorf("%s: z[%d][%d] = %.6f, want %.4f ohm/mi: %.2g apart", what, i+1, j+1, m.Z[i][j]*mile, want[k], d)
			}
		}
	}
}

func TestFourWireLine(t *testing.T) {
	l := kersting41(t)
	m := must(t)(l.Overhead())
	// Example 4.1, printed to four digits.
	nearZ(t, "60 Hz", m, []complex128{0.4576 + 1.0780i, 0.1560 + 0.5017i, 0.4666 + 1.0482i,
		0.1535 + 0.3849i, 0.1580 + 0.4236i, 0.4615 + 1.0651i}, 1e-4)
	// Example 5.1, in uS/mi.
	want := []float64{5.6712, -1.8362, 5.9774, -0.7034, -1.1690, 5.3911}
	for i, k := 0, 0; i < 3; i++ {
		for j := 0; j <= i; j, k = j+1, k+1 {
			near(t, "b", m.B[i][j]*mile*1e6, want[k], 1e-3*math.Abs(want[k]))
		}
	}
	s, ok := m.Symmetrical()
	if !ok {
		t.Fatal("no sequence matrices")
	}
	// Example 4.1, sequence impedances.
	for _, c := range []struct {
		name string
		got  complex128
		want complex128
	}{
		{"z0", s.Z[0][0], 0.7735 + 1.9373i},
		{"z1", s.Z[1][1], 0.3061 + 0.6270i},
		{"z2", s.Z[2][2], 0.3061 + 0.6270i},
		{"z12", s.Z[1][2], -0.0723 - 0.0060i},
		{"z01", s.Z[0][1], 0.0256 + 0.0115i},
	} {
		if d := cmplx.Abs(c.got*mile - c.want); d > 1e-4 {
			t.Errorf("%s = %.5f, want %.4f ohm/mi", c.name, c.got*mile, c.want)
		}
	}

	// The same at 50 Hz, computed independently from the formula with rounded constants.
	l.Frequency = 50
	m = must(t)(l.Overhead())
	nearZ(t, "50 Hz", m, []complex128{0.4493 + 0.9130i, 0.1476 + 0.4332i, 0.4582 + 0.8891i,
		0.1452 + 0.3356i, 0.1496 + 0.3684i, 0.4531 + 0.9026i}, 1e-4)
	s, _ = m.Symmetrical()
	near(t, "r1 at 50 Hz", real(s.Z[1][1])*mile, 0.3061, 1e-4)
	near(t, "x1 at 50 Hz", imag(s.Z[1][1])*mile, 0.5225, 1e-4)
}

// The matrix before reduction, Kersting, example 4.1 (recalled from memory).
func TestPrimitiveOfFourWireLine(t *testing.T) {
	l := kersting41(t)
	d := distances(wires(l.Phase, 0, l.Neutral, 0))
	r := make([]float64, 4)
	for i := range r {
		c := l.PhaseConductor
		if i == 3 {
			c = l.NeutralConductor
		}
		r[i], d[i][i] = c.R, c.GMR
	}
	z := primitive(60, 100, r, d)
	for _, c := range []struct {
		i, j int
		want complex128
	}{
		{0, 0, 0.4013 + 1.4133i}, {2, 2, 0.4013 + 1.4133i}, {3, 3, 0.6873 + 1.5465i},
		{1, 0, 0.0953 + 0.8515i}, {2, 1, 0.0953 + 0.7802i}, {2, 0, 0.0953 + 0.7266i},
		{3, 0, 0.0953 + 0.7525i}, {3, 1, 0.0953 + 0.7865i}, {3, 2, 0.0953 + 0.7674i},
		{0, 3, 0.0953 + 0.7525i},
	} {
		if got := z[c.i][c.j] * mile; cmplx.Abs(got-c.want) > 1e-4 {
			t.Errorf("z[%d][%d] = %.5f, want %.4f ohm/mi", c.i, c.j, got, c.want)
		}
	}
}

// Kersting, ch. 4: at 60 Hz and 100 ohm m the book has 0.09530, 0.12134 ohm/mi and
// 7.93402 for distances in feet; 0.04935 and 0.06283 ohm/km at 50 Hz.
func TestEarthConstants(t *testing.T) {
	near(t, "R 60 Hz", earthResistance(60)*mile, 0.09530, 5e-6)
	near(t, "X 60 Hz", reactance(60)*mile, 0.12134, 5e-6)
	near(t, "K 60 Hz", math.Log(EarthDepth(60, 100)/foot), 7.93402, 5e-5)
	near(t, "R 50 Hz", earthResistance(50), 0.0493480, 1e-6)
	near(t, "X 50 Hz", reactance(50), 0.0628319, 1e-6)
	near(t, "K 50 Hz", math.Log(EarthDepth(50, 100)/foot), 8.025174, 5e-5)
	near(t, "depth", EarthDepth(1, 1), 658.9, 0.05)
}

// Kersting, example 4.2 (recalled from memory): three 250 AA cables 6 in apart; the
// book prints 96.5569 uS/mi with a permittivity of vacuum that is 0.35 % low.
func TestConcentricNeutral(t *testing.T) {
	l := buried(t, "250 AA CN 15kV 1/3", "", 0, -4, 0.5, -4, 1, -4)
	m := must(t)(l.ConcentricNeutral())
	nearZ(t, "example 4.2", m, []complex128{0.7982 + 0.4463i, 0.3192 + 0.0328i, 0.7891 + 0.4041i,
		0.2849 - 0.0143i, 0.3192 + 0.0328i, 0.7982 + 0.4463i}, 2e-4)
	near(t, "b", m.B[1][1]*mile*1e6, 96.5569, 0.004*96.5569+0.01)
	s, _ := m.Symmetrical()
	near(t, "r1", real(s.Z[1][1])*mile, 0.4874, 2e-4)
	near(t, "x1", imag(s.Z[1][1])*mile, 0.4151, 2e-4)
}

// Kersting, example 4.3 (recalled from memory): 1/0 AA tape shield, 1/0 Cu neutral 3 in away.
func TestTapeShield(t *testing.T) {
	m := must(t)(buried(t, "1/0 AA TS 15kV", "1/0 Cu", 0, -4, 0.25, -4).TapeShield())
	nearZ(t, "example 4.3", m, []complex128{1.3219 + 0.6743i}, 2e-4)
	near(t, "b", m.B[0][0]*mile*1e6, 89.3179, 0.004*89.3179)
}

// Kersting, ch. 11 (recalled from memory): 1/0 AA triplex, r 0.973 ohm/mi, 80 mil insulation.
func TestTriplex(t *testing.T) {
	c := handbookConductor(t, "1/0 AA")
	c.R = 0.973 / mile
	m := must(t)(TriplexLine{Frequency: 60, EarthResistivity: 100, PhaseConductor: c, NeutralConductor: c, Insulation: 0.08 * inch}.Triplex())
	nearZ(t, "triplex", m, []complex128{1.5304 + 0.6132i, 0.5574 + 0.4461i, 1.5304 + 0.6132i}, 2e-4)
	if m.N != 2 || m.B != [3][3]float64{} {
		t.Errorf("N = %d, B = %v; want 2 legs without a shunt part", m.N, m.B)
	}
}

// Kersting, ch. 3 (recalled from memory): 336.4 26/7 at an equivalent spacing of
// 4.2863 ft has z1 = 0.306 + j0.6272 ohm/mi; conductors in a triangle of that side
// are transposed by nature.
func TestEquilateralTriangle(t *testing.T) {
	const side = 4.2863
	m := must(t)(pole(t, "336.4 26/7 ACSR", "", 0, 30, side, 30, side/2, 30+side*math.Sqrt(3)/2).Overhead())
	z1 := (m.Z[0][0] - m.Z[1][0]) * mile
	near(t, "r1", real(z1), 0.306, 1e-9)
	near(t, "x1", imag(z1), 0.6272, 5e-5)
	if d := cmplx.Abs(m.Z[2][1] - m.Z[1][0]); d > 1e-12 {
		t.Errorf("mutual impedances differ by %g ohm/km", d)
	}
}

// One wire above the earth, by hand: C = 2π·ε0/ln(2h/r); h = 10 m, r = 5 mm makes
// ln 4000 = 8.29405 and 6.70748 pF/m, at 50 Hz 2.10722e-6 S/km.
func TestSingleWireCapacitance(t *testing.T) {
	l := Line{Frequency: 50, EarthResistivity: 100, Phase: []Point{{0, 10}}, PhaseConductor: Conductor{R: 0.2, GMR: 0.004, Diameter: 0.01}}
	m := must(t)(l.Overhead())
	near(t, "b", m.B[0][0], 2.10722e-6, 1e-11)
}
