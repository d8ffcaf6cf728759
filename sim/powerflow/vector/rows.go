package vector

// Rows is a sparse matrix as a list of rows to be worked off in order: of each its
// target, the number of its entries, and the value that each entry takes. There is one
// coefficient for each entry.
type Rows struct {
	index []int32   // by row: offset of the target, entries, offsets of the sources
	Coef  []float64 // real and imaginary part by entry
	rows  int
	// far and wide are one more than the furthest target and source.
	far, wide int
	entries   int
}

// Row appends a row.
func (r *Rows) Row(target int, sources ...int) {
	r.index = append(r.index, int32(target*Stride), int32(len(sources)))
	r.far = max(r.far, target+1)
	for _, s := range sources {
		r.index = append(r.index, int32(s*Stride))
		r.wide = max(r.wide, s+1)
	}
	r.rows++
	r.entries += len(sources)
}

// Len is the number of rows, Entries that of their entries.
func (r *Rows) Len() int     { return r.rows }
func (r *Rows) Entries() int { return r.entries }

func (r *Rows) check(dst, src []float64) {
	if len(dst) < r.far*Width || len(src) < r.wide*Width || len(r.Coef) != 2*r.entries {
		panic("vector: rows reach beyond the values, or their coefficients are not all there")
	}
}

// Set sets every target to Σ coef·source. A row's sources may be targets of rows before
// it.
func (r *Rows) Set(dst, src []float64) {
	r.check(dst, src)
	if r.rows > 0 {
		rowsSet(&dst[0], &src[0], &r.index[0], first(r.Coef), r.rows)
	}
}

// Add adds Σ coef·source to every target. A row's sources may be targets of rows
// before it.
func (r *Rows) Add(dst, src []float64) {
	r.check(dst, src)
	if r.rows > 0 {
		rowsAdd(&dst[0], &src[0], &r.index[0], first(r.Coef), r.rows)
	}
}

func first(x []float64) *float64 {
	if len(x) == 0 {
		return nil
	}
	return &x[0]
}
