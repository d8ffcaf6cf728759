package powerflow

import (
	"math"
	"math/cmplx"

	"yearflow/sim/network"
)

// newton solves F(x) = Tᵀ(Y·T·x − I(T·x)) = 0 in real 2 × 2 blocks on the pattern of
// the reduced matrix. The Jacobian of the injections is not complex-differentiable,
// so the factor is an unsymmetric block L·U without exchange of rows.
type newton struct {
	s            *Solver
	diag         []block // inverse of the pivots after factoring
	lower, upper []block // by slot − n
	step, f      [][2]float64
	v, trial     []complex128
	x, base      []complex128
	stamps       []injectionStamp
}

type block [4]float64

// injectionStamp adds sign·c(a)·c(b)·dI/dV to a block: the current of an injection by
// its own voltage, or by that of another member of its group.
type injectionStamp struct {
	injection, by int32
	sign          float64
	a, b          int32 // coefficients
	slot          int32
	upper         bool
}

func newNewton(s *Solver) *newton {
	n := s.pat.n
	w := &newton{s: s,
		diag: make([]block, n), lower: make([]block, len(s.pat.row)), upper: make([]block, len(s.pat.row)),
		step: make([][2]float64, n), f: make([][2]float64, n),
		v: make([]complex128, len(s.Net.Unknowns)), trial: make([]complex128, len(s.Net.Unknowns)),
		x: make([]complex128, n), base: make([]complex128, n),
	}
	for k := range s.Injections {
		by := []int32{int32(k)}
		if g := s.Injections[k].Group; g > 0 {
			by = s.Groups[g-1].Members
		}
		for _, j := range by {
			w.stamp(int32(k), j)
		}
	}
	return w
}

// ends are the unknowns between which an injection stands.
func (j *Injection) ends() []int32 {
	if j.To == network.Ground {
		return []int32{j.From}
	}
	return []int32{j.From, j.To}
}

// stamp lists where the derivative of injection k by the voltage of injection by goes.
func (w *newton) stamp(k, by int32) {
	s := w.s
	for p, u := range s.Injections[k].ends() {
		for q, v := range s.Injections[by].ends() {
			sign := 1.0
			if p != q {
				sign = -1
			}
			for _, a := range s.red.terms[u] {
				for _, b := range s.red.terms[v] {
					if a.col < 0 || b.col < 0 {
						continue
					}
					row, col := s.pat.place[a.col], s.pat.place[b.col]
					w.stamps = append(w.stamps, injectionStamp{k, by, sign, a.coef, b.coef, s.pat.at(row, col), row < col})
				}
			}
		}
	}
}

const maxNewton = 40

func (w *newton) solve(in *Input, tol Tolerance, out *Solution) bool {
	s := w.s
	out.Path = Newton
	// The independent voltages of the start.
	copy(w.v, out.V)
	for u, terms := range s.red.terms {
		if len(terms) == 1 && terms[0].coef < 0 && terms[0].col >= 0 {
			w.x[s.pat.place[terms[0].col]] = w.v[u]
		}
	}
	norm := w.mismatch(w.v, w.x, in)
	for range maxNewton {
		out.Iterations++
		w.jacobian(in)
		if !w.factor() {
			return false
		}
		w.substitute()
		copy(w.base, w.x)
		size, done := 1.0, false
		for range 12 {
			for k := range w.x {
				w.x[k] = w.base[k] - complex(size*w.step[k][0], size*w.step[k][1])
			}
			s.expand(w.trial, w.x, in)
			if n := w.mismatch(w.trial, w.x, in); n < norm || n < 1e-9 {
				norm, done = n, true
				break
			}
			size /= 2
		}
		change, worst := s.change(w.trial, w.v)
		out.Change, out.Worst = change, worst
		if !(change <= runaway) {
			return false
		}
		w.v, w.trial = w.trial, w.v
		copy(out.V, w.v)
		if !done {
			// Within rounding of a solution no step can do better.
			return change < tol.Change && w.balanced(tol)
		}
		if size == 1 && change < tol.Change && w.balanced(tol) {
			return true
		}
	}
	return false
}

// mismatch sets f and returns the largest mismatch as power at nominal voltage, kVA.
func (w *newton) mismatch(v, x []complex128, in *Input) float64 {
	s := w.s
	s.currents(s.inject, v, in)
	copy(s.rhs, s.pull)
	s.gather(s.rhs, s.inject)
	s.pat.multiply(s.x, s.y, x)
	worst := 0.0
	for k := range s.x {
		d := s.x[k] - s.rhs[k]
		w.f[k] = [2]float64{real(d), imag(d)}
	}
	for u, terms := range s.red.terms {
		if len(terms) == 1 && terms[0].coef < 0 && terms[0].col >= 0 {
			f := w.f[s.pat.place[terms[0].col]]
			worst = math.Max(worst, math.Hypot(f[0], f[1])*s.Net.Unknowns[u].Nominal/1000)
		}
	}
	if worst != worst {
		return math.Inf(1)
	}
	return worst
}

