package powerflow

import "sort"

// pattern is the symbolic factorisation of a symmetric matrix: an elimination
// order of least degree (Markowitz 1957; Tinney and Walker, Direct solutions of
// sparse network equations by optimally ordered triangular factorization, Proc.
// IEEE 55(11), 1967) and the places where its factor is not zero.
//
// Slots 0..n−1 hold the diagonal in elimination order; the others hold the columns
// of the strictly lower triangle one after another.
type pattern struct {
	n     int
	place []int32 // of an unknown in the elimination order
	start []int32 // of each column among the slots; n+1 entries
	row   []int32 // by slot − n: row in the elimination order, ascending in a column
	// dest lists, column by column, where the product of each pair of entries of a
	// column (the first not after the second) is taken off.
	dest []int32
}

// newPattern orders the symmetric matrix whose off-diagonal entries are given.
func newPattern(n int, entries [][2]int32) *pattern {
	adj := make([]map[int32]struct{}, n)
	for i := range adj {
		adj[i] = map[int32]struct{}{}
	}
	for _, e := range entries {
		if e[0] != e[1] {
			adj[e[0]][e[1]] = struct{}{}
			adj[e[1]][e[0]] = struct{}{}
		}
	}
	q := newDegreeQueue(adj)
	p := &pattern{n: n, place: make([]int32, n)}
	columns := make([][]int32, n)
	done := make([]bool, n)
	for k := range n {
		u := q.least(done)
		done[u] = true
		p.place[u] = int32(k)
		near := make([]int32, 0, len(adj[u]))
		for v := range adj[u] {
			near = append(near, v)
		}
		sort.Slice(near, func(a, b int) bool { return near[a] < near[b] })
		columns[k] = near
		for i, v := range near {
			delete(adj[v], u)
			for _, w := range near[i+1:] {
				adj[v][w] = struct{}{}
				adj[w][v] = struct{}{}
			}
		}
		for _, v := range near {
			q.push(v, len(adj[v]))
		}
		adj[u] = nil
	}
	p.start = make([]int32, n+1)
	p.start[0] = int32(n)
	for k, near := range columns {
		for i, u := range near {
			near[i] = p.place[u]
		}
		sort.Slice(near, func(a, b int) bool { return near[a] < near[b] })
		p.row = append(p.row, near...)
		p.start[k+1] = p.start[k] + int32(len(near))
	}
	for k := range n {
		rows := p.row[p.start[k]-int32(n) : p.start[k+1]-int32(n)]
		for a, i := range rows {
			for _, j := range rows[a:] {
				p.dest = append(p.dest, p.at(i, j))
			}
		}
	}
	return p
}

// slots is the number of values of a matrix with the pattern.
func (p *pattern) slots() int { return p.n + len(p.row) }

// at returns the slot of row and column i, j of the elimination order.
func (p *pattern) at(i, j int32) int32 {
	if i == j {
		return i
	}
	if i > j {
		i, j = j, i
	}
	lo, hi := p.start[i]-int32(p.n), p.start[i+1]-int32(p.n)
	k := lo + int32(sort.Search(int(hi-lo), func(x int) bool { return p.row[lo+int32(x)] >= j }))
	if k >= hi || p.row[k] != j {
		panic("powerflow: an entry outside the pattern")
	}
	return k + int32(p.n)
}

// slot returns the slot of two unknowns.
func (p *pattern) slot(u, v int32) int32 { return p.at(p.place[u], p.place[v]) }

// solve replaces x, in elimination order, by the solution with a factored matrix.
func (p *pattern) solve(a, x []complex128) {
	n := int32(p.n)
	for k := range p.n {
		xk := x[k]
		lo, hi := p.start[k], p.start[k+1]
		col, rows := a[lo:hi], p.row[lo-n:hi-n]
		for e, l := range col {
			x[rows[e]] -= l * xk
		}
	}
	for k := p.n - 1; k >= 0; k-- {
		s := x[k] * a[k]
		lo, hi := p.start[k], p.start[k+1]
		col, rows := a[lo:hi], p.row[lo-n:hi-n]
		for e, l := range col {
			s -= l * x[rows[e]]
		}
		x[k] = s
	}
}

// multiply sets y to the product of the unfactored matrix a with x.
func (p *pattern) multiply(y, a, x []complex128) {
	n := int32(p.n)
	for k := range p.n {
		y[k] = a[k] * x[k]
	}
	for k := range p.n {
		for s := p.start[k]; s < p.start[k+1]; s++ {
			r := p.row[s-n]
			y[r] += a[s] * x[k]
			y[k] += a[s] * x[r]
		}
	}
}

// degreeQueue finds the unknown of least degree, of equal ones the first, with
// stale entries skipped when they come up.
type degreeQueue struct {
	degree []int
	bucket [][]int32 // by degree, each a heap by index
	low    int
}

func newDegreeQueue(adj []map[int32]struct{}) *degreeQueue {
	q := &degreeQueue{degree: make([]int, len(adj))}
	for i := range adj {
		q.degree[i] = -1
		q.push(int32(i), len(adj[i]))
	}
	return q
}

func (q *degreeQueue) push(u int32, degree int) {
	if q.degree[u] == degree {
		return
	}
	q.degree[u] = degree
	for len(q.bucket) <= degree {
		q.bucket = append(q.bucket, nil)
	}
	h := append(q.bucket[degree], u)
	for i := len(h) - 1; i > 0 && h[(i-1)/2] > h[i]; i = (i - 1) / 2 {
		h[i], h[(i-1)/2] = h[(i-1)/2], h[i]
	}
	q.bucket[degree] = h
	q.low = min(q.low, degree)
}

func (q *degreeQueue) least(done []bool) int32 {
	for {
		h := q.bucket[q.low]
		if len(h) == 0 {
			q.low++
			continue
		}
		u := h[0]
		last := len(h) - 1
		h[0] = h[last]
		h = h[:last]
		for i := 0; ; {
			c := 2*i + 1
			if c >= last {
				break
			}
			if c+1 < last && h[c+1] < h[c] {
				c++
			}
			if h[i] <= h[c] {
				break
			}
			h[i], h[c] = h[c], h[i]
			i = c
		}
		q.bucket[q.low] = h
		if !done[u] && q.degree[u] == q.low {
			return u
		}
	}
}
