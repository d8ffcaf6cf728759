package powerflow

import (
	"slices"

	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
)

// states are the positions of the devices in lanes that each have their own, and what of
// the equations follows from them: the coefficients of what moves with a ratio, and of
// the factor the columns of entries that devices change and those on their way to the
// root of the elimination tree. All others are the same in every lane.
//
// The factor of all lanes is computed at once, by a program made for the pattern:
//
//	U_ij = y_ij − Σ_k L_jk·U_ik,  D_j = U_jj,  L_ij = U_ij/D_j
//
// over the columns k before j, then W and M of their groups (blocks). What columns that no
// device changes take off y is the same in every lane and part of the beginning.
type states struct {
	s       *Solver
	red     reduction // of the lane that is being positioned
	ratio   [vector.Lanes][]float64
	closed  [vector.Lanes][]bool
	bad     uint8 // lanes whose couplings have no unique solution
	stale   bool  // the program must run
	program vector.Products

	own    []bool    // by column: it differs from lane to lane
	x      []float64 // values: all of the following
	moving []movingEntry

	at []partCoefs // first coefficients, by part
	n  int         // values given away
	// Only while the program is written: the values of 1/D by column, of L by slot, of W and
	// M by their places in blocks.
	inverse, lower, w, m map[int]int
}

// partCoefs is where the coefficients of a part begin.
type partCoefs struct{ pull, gather, expand, forward, backward int }

// movingEntry is an entry of the equations that devices change: its value, and the part
// that they do not change.
type movingEntry struct {
	at     int
	still  complex128
	stamps []stamp
}

// NewPositionedLanes prepares lanes of a solver each of which has its own positions of the
// devices, which Position sets; before that they are those of the solver. It returns nil
// where the equations are singular there.
func NewPositionedLanes(s *Solver, largest []float64) *Lanes {
	return newPositionedLanes(s, largest, mostOfPart)
}

func newPositionedLanes(s *Solver, largest []float64, mostOfPart int) *Lanes {
	if s.ready() != nil || s.singular >= 0 {
		return nil
	}
	l := &Lanes{s: s, version: -1, free: s.red.free, states: &states{s: s}}
	l.place(mostOfPart)
	l.states.mark(l.blocks)
	l.rows()
	l.branches()
	l.tolerate(largest)
	l.flat = l.NewCurve()
	l.states.build(l)
	for lane := range vector.Lanes {
		l.Position(lane, s.ratio, s.closed)
	}
	return l
}

// mark finds the columns that differ from lane to lane.
func (t *states) mark(b *blocks) {
	p, u := t.s.pat, t.s.update
	t.own = make([]bool, p.n)
	for _, slot := range u.moving {
		t.own[u.columnOf(slot)] = true
	}
	for k := range int32(p.n) {
		if !t.own[k] {
			continue
		}
		for _, c := range b.groups[b.of[k]].columns {
			t.own[c] = true
		}
		if lo, hi := p.start[k], p.start[k+1]; lo < hi {
			t.own[p.row[lo-int32(p.n)]] = true
		}
	}
}

// differs tells whether a group differs from lane to lane; without states none does.
func (t *states) differs(b *blocks, group int32) bool {
	return t != nil && t.own[b.groups[group].columns[0]]
}

// room gives n values away.
func (t *states) room(n int) int {
	at := t.n
	t.n += n
	return at
}

