package vector

// Blank is a list of values that are set to zero.
type Blank struct {
	index []int32
	wide  int
}

// Value appends a value.
func (b *Blank) Value(at int) {
	b.index = append(b.index, int32(at*Stride))
	b.wide = max(b.wide, at+1)
}

// Clear sets the values to zero.
func (b *Blank) Clear(x []float64) {
	if len(x) < b.wide*Width {
		panic("vector: there are not so many values")
	}
	if n := len(b.index); n > 0 {
		blank(&x[0], &b.index[0], n)
	}
}

func plainBlank(x *float64, index *int32, n int) {
	r := reader{index: index}
	for range n {
		*value(x, r.next()) = [Width]float64{}
	}
}
