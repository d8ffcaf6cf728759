package vector

// Drives is a list of powers that follow series: of each its share, P + jQ at 1 of its
// series, and the rows that P and Q follow. A row is Lanes numbers.
type Drives struct {
	Share []float64 // P and Q by power
	index []int32
	n     int
	wide  int // one more than the furthest row
}

// Drive appends a power whose P follows row p and whose Q follows row q.
func (d *Drives) Drive(p, q int, share complex128) {
	d.index = append(d.index, int32(8*Lanes*p), int32(8*Lanes*q))
	d.Share = append(d.Share, real(share), imag(share))
	d.wide = max(d.wide, p+1, q+1)
	d.n++
}

// Scale sets the powers, values, to their shares times the rows of values.
func (d *Drives) Scale(power, values []float64) {
	if d.n == 0 {
		return
	}
	if len(power) < d.n*Width || len(values) < d.wide*Lanes || len(d.Share) != 2*d.n {
		panic("vector: powers follow rows that are not there")
	}
	scale(&power[0], &values[0], &d.index[0], &d.Share[0], d.n)
}

// Predict sets values to a + b·w + c·w², w being when by lane. curve has a, b and c of
// each value, real and imaginary part.
func Predict(v, curve []float64, when *[Lanes]float64) {
	n := len(curve) / 6
	if len(v) < n*Width {
		panic("vector: more curves than values")
	}
	if n > 0 {
		predict(&v[0], &curve[0], &when[0], n)
	}
}
