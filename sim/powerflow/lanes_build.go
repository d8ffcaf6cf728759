package powerflow

import (
	"math"
	"slices"
	"sort"

	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
)

// place gives every unknown its value: the independent ones part by part, the top last,
// within a part level by level of the factor, then the dependent ones part by part.
func (l *Lanes) place(mostOfPart int) {
	s := l.s
	l.slot = make([]int32, len(s.Net.Unknowns))
	l.blocks = newBlocks(s.pat)
	l.divide(mostOfPart)
	l.rank = make([]int32, l.free)
	order := l.blocks.levels()
	for i := range l.parts {
		k := (i + 1) % len(l.parts)
		for _, g := range order {
			if l.partOf[g] != int32(k) {
				continue
			}
			l.order = append(l.order, g)
			for _, c := range l.blocks.groups[g].columns {
				l.rank[c] = int32(len(l.valuePart))
				l.valuePart = append(l.valuePart, int32(k))
			}
		}
	}
	for k := range l.parts {
		l.parts[k].dependent[0] = len(l.valuePart)
		for u, terms := range s.red.terms {
			if !plainTerm(terms) && l.partOfTerms(terms) == int32(k) {
				l.slot[u] = int32(len(l.valuePart))
				l.valuePart = append(l.valuePart, int32(k))
			}
		}
		l.parts[k].dependent[1] = len(l.valuePart)
	}
	l.all = len(l.valuePart)
	for range s.Net.Fixed {
		l.valuePart = append(l.valuePart, 0)
	}
	l.held = l.all + len(s.Net.Fixed)
	l.weight = make([]float64, l.all)
	for u, terms := range s.red.terms {
		if plainTerm(terms) {
			if c := terms[0].col; c >= 0 {
				l.slot[u] = l.rank[s.pat.place[c]]
			} else {
				l.slot[u] = int32(l.all) + (-1 - c)
				continue
			}
		}
		l.weight[l.slot[u]] = s.perUnit[u] * s.perUnit[u]
	}
	l.x = vector.Make(l.held + len(s.Net.Fixed))
}

// plainTerm tells whether an unknown is an independent or a fixed one.
func plainTerm(t []term) bool { return len(t) == 1 && t[0].coef < 0 }

// rows lists the sparse matrices of an iteration.
func (l *Lanes) rows() {
	s := l.s
	fixedOf := map[int32][]fixedStamp{}
	for _, st := range s.toFixed {
		fixedOf[st.row] = append(fixedOf[st.row], st)
	}
	for row := range int32(l.free) {
		st := fixedOf[row]
		if len(st) == 0 {
			continue
		}
		var src []int
		for _, x := range st {
			src = append(src, l.held+int(x.fixed))
		}
		p := &l.parts[l.valuePart[l.rank[row]]]
		l.row(&p.pull, &p.pullBy, int(l.rank[row]), src)
		p.pulls = append(p.pulls, st)
	}
	type entry struct {
		part, target, source int
		coef                 int32
	}
	var into []entry
	for u, terms := range s.red.terms {
		if plainTerm(terms) {
			continue
		}
		k := l.valuePart[l.slot[u]]
		p := &l.parts[k]
		var src []int
		for _, t := range terms {
			from := l.held + int(-1-t.col)
			if t.col >= 0 {
				from = int(l.rank[s.pat.place[t.col]])
				into = append(into, entry{int(k), from, int(l.slot[u]), t.coef})
			}
			src = append(src, from)
			p.expands = append(p.expands, t.coef)
		}
		l.row(&p.expand, &p.expandBy, int(l.slot[u]), src)
	}
	sort.SliceStable(into, func(a, b int) bool {
		return into[a].part < into[b].part || into[a].part == into[b].part && into[a].target < into[b].target
	})
	for i := 0; i < len(into); {
		x := into[i]
		p := &l.parts[x.part]
		var src []int
		for ; i < len(into) && into[i].part == x.part && into[i].target == x.target; i++ {
			src = append(src, into[i].source)
			p.gathers = append(p.gathers, into[i].coef)
		}
		l.row(&p.gather, &p.gatherBy, x.target, src)
	}
	l.sweep()
}

// row appends a row, in lanes of their own positions to the groups.
func (l *Lanes) row(rows *vector.Rows, by *vector.Groups, target int, src []int) {
	if l.states != nil && len(src) > 0 {
		by.LaneGroup(target, 1, src...)
		return
	}
	rows.Row(target, src...)
}

