package conductor

import (
	"math"
	"math/cmplx"
	"math/rand"
	"testing"
)

// randomLine returns a line that could hang somewhere: 1 to 3 phases, a neutral or
// none, 50 or 60 Hz, soil from swamp to rock.
func randomLine(rng *rand.Rand, cs []Conductor) Line {
	l := Line{
		Frequency:        []float64{50, 60}[rng.Intn(2)],
		EarthResistivity: math.Pow(10, 1+2*rng.Float64()),
		PhaseConductor:   cs[rng.Intn(len(cs))],
		NeutralConductor: cs[rng.Intn(len(cs))],
	}
	for i := range 1 + rng.Intn(3) {
		l.Phase = append(l.Phase, Point{float64(i) + 0.4*rng.Float64(), 8 + 3*rng.Float64()})
	}
	if rng.Intn(3) > 0 {
		l.Neutral = &Point{2 * rng.Float64(), 6 + rng.Float64()}
	}
	return l
}

// everyMatrix calls f with the matrices of seeded random lines and cables.
func everyMatrix(t *testing.T, f func(t *testing.T, l Line, m Matrices)) {
	t.Helper()
	rng := rand.New(rand.NewSource(4))
	cs, ks := Handbook()
	for range 300 {
		l := randomLine(rng, cs)
		f(t, l, must(t)(l.Overhead()))
		k := ks[rng.Intn(len(ks))]
		c := CableLine{Frequency: l.Frequency, EarthResistivity: l.EarthResistivity, Phase: l.Phase,
			Cable: k, Core: handbookConductor(t, k.Conductor), Neutral: l.Neutral, NeutralConductor: l.NeutralConductor}
		if k.Strands > 0 {
			c.Strand = handbookConductor(t, k.Strand)
			f(t, l, must(t)(c.ConcentricNeutral()))
		} else {
			f(t, l, must(t)(c.TapeShield()))
		}
	}
}

// definite tells whether the leading n×n block is positive definite, by Cholesky.
func definite(m [3][3]float64, n int) bool {
	var c [3][3]float64
	for i := range n {
		for j := 0; j <= i; j++ {
			s := m[i][j]
			for k := range j {
				s -= c[i][k] * c[j][k]
			}
			switch {
			case i > j:
				c[i][j] = s / c[j][j]
			case s <= 0:
				return false
			default:
				c[i][i] = math.Sqrt(s)
			}
		}
	}
	return true
}

// A passive line: symmetric to the bit, losses and stored energies above zero for
// any currents and voltages, and nothing outside its positions.
func TestMatricesArePassive(t *testing.T) {
	everyMatrix(t, func(t *testing.T, l Line, m Matrices) {
		var r, x [3][3]float64
		for i := range 3 {
			for j := range 3 {
				r[i][j], x[i][j] = real(m.Z[i][j]), imag(m.Z[i][j])
				if m.Z[i][j] != m.Z[j][i] || m.B[i][j] != m.B[j][i] {
					t.Fatalf("%+v: not symmetric: %v", l, m)
				}
				if (i >= m.N || j >= m.N) && (m.Z[i][j] != 0 || m.B[i][j] != 0) {
					t.Fatalf("%+v: something beyond position %d: %v", l, m.N, m)
				}
				if i != j && m.B[i][j] > 0 {
					t.Fatalf("%+v: mutual susceptance %g above zero", l, m.B[i][j])
				}
			}
		}
		if m.N != len(l.Phase) || !definite(r, m.N) || !definite(x, m.N) || !definite(m.B, m.N) {
			t.Fatalf("%+v: not positive definite: %v", l, m)
		}
	})
}

// Admittance is the inverse, and so is the one in symmetrical components.
func TestAdmittanceIsInverse(t *testing.T) {
	everyMatrix(t, func(t *testing.T, l Line, m Matrices) {
		y, err := m.Admittance()
		if err != nil {
			t.Fatal(err)
		}
		identity(t, m.Z, y, m.N)
		s, ok := m.Symmetrical()
		if ok != (m.N == 3) {
			t.Fatalf("sequence matrices of %d positions: %t", m.N, ok)
		}
		if ok {
			identity(t, s.Z, s.Y, 3)
		}
	})
	if _, err := (Matrices{N: 2}).Admittance(); err == nil {
		t.Error("a matrix of zeros has an inverse")
	}
	if _, ok := (Matrices{N: 3}).Symmetrical(); ok {
		t.Error("a matrix of zeros has an admittance")
	}
}

// A matrix as given may have a first entry of next to nothing beside its others.
func TestAdmittancePivots(t *testing.T) {
	m := Matrices{N: 3}
	m.Z = [3][3]complex128{{1e-18, 1i, 2}, {1i, 1e-18, 3 + 1i}, {2, 3 + 1i, 1e-18i}}
	y, err := m.Admittance()
	if err != nil {
		t.Fatal(err)
	}
	identity(t, m.Z, y, 3)
}

func identity(t *testing.T, a, b [3][3]complex128, n int) {
	t.Helper()
	for i := range n {
		for j := range n {
			var s complex128
			for k := range n {
				s += a[i][k] * b[k][j]
			}
			if i == j {
				s--
			}
			if cmplx.Abs(s) > 1e-11 {
				t.Fatalf("Z·Y differs from 1 by %g at %d, %d", s, i, j)
			}
		}
	}
}

