package vector

// Advance moves the lanes of a mask from v to x, and returns the square of the
// furthest that any value of each lane moved, |x−v|²·weight, NaN where a number is
// none. Other lanes of v stay as they are; what is returned of them means nothing.
func Advance(v, x, weight []float64, mask uint8, moved *[Lanes]float64) {
	n := len(weight)
	if len(v) < n*Width || len(x) < n*Width {
		panic("vector: fewer values than weights")
	}
	if n == 0 {
		*moved = [Lanes]float64{}
		return
	}
	advance(&v[0], &x[0], &weight[0], &masks[mask][0], &moved[0], n)
}

// masks has, for every mask, all bits of a lane's number set where the lane is in it.
var masks = func() (m [256][Lanes]uint64) {
	for k := range m {
		for l := range Lanes {
			if k>>l&1 == 1 {
				m[k][l] = ^uint64(0)
			}
		}
	}
	return m
}()