// sweep lists the groups of the two substitutions, each with what it depends on.
func (l *Lanes) sweep() {
	b := l.blocks
	type entry struct {
		column int
		w      [mostColumns]int32 // by row of the group
	}
	left := make([][]entry, len(b.groups)) // of each group
	owner := make([]int32, len(b.w))
	for i := range b.groups {
		g := &b.groups[i]
		for k := range len(g.rows) * len(g.columns) {
			owner[g.w+k] = int32(i)
		}
		for c, col := range g.columns {
			for r, row := range g.rows {
				to := b.of[row]
				if n := len(left[to]); n == 0 || left[to][n-1].column != int(l.rank[col]) {
					e := entry{column: int(l.rank[col])}
					for k := range e.w {
						e.w[k] = int32(len(b.w) - 1)
					}
					left[to] = append(left[to], e)
				}
				at := int32(0)
				for k, x := range b.groups[to].columns {
					if x == row {
						at = int32(k)
					}
				}
				left[to][len(left[to])-1].w[at] = int32(g.w + r*len(g.columns) + c)
			}
		}
	}
	l.downs, l.ups = make([][]coefAt, len(b.groups)), make([]coefs, len(b.groups))
	for _, o := range l.order {
		if len(left[o]) == 0 {
			continue
		}
		p := &l.parts[l.partOf[o]]
		columns := b.groups[o].columns
		var src []int
		var down []int32
		differs := false
		for _, e := range left[o] {
			src = append(src, e.column)
			down = append(down, e.w[:len(columns)]...)
			differs = differs || l.states.differs(b, owner[slices.Min(e.w[:len(columns)])])
		}
		if differs {
			p.downBy = appendLane(p.downBy, p.forward.LaneGroup(int(l.rank[columns[0]]), len(columns), src...), down)
			continue
		}
		for i, at := range down {
			if int(at) < len(b.w)-1 {
				l.downs[owner[at]] = append(l.downs[owner[at]], coefAt{l.partOf[o], int32(len(p.down) + i)})
			}
		}
		p.down = append(p.down, down...)
		p.forward.Group(int(l.rank[columns[0]]), len(columns), src...)
	}
	for i := len(l.order) - 1; i >= 0; i-- {
		o := l.order[i]
		p, g := &l.parts[l.partOf[o]], &b.groups[o]
		n := len(g.columns)
		var src []int
		var up []int32
		for d, col := range g.columns {
			src = append(src, int(l.rank[col]))
			for c := range n {
				up = append(up, int32(g.m+c*n+d))
			}
		}
		for r, row := range g.rows {
			src = append(src, int(l.rank[row]))
			for c := range n {
				up = append(up, int32(-1-(g.w+r*n+c)))
			}
		}
		if l.states.differs(b, o) {
			p.upBy = appendLane(p.upBy, p.backward.LaneGroup(int(l.rank[g.columns[0]]), n, src...), up)
			continue
		}
		l.ups[o] = coefs{l.partOf[o], len(p.up), len(p.up) + len(up)}
		p.up = append(p.up, up...)
		p.backward.Group(int(l.rank[g.columns[0]]), n, src...)
	}
	for k := range l.parts {
		p := &l.parts[k]
		p.forward.Coef, p.backward.Coef = make([]float64, 2*len(p.down)), make([]float64, 2*len(p.up))
	}
}

// appendLane appends the places of coefficients from first on.
func appendLane(to []laneCoef, first int, places []int32) []laneCoef {
	for i, p := range places {
		to = append(to, laneCoef{first + i, p})
	}
	return to
}

// branches sorts the injections into lists.
func (l *Lanes) branches() {
	s := l.s
	for k := range l.parts {
		p := &l.parts[k]
		for i := range p.loads {
			p.loads[i] = vector.NewLoads(i&1 == 1, i&2 == 2)
		}
		p.loads[firstWye], p.loads[firstZIP] = vector.NewFirstLoads(false), vector.NewFirstLoads(true)
	}
	begun := make([]bool, l.held)
	l.list, l.member = make([]int32, len(s.Injections)), make([]int32, len(s.Injections))
	l.listed = make([]int32, len(s.Injections))
	for k := range l.listed {
		l.listed[k] = int32(k)
	}
	// In the order of their values, which then pass through the cache in a row.
	sort.SliceStable(l.listed, func(a, b int) bool {
		return l.slot[s.Injections[l.listed[a]].From] < l.slot[s.Injections[l.listed[b]].From]
	})
	for _, k := range l.listed {
		j := &s.Injections[k]
		if j.Group != 0 {
			l.list[k] = -1
			continue
		}
		list, to := 0, 0
		if j.To != network.Ground {
			list, to = 1, int(l.slot[j.To])
		}
		zip := j.PC != 1 || j.QC != 1 || j.PI != 0 || j.QI != 0 || j.PZ != 0 || j.QZ != 0
		if zip {
			list += 2
		}
		part := l.valuePart[l.slot[j.From]]
		if at := l.slot[j.From]; j.To == network.Ground && !begun[at] {
			begun[at] = true
			if list = firstWye; zip {
				list = firstZIP
			}
		} else if j.To != network.Ground {
			part = max(part, l.valuePart[to])
		}
		least := 0.0
		if j.Bent() {
			least = Corner * Corner * j.Nominal * j.Nominal
		}
		n := j.Nominal
		loads := l.parts[part].loads[list]
		l.list[k], l.member[k] = part*lists+int32(list), int32(loads.Len())
		loads.Branch(int(l.slot[j.From]), to, least, [6]float64{j.PC, j.PI / n, j.PZ / (n * n), j.QC, j.QI / n, j.QZ / (n * n)})
	}
	l.Block, l.asked = l.NewBlock(), l.newPowers()
	for at := 0; at < l.held; at++ {
		if !begun[at] {
			l.parts[l.valuePart[at]].blank.Value(at)
		}
	}
}

// Expect says anew what each injection draws at most, VA, whatever the instant.
func (l *Lanes) Expect(largest []float64) { l.tolerate(largest) }

// tolerate finds how small a change must be for the mismatch at every node to be within
// a tolerance of 1, whatever the instant.
func (l *Lanes) tolerate(largest []float64) {
	s := l.s
	at := make([]float64, len(s.nodeSize))
	for k := range s.Injections {
		j := &s.Injections[k]
		moved := sensitivity * largest[k]
		if j.Group != 0 {
			moved *= groupSteepness
		}
		for _, u := range j.ends() {
			if node := s.Net.Unknowns[u].Node; node >= 0 {
				at[node] += moved
			}
		}
	}
	l.least = math.Inf(1)
	for node, moved := range at {
		if moved > 0 {
			l.least = min(l.least, max(1000, s.nodeSize[node])/moved)
		}
	}
}
