package vector

// Groups is a sparse matrix as Rows is, of rows in groups: up to GroupRows targets one
// behind the other that take the same sources.
type Groups struct {
	// Coef has, group by group and source by source, a coefficient for each row of the
	// group, real and imaginary part.
	Coef []float64

	index     []int32 // by group: offset of the first target, rows, sources, their offsets
	groups    int
	far, wide int
	coefs     int
}

// GroupRows is the most rows of a group.
const GroupRows = 3

// Group appends a group of one to GroupRows rows and at least one source.
func (g *Groups) Group(target, rows int, sources ...int) {
	if rows < 1 || rows > GroupRows || len(sources) == 0 {
		panic("vector: a group has one to three rows and at least one source")
	}
	g.index = append(g.index, int32(target*Stride), int32(rows), int32(len(sources)))
	g.far = max(g.far, target+rows)
	for _, s := range sources {
		g.index = append(g.index, int32(s*Stride))
		g.wide = max(g.wide, s+1)
	}
	g.groups++
	g.coefs += rows * len(sources)
}

// Len is the number of groups.
func (g *Groups) Len() int { return g.groups }

func (g *Groups) check(dst, src []float64) {
	if len(dst) < g.far*Width || len(src) < g.wide*Width || len(g.Coef) != 2*g.coefs {
		panic("vector: groups reach beyond the values, or their coefficients are not all there")
	}
}

// Set sets every target to Σ coef·source. The sources of a group may be targets of groups
// before it, not its own.
func (g *Groups) Set(dst, src []float64) {
	g.check(dst, src)
	if g.groups > 0 {
		groupsSet(&dst[0], &src[0], &g.index[0], &g.Coef[0], g.groups)
	}
}

// Add adds Σ coef·source to every target. The sources of a group may be targets of groups
// before it, not its own.
func (g *Groups) Add(dst, src []float64) {
	g.check(dst, src)
	if g.groups > 0 {
		groupsAdd(&dst[0], &src[0], &g.index[0], &g.Coef[0], g.groups)
	}
}
