package conductor

// Matrices are the series impedance and the shunt susceptance of a construction
// per kilometre, by position; the neutral is reduced.
//
// N is 1 to 3. Entries beyond N are zero. Both are symmetric.
type Matrices struct {
	N int
	Z [3][3]complex128 // ohm/km
	B [3][3]float64    // S/km
}