// build makes the program and everything that no device changes.
func (t *states) build(l *Lanes) {
	s, p, b := t.s, t.s.pat, l.blocks
	t.red = s.red.clone()
	for k := range l.parts {
		p := &l.parts[k]
		t.at = append(t.at, partCoefs{t.room(p.pullBy.LaneCoefs()), t.room(p.gatherBy.LaneCoefs()), t.room(p.expandBy.LaneCoefs()),
			t.room(p.forward.LaneCoefs()), t.room(p.backward.LaneCoefs())})
	}
	t.inverse, t.lower = map[int]int{}, map[int]int{}
	t.w, t.m = map[int]int{}, map[int]int{}
	constant := map[int]complex128{} // by value
	t.factor(constant)
	for i := range b.groups {
		if t.own[b.groups[i].columns[0]] {
			t.group(b, i)
		} else {
			b.update(i, p, s.f)
			l.take(i)
		}
	}
	t.place(l, constant)
	t.inverse, t.lower, t.w, t.m = nil, nil, nil, nil
	t.x = vector.Make(t.n)
	for at, z := range constant {
		for lane := range vector.Lanes {
			vector.Put(t.x, at, lane, z)
		}
	}
	give := func(g *vector.Groups, at int) { g.LaneCoef = t.x[at*vector.Width : (at+g.LaneCoefs())*vector.Width] }
	for k, at := range t.at {
		p := &l.parts[k]
		give(&p.pullBy, at.pull)
		give(&p.gatherBy, at.gather)
		give(&p.expandBy, at.expand)
		give(&p.forward, at.forward)
		give(&p.backward, at.backward)
	}
}

// factor writes the columns' part of the program.
func (t *states) factor(constant map[int]complex128) {
	s, p, u := t.s, t.s.pat, t.s.update
	n := int32(p.n)
	moving := map[int][]stamp{}
	for _, st := range s.moving {
		moving[int(st.slot)] = append(moving[int(st.slot)], st)
	}
	upper := map[int]int{} // by slot: U
	w := make([]complex128, p.n)
	pairs := make([][][2]int, p.n) // by row of the column at hand
	for j := range n {
		if !t.own[j] {
			continue
		}
		lo, hi := p.start[j], p.start[j+1]
		rows := p.row[lo-n : hi-n]
		slots := []int32{j}
		w[j], pairs[j] = s.base[j], nil
		for e, r := range rows {
			slots = append(slots, lo+int32(e))
			w[r], pairs[r] = s.base[lo+int32(e)], nil
		}
		for e := u.left.start[j]; e < u.left.start[j+1]; e++ {
			k, at := u.left.column[e], u.left.slot[e]
			for x := at; x < p.start[k+1]; x++ {
				if r := p.row[x-n]; t.own[k] {
					pairs[r] = append(pairs[r], [2]int{upper[int(at)], t.lower[int(x)]})
				} else {
					w[r] -= s.f[at] * u.pivot[k] * s.f[x]
				}
			}
		}
		for i, slot := range slots {
			r := j
			if i > 0 {
				r = rows[i-1]
			}
			at := t.room(1)
			if st := moving[int(slot)]; st != nil {
				t.moving = append(t.moving, movingEntry{at, w[r], st})
			} else {
				constant[at] = w[r]
			}
			to := t.room(1)
			if i == 0 {
				t.program.Row(vector.Inverse, to, at, pairs[r]...)
				t.inverse[int(j)] = to
				continue
			}
			t.program.Row(vector.Minus, to, at, pairs[r]...)
			upper[int(slot)], t.lower[int(slot)] = to, t.room(1)
			t.program.Row(vector.Plus, t.lower[int(slot)], vector.NoInit, [2]int{to, t.inverse[int(j)]})
		}
	}
}

