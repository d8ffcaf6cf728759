package powerflow

import "yearflow/sim/powerflow/vector"

// blocks are the columns of a factor L·D·Lᵀ in groups that are eliminated at once, such as
// the phases of a node. For a group S with the rows R below it
//
//	W = L_RS·L_SS⁻¹,  M = L_SS⁻ᵀ·D_S⁻¹·L_SS⁻¹
//
// the two substitutions are, on right-hand sides z,
//
//	z_R −= W·z_S, group by group,  then backwards  x_S = M·z_S − Wᵀ·x_R
//
// with as many products as by single columns, but of a third of their depth. Groups are
// chains of the elimination tree whose columns have the same rows below them (fundamental
// supernodes; Ashcraft and Grimes, The influence of relaxed supernode partitions on the
// multifrontal method, ACM Trans. Math. Softw. 15(4), 1989), at most mostColumns long.
type blocks struct {
	groups []columnGroup
	of     []int32 // by place in the elimination order: its group
	w, m   []complex128
}

// columnGroup is a group: its columns and the rows below them in the elimination order,
// ascending, and where its W (row by row) and M begin.
type columnGroup struct {
	columns, rows []int32
	w, m          int
	height        int
}

const mostColumns = vector.GroupRows

// newBlocks finds the groups of a pattern.
func newBlocks(p *pattern) *blocks {
	n := int32(p.n)
	below := func(k int32) []int32 { return p.row[p.start[k]-n : p.start[k+1]-n] }
	b := &blocks{of: make([]int32, n)}
	joins := make([]bool, n) // the column belongs to the group of a column before it
	for k := range n {
		if joins[k] {
			continue
		}
		g := columnGroup{columns: []int32{k}}
		for len(g.columns) < mostColumns {
			top := g.columns[len(g.columns)-1]
			rows := below(top)
			if len(rows) == 0 {
				break
			}
			if next := rows[0]; joins[next] || len(below(next)) != len(rows)-1 {
				break
			} else {
				joins[next] = true
				g.columns = append(g.columns, next)
			}
		}
		g.rows = below(g.columns[len(g.columns)-1])
		for _, c := range g.columns {
			b.of[c] = int32(len(b.groups))
		}
		g.w, g.m = len(b.w), len(b.m)
		b.w = append(b.w, make([]complex128, len(g.rows)*len(g.columns))...)
		b.m = append(b.m, make([]complex128, len(g.columns)*len(g.columns))...)
		b.groups = append(b.groups, g)
	}
	// A group's rows belong to groups whose last columns come after its own.
	order := make([]int32, 0, len(b.groups))
	for k := range n {
		if g := b.of[k]; b.groups[g].columns[len(b.groups[g].columns)-1] == k {
			order = append(order, g)
		}
	}
	for _, g := range order {
		for _, r := range b.groups[g].rows {
			above := &b.groups[b.of[r]]
			above.height = max(above.height, b.groups[g].height+1)
		}
	}
	b.w = append(b.w, 0) // of rows that a column does not reach
	return b
}

// levels lists the groups level by level from those that depend on none, so that groups of
// a level do not wait for each other; within a level in postorder of the elimination
// tree, so that what a group depends on is near what its neighbour does.
func (b *blocks) levels() (order []int32) {
	child, sibling := make([]int32, len(b.groups)), make([]int32, len(b.groups))
	for g := range child {
		child[g] = -1
	}
	roots := int32(-1)
	for g := len(b.groups) - 1; g >= 0; g-- {
		first := &roots
		if rows := b.groups[g].rows; len(rows) > 0 {
			first = &child[b.of[rows[0]]]
		}
		sibling[g], *first = *first, int32(g)
	}
	var levels [][]int32
	var stack []int32
	for r := roots; r >= 0; r = sibling[r] {
		stack = append(stack[:0], r)
		for len(stack) > 0 {
			g := stack[len(stack)-1]
			if c := child[g]; c >= 0 {
				child[g] = sibling[c] // come back for the next one
				stack = append(stack, c)
				continue
			}
			h := b.groups[g].height
			for len(levels) <= h {
				levels = append(levels, nil)
			}
			levels[h] = append(levels[h], g)
			stack = stack[:len(stack)-1]
		}
	}
	for _, level := range levels {
		order = append(order, level...)
	}
	return order
}

// stale tells whether a column of a group was computed after a version.
func (b *blocks) stale(group int, changed []int, version int) bool {
	for _, c := range b.groups[group].columns {
		if changed[c] > version {
			return true
		}
	}
	return false
}

// update computes W and M of a group from a factor, whose diagonal is 1/D.
func (b *blocks) update(group int, p *pattern, f []complex128) {
	var l, inv [mostColumns][mostColumns]complex128 // L_SS and its inverse, below the diagonal
	g := &b.groups[group]
	k := len(g.columns)
	for c, col := range g.columns {
		at := p.start[col]
		for r := c + 1; r < k; r++ {
			l[r][c] = f[at+int32(r-c-1)]
		}
	}
	// L·X = 1, column by column of X.
	for c := range k {
		for r := c + 1; r < k; r++ {
			s := -l[r][c]
			for j := c + 1; j < r; j++ {
				s -= l[r][j] * inv[j][c]
			}
			inv[r][c] = s
		}
	}
	m := b.m[g.m : g.m+k*k]
	for r := range k {
		for c := r; c < k; c++ {
			// Σ over j ≥ c of X_jr·X_jc/D_j, X_cc = 1
			s := f[g.columns[c]]
			if c > r {
				s *= inv[c][r]
			}
			for j := c + 1; j < k; j++ {
				s += inv[j][r] * inv[j][c] * f[g.columns[j]]
			}
			m[r*k+c], m[c*k+r] = s, s
		}
	}
	w := b.w[g.w : g.w+len(g.rows)*k]
	for c, col := range g.columns {
		at := p.start[col] + int32(k-c-1)
		for r := range g.rows {
			w[r*k+c] = f[at+int32(r)]
		}
	}
	for r := range g.rows {
		row := w[r*k : r*k+k]
		for c := range k {
			for j := c + 1; j < k; j++ {
				row[c] += row[j] * inv[j][c]
			}
		}
	}
}
