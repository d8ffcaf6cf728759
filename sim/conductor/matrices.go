package conductor

import (
	"errors"
	"math"
)

// Matrices are the series impedance and the shunt susceptance of a construction
// per kilometre, by position; the neutral is reduced.
//
// N is 1 to 3. Entries beyond N are zero. Both are symmetric.
type Matrices struct {
	N int
	Z [3][3]complex128 // ohm/km
	B [3][3]float64    // S/km
}

// Sequence returns the matrices of a perfectly transposed line from its positive-
// and zero-sequence impedances in ohm/km and susceptances in S/km:
//
//	self = (zero + 2·positive)/3,  mutual = (zero − positive)/3
//
// (C. L. Fortescue, Trans. AIEE 37, 1918).
func Sequence(z1, z0 complex128, b1, b0 float64) Matrices {
	m := Matrices{N: 3}
	for i := range 3 {
		for j := range 3 {
			m.Z[i][j] = (z0 - z1) / 3
			m.B[i][j] = (b0 - b1) / 3
		}
		m.Z[i][i] = (z0 + 2*z1) / 3
		m.B[i][i] = (b0 + 2*b1) / 3
	}
	return m
}

// sound returns m, or an error where the values of a construction, each possible by
// itself, are together beyond what the numbers or the equations hold.
func (m Matrices) sound() (Matrices, error) {
	for i := range m.N {
		for j := range m.N {
			if !finite(real(m.Z[i][j])) || !finite(imag(m.Z[i][j])) || !finite(m.B[i][j]) {
				return Matrices{}, errors.New("the values are too large or too small to compute with: check the units")
			}
		}
		if !(real(m.Z[i][i]) > 0) || m.B[i][i] < 0 {
			return Matrices{}, errors.New("the impedances or susceptances come out negative: check distances, radii and units")
		}
	}
	return m, nil
}

// Admittance returns the inverse of Z, g + jb in S·km: the series admittance of one
// kilometre. It fails where Z has no inverse.
func (m Matrices) Admittance() ([3][3]complex128, error) { return inverse(m.Z, m.N) }

// Symmetrical are the matrices of a construction in symmetrical components, in the
// order zero, positive, negative; row: the component of the voltage drop (of the
// current for Y and B), column: of the current (of the voltage). An ideally
// transposed line has nothing outside the diagonals.
type Symmetrical struct {
	Z [3][3]complex128 // ohm/km
	Y [3][3]complex128 // S·km, the inverse of Z
	B [3][3]complex128 // S/km; the shunt admittance is j·B
}

// Symmetrical returns the matrices in symmetrical components,
//
//	Z012 = A⁻¹·Z·A,  A = [1 1 1; 1 a² a; 1 a a²],  a = 1∠120°
//
// taking positions 1, 2 and 3 as phases A, B and C. ok is false where the
// construction has not three positions or Z has no inverse.
func (m Matrices) Symmetrical() (s Symmetrical, ok bool) {
	if m.N != 3 {
		return Symmetrical{}, false
	}
	y, err := m.Admittance()
	if err != nil {
		return Symmetrical{}, false
	}
	var b [3][3]complex128
	for i := range 3 {
		for j := range 3 {
			b[i][j] = complex(m.B[i][j], 0)
		}
	}
	return Symmetrical{Z: components(m.Z), Y: components(y), B: components(b)}, true
}

// components returns A⁻¹·m·A.
func components(m [3][3]complex128) [3][3]complex128 {
	a := complex(-0.5, math.Sqrt(3)/2)
	turn := [3]complex128{1, a, a * a} // a^k
	var s [3][3]complex128
	for r := range 3 {
		for c := range 3 {
			for i := range 3 {
				for j := range 3 {
					// A[j][c] = a^(−jc), A⁻¹[r][i] = a^(ri)/3.
					s[r][c] += turn[r*i%3] * m[i][j] * turn[(9-j*c)%3] / 3
				}
			}
		}
	}
	return s
}
