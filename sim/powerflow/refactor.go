package powerflow

// lefts lists, row by row, the entries of the columns before it.
type lefts struct {
	start        []int32 // n+1 entries
	column, slot []int32
}

func newLefts(p *pattern) lefts {
	n := int32(p.n)
	l := lefts{start: make([]int32, n+1), column: make([]int32, len(p.row)), slot: make([]int32, len(p.row))}
	for _, r := range p.row {
		l.start[r+1]++
	}
	for r := range n {
		l.start[r+1] += l.start[r]
	}
	next := append([]int32(nil), l.start...)
	for k := range n {
		for s := p.start[k]; s < p.start[k+1]; s++ {
			r := p.row[s-n]
			l.column[next[r]], l.slot[next[r]] = k, s
			next[r]++
		}
	}
	return l
}

// update is where a solver's factor is brought up to date: after a device has moved, the
// columns whose entries changed and those on their way to the root of the elimination
// tree, no others (Brandwajn, Tinney, Chan, Partial matrix refactorization, IEEE Trans.
// Power Systems 1(1), 1986). A column is always computed in the same way from the same
// numbers, so that the factor does not depend on the way that led to it.
type update struct {
	left    lefts
	moving  []int32      // slots that devices change
	column  []int32      // by slot of the lower triangle, less n: its column
	pivot   []complex128 // D
	work    []complex128
	stale   []bool // by column: to be computed
	changed []int  // by column: version of the device state that it was computed at last
	valid   bool   // the factor is that of the device state before
}

func newUpdate(s *Solver) *update {
	p := s.pat
	u := &update{left: newLefts(p), column: make([]int32, len(p.row)), pivot: make([]complex128, p.n), work: make([]complex128, p.n),
		stale: make([]bool, p.n), changed: make([]int, p.n)}
	for k := range int32(p.n) {
		for at := p.start[k]; at < p.start[k+1]; at++ {
			u.column[at-int32(p.n)] = k
		}
	}
	seen := make([]bool, p.slots())
	for _, st := range s.moving {
		if !seen[st.slot] {
			seen[st.slot] = true
			u.moving = append(u.moving, st.slot)
		}
	}
	return u
}

// columnOf returns the column that a slot is in.
func (u *update) columnOf(slot int32) int32 {
	if n := int32(len(u.pivot)); slot >= n {
		return u.column[slot-n]
	}
	return slot
}

// factor brings f up to date with y, whose stale columns are marked, and returns the row
// of a pivot that vanishes, or −1.
//
//	D_j = y_jj − Σ_k L_jk²·D_k,  L_ij = (y_ij − Σ_k L_ik·L_jk·D_k)/D_j
//
// f has 1/D on its diagonal.
func (u *update) factor(p *pattern, f, y []complex128, version int) int {
	n := int32(p.n)
	w := u.work
	for j := range n {
		if !u.stale[j] && u.valid {
			continue
		}
		u.stale[j] = false
		u.changed[j] = version
		lo, hi := p.start[j], p.start[j+1]
		rows := p.row[lo-n : hi-n]
		w[j] = y[j]
		for e, r := range rows {
			w[r] = y[lo+int32(e)]
		}
		for e := u.left.start[j]; e < u.left.start[j+1]; e++ {
			k, at := u.left.column[e], u.left.slot[e]
			m := f[at] * u.pivot[k]
			for s := at; s < p.start[k+1]; s++ {
				w[p.row[s-n]] -= m * f[s]
			}
		}
		d := w[j]
		if d == 0 || d != d {
			u.valid = false
			return int(j)
		}
		inv := 1 / d
		u.pivot[j], f[j] = d, inv
		for e, r := range rows {
			f[lo+int32(e)] = w[r] * inv
		}
		if len(rows) > 0 {
			u.stale[rows[0]] = true // the parent; from there on its parents
		}
	}
	u.valid = true
	return -1
}