// balanced holds the mismatch at every node to the tolerance.
func (w *newton) balanced(tol Tolerance) bool {
	s := w.s
	for u, terms := range s.red.terms {
		if len(terms) != 1 || terms[0].coef >= 0 || terms[0].col < 0 {
			continue
		}
		f := w.f[s.pat.place[terms[0].col]]
		limit := 1000.0
		if node := s.Net.Unknowns[u].Node; node >= 0 {
			limit = max(limit, s.nodeSize[node])
		}
		if math.Hypot(f[0], f[1])*cmplx.Abs(w.v[u]) > max(tol.Mismatch, 1e-8)*limit/3 {
			return false
		}
	}
	return true
}

func (w *newton) jacobian(in *Input) {
	s := w.s
	n := int32(s.pat.n)
	for k := range w.diag {
		y := s.y[k]
		w.diag[k] = block{real(y), -imag(y), imag(y), real(y)}
	}
	for k := range w.lower {
		y := s.y[int(n)+k]
		w.lower[k] = block{real(y), -imag(y), imag(y), real(y)}
		w.upper[k] = w.lower[k]
	}
	s.shares(w.v, in)
	last, lastBy := int32(-1), int32(-1)
	var d [4]float64
	for _, st := range w.stamps {
		if st.injection != last || st.by != lastBy {
			last, lastBy = st.injection, st.by
			j := &s.Injections[last]
			if j.Group > 0 {
				g := j.Group - 1
				d = s.Groups[g].derivative(s.Injections, last, lastBy, s.share[g], s.slope[g], w.v)
			} else {
				d = j.derivative(in.Power[last], j.across(w.v))
			}
		}
		c := st.sign * s.coef(st.a) * s.coef(st.b)
		b := &w.diag[0]
		switch {
		case st.slot < n:
			b = &w.diag[st.slot]
		case st.upper:
			b = &w.upper[st.slot-n]
		default:
			b = &w.lower[st.slot-n]
		}
		for e := range b {
			b[e] += c * d[e]
		}
	}
}

func (w *newton) factor() bool {
	p := w.s.pat
	n := int32(p.n)
	d := 0
	for k := range p.n {
		inv, ok := w.diag[k].inverse()
		if !ok {
			return false
		}
		w.diag[k] = inv
		lo, hi := p.start[k]-n, p.start[k+1]-n
		for a := lo; a < hi; a++ {
			// The entry of row a is used before it is scaled by the pivot for the entries
			// after it; both triangles of a pair share a place in dest.
			la := w.lower[a].times(inv)
			for b := a; b < hi; b++ {
				dst := p.dest[d]
				d++
				if a == b {
					w.diag[dst].subtract(la.times(w.upper[a]))
					continue
				}
				// Row b, column a below the diagonal; row a, column b above it.
				lb := w.lower[b].times(inv)
				w.lower[dst-n].subtract(lb.times(w.upper[a]))
				w.upper[dst-n].subtract(la.times(w.upper[b]))
			}
		}
		for a := lo; a < hi; a++ {
			w.lower[a] = w.lower[a].times(inv)
		}
	}
	return true
}

// substitute solves for the step from f.
func (w *newton) substitute() {
	p := w.s.pat
	n := int32(p.n)
	copy(w.step, w.f)
	for k := range p.n {
		for a := p.start[k] - n; a < p.start[k+1]-n; a++ {
			w.lower[a].subtractFrom(&w.step[p.row[a]], w.step[k])
		}
	}
	for k := p.n - 1; k >= 0; k-- {
		r := w.step[k]
		for a := p.start[k] - n; a < p.start[k+1]-n; a++ {
			w.upper[a].subtractFrom(&r, w.step[p.row[a]])
		}
		b := w.diag[k]
		w.step[k] = [2]float64{b[0]*r[0] + b[1]*r[1], b[2]*r[0] + b[3]*r[1]}
	}
}

func (b block) inverse() (block, bool) {
	det := b[0]*b[3] - b[1]*b[2]
	if det == 0 || det != det {
		return b, false
	}
	return block{b[3] / det, -b[1] / det, -b[2] / det, b[0] / det}, true
}

func (b block) times(c block) block {
	return block{
		b[0]*c[0] + b[1]*c[2], b[0]*c[1] + b[1]*c[3],
		b[2]*c[0] + b[3]*c[2], b[2]*c[1] + b[3]*c[3],
	}
}

func (b *block) subtract(c block) {
	for e := range b {
		b[e] -= c[e]
	}
}

func (b block) subtractFrom(r *[2]float64, x [2]float64) {
	r[0] -= b[0]*x[0] + b[1]*x[1]
	r[1] -= b[2]*x[0] + b[3]*x[1]
}
