package vector

// Groups is a sparse matrix as Rows is, of rows in groups: up to GroupRows targets one
// behind the other that take the same sources.
type Groups struct {
	// Coef has, group by group and source by source, a coefficient for each row of the
	// group, real and imaginary part.
	Coef []float64
	// LaneCoef has those of LaneGroup, as values, in the same order.
	LaneCoef []float64

	index     []int32 // by group: offset of the first target, rows, sources, their offsets
	groups    int
	far, wide int
	coefs     int
	laneCoefs int
}

// GroupRows is the most rows of a group.
const GroupRows = 3

// Group appends a group of one to GroupRows rows and at least one source.
func (g *Groups) Group(target, rows int, sources ...int) {
	g.coefs += rows * len(sources)
	g.group(target, rows, 0, sources)
}

// LaneGroup appends a group whose coefficients differ from lane to lane. It returns where
// the first of them stands in LaneCoef.
func (g *Groups) LaneGroup(target, rows int, sources ...int) (coef int) {
	coef = g.laneCoefs
	g.laneCoefs += rows * len(sources)
	g.group(target, rows, GroupRows, sources)
	return coef
}

// LaneCoefs is the number of values that LaneCoef must have.
func (g *Groups) LaneCoefs() int { return g.laneCoefs }

func (g *Groups) group(target, rows, kind int, sources []int) {
	if rows < 1 || rows > GroupRows || len(sources) == 0 {
		panic("vector: a group has one to three rows and at least one source")
	}
	g.index = append(g.index, int32(target*Stride), int32(kind+rows), int32(len(sources)))
	g.far = max(g.far, target+rows)
	for _, s := range sources {
		g.index = append(g.index, int32(s*Stride))
		g.wide = max(g.wide, s+1)
	}
	g.groups++
}

// Len is the number of groups.
func (g *Groups) Len() int { return g.groups }

func (g *Groups) check(dst, src []float64) {
	if len(dst) < g.far*Width || len(src) < g.wide*Width || len(g.Coef) != 2*g.coefs || len(g.LaneCoef) != Width*g.laneCoefs {
		panic("vector: groups reach beyond the values, or their coefficients are not all there")
	}
}

// Set sets every target to Σ coef·source. The sources of a group may be targets of groups
// before it, not its own.
func (g *Groups) Set(dst, src []float64) {
	g.check(dst, src)
	if g.groups > 0 {
		groupsSet(&dst[0], &src[0], &g.index[0], first(g.Coef), first(g.LaneCoef), g.groups)
	}
}

// Add adds Σ coef·source to every target. The sources of a group may be targets of groups
// before it, not its own.
func (g *Groups) Add(dst, src []float64) {
	g.check(dst, src)
	if g.groups > 0 {
		groupsAdd(&dst[0], &src[0], &g.index[0], first(g.Coef), first(g.LaneCoef), g.groups)
	}
}