// Moving the line to the side, seeing it in a mirror, or naming its positions in
// another order changes nothing but the order.
func TestOrderOfPositions(t *testing.T) {
	rng := rand.New(rand.NewSource(5))
	cs, _ := Handbook()
	for range 100 {
		l := randomLine(rng, cs)
		m := must(t)(l.Overhead())
		order := rng.Perm(len(l.Phase))
		moved := l
		moved.Phase = make([]Point, len(l.Phase))
		for i, from := range order {
			moved.Phase[i] = Point{7 - l.Phase[from].X, l.Phase[from].Y}
		}
		if l.Neutral != nil {
			moved.Neutral = &Point{7 - l.Neutral.X, l.Neutral.Y}
		}
		other := must(t)(moved.Overhead())
		for i, a := range order {
			for j, b := range order {
				if d := cmplx.Abs(other.Z[i][j] - m.Z[a][b]); d > 1e-12 {
					t.Fatalf("%+v in order %v: Z %d %d differs by %g ohm/km", l, order, i, j, d)
				}
				near(t, "B", other.B[i][j]*1e6, m.B[a][b]*1e6, 1e-11)
			}
		}
	}
}

// Full transposition, a third of the length in each turn, leaves only diagonals in
// symmetrical components, with z1 and z0 from the means.
func TestTransposition(t *testing.T) {
	m := must(t)(kersting41(t).Overhead())
	mean := Matrices{N: 3}
	for turn := range 3 {
		for i := range 3 {
			for j := range 3 {
				mean.Z[i][j] += m.Z[(i+turn)%3][(j+turn)%3] / 3
				mean.B[i][j] += m.B[(i+turn)%3][(j+turn)%3] / 3
			}
		}
	}
	s, _ := mean.Symmetrical()
	for i := range 3 {
		for j := range 3 {
			if i != j && (cmplx.Abs(s.Z[i][j]) > 1e-15 || cmplx.Abs(s.B[i][j]) > 1e-20) {
				t.Errorf("%d, %d left over: %g, %g", i, j, s.Z[i][j], s.B[i][j])
			}
		}
	}
	again := Sequence(s.Z[1][1], s.Z[0][0], real(s.B[1][1]), real(s.B[0][0]))
	for i := range 3 {
		for j := range 3 {
			if cmplx.Abs(again.Z[i][j]-mean.Z[i][j]) > 1e-15 || math.Abs(again.B[i][j]-mean.B[i][j]) > 1e-20 {
				t.Errorf("%d, %d: %v from sequence, %v from the mean", i, j, again.Z[i][j], mean.Z[i][j])
			}
		}
	}
}

func TestSequenceRoundTrip(t *testing.T) {
	rng := rand.New(rand.NewSource(6))
	for range 50 {
		z1 := complex(rng.Float64(), rng.Float64())
		z0 := complex(3*rng.Float64(), 3*rng.Float64())
		b1, b0 := 4e-6*rng.Float64(), 2e-6*rng.Float64()
		s, ok := Sequence(z1, z0, b1, b0).Symmetrical()
		if !ok {
			t.Fatal("no sequence matrices")
		}
		for k, want := range []complex128{z0, z1, z1} {
			if cmplx.Abs(s.Z[k][k]-want) > 1e-14 {
				t.Errorf("z%d: %v, want %v", k, s.Z[k][k], want)
			}
		}
		for k, want := range []float64{b0, b1, b1} {
			if cmplx.Abs(s.B[k][k]-complex(want, 0)) > 1e-19 {
				t.Errorf("b%d: %v, want %v", k, s.B[k][k], want)
			}
		}
	}
}

// Kron's reduction is the full system with no voltage on the neutrals: the currents
// that flow in them by themselves make the same drop.
func TestKronIsTheFullSystem(t *testing.T) {
	l := buried(t, "250 AA CN 15kV 1/3", "1/0 Cu", 0, 0, 0.5, 0, 1, 0.1, 1.5, 0.2)
	rng := rand.New(rand.NewSource(7))
	n, all := 3, 5
	full := square[complex128](all)
	for i := range all {
		for j := 0; j <= i; j++ {
			full[i][j] = complex(rng.Float64(), rng.Float64())
			full[j][i] = full[i][j]
		}
		full[i][i] += complex(4, 5)
	}
	work := square[complex128](all)
	for i := range full {
		copy(work[i], full[i])
	}
	reduced := kron(work, n)
	current := []complex128{1, complex(-0.4, 0.8), complex(-0.7, -0.7), 0, 0}
	// The neutrals' currents from the last two rows, by Cramer's rule.
	a, b, c := full[3][3], full[3][4], full[4][4]
	var p, q complex128
	for j := range n {
		p -= full[3][j] * current[j]
		q -= full[4][j] * current[j]
	}
	det := a*c - b*b
	current[3], current[4] = (p*c-b*q)/det, (a*q-b*p)/det
	for i := range n {
		var want, got complex128
		for j := range all {
			want += full[i][j] * current[j]
		}
		for j := range n {
			got += reduced[i][j] * current[j]
		}
		if cmplx.Abs(want-got) > 1e-12 {
			t.Errorf("drop at %d: %v, want %v", i, got, want)
		}
	}
	if len(reduced) != n || must(t)(l.ConcentricNeutral()).N != n {
		t.Error("neutrals are left over")
	}
}