// group writes W and M of a group (blocks.update).
func (t *states) group(b *blocks, group int) {
	p, g := t.s.pat, &b.groups[group]
	k := len(g.columns)
	var l, inv [mostColumns][mostColumns]int
	for c, col := range g.columns {
		for r := c + 1; r < k; r++ {
			l[r][c] = t.lower[int(p.start[col])+r-c-1]
		}
	}
	for c := range k {
		for r := c + 1; r < k; r++ {
			var sum [][2]int
			for j := c + 1; j < r; j++ {
				sum = append(sum, [2]int{l[r][j], inv[j][c]})
			}
			inv[r][c] = t.room(1)
			t.program.Row(vector.Plus|vector.Negated, inv[r][c], l[r][c], sum...)
		}
	}
	var scaled [mostColumns][mostColumns]int // X_jc/D_j
	for c := range k {
		for j := c + 1; j < k; j++ {
			scaled[j][c] = t.room(1)
			t.program.Row(vector.Plus, scaled[j][c], vector.NoInit, [2]int{inv[j][c], t.inverse[int(g.columns[j])]})
		}
	}
	for r := range k {
		for c := r; c < k; c++ {
			init := t.inverse[int(g.columns[c])]
			if c > r {
				init = scaled[c][r]
			}
			var sum [][2]int
			for j := c + 1; j < k; j++ {
				sum = append(sum, [2]int{inv[j][r], scaled[j][c]})
			}
			at := t.room(1)
			t.program.Row(vector.Plus, at, init, sum...)
			t.m[g.m+r*k+c], t.m[g.m+c*k+r] = at, at
		}
	}
	for c, col := range g.columns {
		first := int(p.start[col]) + k - c - 1
		for r := range g.rows {
			var sum [][2]int
			for j := c + 1; j < k; j++ {
				sum = append(sum, [2]int{t.lower[int(p.start[g.columns[j]])+k-j-1+r], inv[j][c]})
			}
			at := t.room(1)
			t.program.Row(vector.Plus, at, t.lower[first+r], sum...)
			t.w[g.w+r*k+c] = at
		}
	}
}

// place puts W and M where the substitutions read them.
func (t *states) place(l *Lanes, constant map[int]complex128) {
	b := l.blocks
	negative := func(at int, place int32) {
		if from, ok := t.w[int(place)]; ok {
			t.program.Row(vector.Negated, at, from)
		} else {
			constant[at] = -b.w[place]
		}
	}
	for k, at := range t.at {
		for _, x := range l.parts[k].downBy {
			negative(at.forward+x.coef, x.place)
		}
		for _, x := range l.parts[k].upBy {
			if x.place < 0 {
				negative(at.backward+x.coef, -1-x.place)
				continue
			}
			t.program.Row(vector.Minus, at.backward+x.coef, t.m[int(x.place)])
		}
	}
}

// Position sets where the devices of a lane stand, as Solver.SetDevices takes it.
func (l *Lanes) Position(lane int, ratio []float64, closed []bool) {
	t := l.states
	if slices.Equal(t.ratio[lane], ratio) && slices.Equal(t.closed[lane], closed) {
		return
	}
	t.ratio[lane], t.closed[lane] = append(t.ratio[lane][:0], ratio...), append(t.closed[lane][:0], closed...)
	t.bad &^= 1 << lane
	if t.red.update(ratio) >= 0 {
		t.bad |= 1 << lane
		return
	}
	t.stale = true
	s := t.s
	coef := func(c int32) complex128 {
		if c < 0 {
			return 1
		}
		return complex(t.red.coef[c], 0)
	}
	for i := range t.moving {
		m := &t.moving[i]
		z := m.still
		for _, st := range m.stamps {
			el := &s.Net.Elements[st.element]
			if el.Kind == network.Capacitor && !closed[el.Index] {
				continue
			}
			z += el.Y[st.entry] * coef(st.a) * coef(st.b)
		}
		vector.Put(t.x, m.at, lane, z)
	}
	for k, at := range t.at {
		p := &l.parts[k]
		for _, row := range p.pulls {
			for _, st := range row {
				vector.Put(t.x, at.pull, lane, -s.Net.Elements[st.element].Y[st.entry]*coef(st.a)*coef(st.b))
				at.pull++
			}
		}
		for i, c := range p.gathers {
			vector.Put(t.x, at.gather+i, lane, coef(c))
		}
		for i, c := range p.expands {
			vector.Put(t.x, at.expand+i, lane, coef(c))
		}
	}
}

// ready computes the factor of all lanes, where one of them has been positioned anew.
func (t *states) ready() {
	if t.stale {
		t.stale = false
		t.program.Run(t.x)
	}
}
