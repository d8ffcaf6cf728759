package powerflow

import (
	"math"
	"math/cmplx"

	"yearflow/sim/network"
)

// Path tells how a solution was found.
type Path uint8

// The paths of a solution. None: there is no solution.
const (
	None Path = iota
	FixedPoint
	Newton
	InLanes // the fixed point, several instants at once
)

// String returns the name of the path in the words of run.json.
func (p Path) String() string {
	switch p {
	case FixedPoint:
		return "fixed point"
	case Newton:
		return "newton"
	case InLanes:
		return "fixed point in lanes"
	}
	return "none"
}

// Input is what changes from instant to instant.
type Input struct {
	Source []complex128 // V, by Network.Fixed
	Power  []complex128 // VA at 1 p.u., by injection
}

// Tolerance says when an iteration has arrived.
type Tolerance struct {
	Change   float64 // largest change of a voltage, p.u.
	Mismatch float64 // of max(1 kVA, nominal power at the node)
}

// Contract is the tolerance that every result is held to.
var Contract = Tolerance{Change: 1e-8, Mismatch: 1e-6}

// Reference is the tolerance of a measurement that stands near an edge.
var Reference = Tolerance{Change: 1e-12, Mismatch: 1e-9}

// Solution is the state of a network at one instant. A caller owns its slices;
// NewSolution makes them.
type Solution struct {
	V          []complex128 // V to ground, by Network.Unknowns
	Path       Path
	Iterations int
	// Worst is the unknown that moved most in the last iteration, Change by how much
	// in p.u.: where no solution was found, the place to look at.
	Worst  int
	Change float64
}

// Solver solves one network with one set of injections. It is not safe for use by
// several goroutines at once. After New nothing allocates.
type Solver struct {
	Net        *network.Network
	Injections []Injection
	Groups     []Group

	share, slope []complex128 // by group: power of one member, slope of the whole

	red *reduction
	pat *pattern
	// stamps of what no ratio moves, of what ratios move, and of fixed voltages.
	still, moving []stamp
	toFixed       []fixedStamp

	ratio        []float64
	closed       []bool
	base         []complex128 // values without the moving stamps
	next         []complex128 // values at the slots that devices change
	update       *update
	y, f         []complex128 // values of the reduced matrix, and its factor
	x, rhs, pull []complex128 // in elimination order; pull is that of the fixed voltages
	inject, old  []complex128 // current that injections put into each unknown, A
	nodeSize     []float64    // VA by node of an unknown's node (inner points have none)
	nodeMismatch []complex128
	noLoad       []complex128
	noLoadValid  bool
	noLoadSource []complex128
	version      int       // counts the device states that were factored
	singular     int32     // unknown at which the equations of the devices' state are singular; −1: they are not
	late         bool      // the factor is not yet that of the devices' state
	perUnit      []float64 // 1/V by unknown
	newton       *newton
}

// New prepares a solver; groups are those of the injections that name one. The error
// names ideal devices that leave a current open.
func New(n *network.Network, injections []Injection, groups ...Group) (*Solver, error) {
	red, err := newReduction(n)
	if err != nil {
		return nil, err
	}
	s := &Solver{Net: n, Injections: injections, Groups: groups, red: red,
		share: make([]complex128, len(groups)), slope: make([]complex128, len(groups))}
	var entries [][2]int32
	couple := func(t []int32) {
		for _, u := range t {
			for _, v := range t {
				for _, a := range red.terms[u] {
					for _, b := range red.terms[v] {
						if a.col >= 0 && b.col >= 0 && a.col < b.col {
							entries = append(entries, [2]int32{a.col, b.col})
						}
					}
				}
			}
		}
	}
	for _, e := range n.Elements {
		couple(e.Terminals)
	}
	for i := range injections {
		couple(injections[i].ends())
	}
	for _, g := range groups {
		var all []int32
		for _, k := range g.Members {
			all = append(all, injections[k].ends()...)
		}
		couple(all)
	}
	s.pat = newPattern(red.free, entries)
	s.plan()
	k := s.pat.slots()
	s.update, s.next = newUpdate(s), make([]complex128, k)
	s.base, s.y, s.f = make([]complex128, k), make([]complex128, k), make([]complex128, k)
	s.x, s.rhs, s.pull = make([]complex128, red.free), make([]complex128, red.free), make([]complex128, red.free)
	u := len(n.Unknowns)
	s.inject, s.old, s.noLoad = make([]complex128, u), make([]complex128, u), make([]complex128, u)
	s.noLoadSource = make([]complex128, len(n.Fixed))
	s.perUnit = make([]float64, u)
	for i := range n.Unknowns {
		s.perUnit[i] = 1 / n.Unknowns[i].Nominal
	}
	s.nodeSize, s.nodeMismatch = make([]float64, len(n.At)), make([]complex128, len(n.At))
	for _, j := range injections {
		if node := n.Unknowns[j.From].Node; node >= 0 {
			s.nodeSize[node] += j.Size
		}
	}
	s.ratio = make([]float64, len(n.Couplings))
	for i := range s.ratio {
		s.ratio[i] = 1
	}
	s.closed = make([]bool, len(n.Model.Capacitors))
	for i := range n.Model.Capacitors {
		s.closed[i] = n.Model.Capacitors[i].Closed
	}
	s.newton = newNewton(s)
	return s, s.assemble()
}

// NoLoad sets dst to the voltages without any injection.
func (s *Solver) NoLoad(dst []complex128, in *Input) {
	copy(dst, s.unloaded(in))
}

// unloaded are the voltages without any injection.
func (s *Solver) unloaded(in *Input) []complex128 {
	_ = s.ready() // where it is singular they mean nothing
	s.setPull(in)
	s.ensureNoLoad(in)
	return s.noLoad
}

func (s *Solver) ensureNoLoad(in *Input) {
	same := s.noLoadValid
	for i, v := range in.Source {
		same = same && s.noLoadSource[i] == v
	}
	if same {
		return
	}
	copy(s.noLoadSource, in.Source)
	copy(s.x, s.pull)
	s.pat.solve(s.f, s.x)
	s.expand(s.noLoad, s.x, in)
	s.noLoadValid = true
}

// setPull sets the currents that the fixed voltages drive into the others.
func (s *Solver) setPull(in *Input) {
	clear(s.pull)
	for _, st := range s.toFixed {
		s.pull[st.row] -= s.Net.Elements[st.element].Y[st.entry] * complex(s.coef(st.a)*s.coef(st.b), 0) * in.Source[st.fixed]
	}
}

// expand writes every voltage from the independent ones.
func (s *Solver) expand(v, x []complex128, in *Input) {
	place := s.pat.place
	for u, terms := range s.red.terms {
		if len(terms) == 1 && terms[0].coef < 0 {
			if c := terms[0].col; c >= 0 {
				v[u] = x[place[c]]
			} else {
				v[u] = in.Source[-1-c]
			}
			continue
		}
		var sum complex128
		for _, t := range terms {
			if t.col >= 0 {
				sum += x[place[t.col]] * complex(s.red.value(t), 0)
			} else {
				sum += in.Source[-1-t.col] * complex(s.red.value(t), 0)
			}
		}
		v[u] = sum
	}
}

// gather sets rhs to Tᵀ·J for the currents J that are put into each unknown.
func (s *Solver) gather(rhs, j []complex128) {
	place := s.pat.place
	for u, terms := range s.red.terms {
		c := j[u]
		if c == 0 {
			continue
		}
		for _, t := range terms {
			if t.col < 0 {
				continue
			}
			if t.coef < 0 {
				rhs[place[t.col]] += c
			} else {
				rhs[place[t.col]] += c * complex(s.red.coef[t.coef], 0)
			}
		}
	}
}

// currents sets inject to the currents that the injections put into each unknown
// at voltages v.
func (s *Solver) currents(inject, v []complex128, in *Input) {
	clear(inject)
	s.shares(v, in)
	for k := range s.Injections {
		j := &s.Injections[k]
		i := s.ampere(k, j.across(v), in)
		inject[j.From] -= i
		if j.To != network.Ground {
			inject[j.To] += i
		}
	}
}

// SolveBy solves by one method alone, from the no-load voltages: for tests and for
// the engineer who doubts the other.
func (s *Solver) SolveBy(p Path, in *Input, tol Tolerance, out *Solution) bool {
	_ = s.ready()
	s.setPull(in)
	s.ensureNoLoad(in)
	out.Iterations = 0
	copy(out.V, s.noLoad)
	ok := false
	switch p {
	case FixedPoint:
		ok = s.fixedPoint(in, tol, out)
	case Newton:
		ok = s.newton.solve(in, tol, out)
	}
	if !ok {
		out.Path = None
	}
	return ok
}

// runaway is the voltage, and the change of one in an iteration, p.u., beyond which
// there is no way back to a solution that a feeder could have. Without this rule a
// resonance ends at voltages so high that rounding hides the mismatch.
const runaway = 1e3

// shares sets what each member of each group draws at voltages v, and the slope of
// the group's power.
func (s *Solver) shares(v []complex128, in *Input) {
	for g := range s.Groups {
		total, slope, _ := s.Groups[g].draws(s.Injections, in.Power, v)
		s.share[g], s.slope[g] = total/complex(float64(len(s.Groups[g].Members)), 0), slope
	}
}

// ampere returns the current of an injection at the voltage x across it; that of a
// group's member from its share.
func (s *Solver) ampere(k int, x complex128, in *Input) complex128 {
	j := &s.Injections[k]
	if j.Group == 0 {
		return j.current(in.Power[k], x)
	}
	p := s.share[j.Group-1]
	m2 := real(x)*real(x) + imag(x)*imag(x)
	if m2 == 0 {
		return 0
	}
	return complex(real(p), -imag(p)) * x * complex(1/m2, 0)
}

// maxFixedPoint bounds the fixed-point iterations; slow contraction is left to
// Newton's method before that.
const maxFixedPoint = 80

// Solve finds the voltages for in, starting from start, or from the no-load
// voltages where start is nil. Of several solutions the one reached from the
// no-load voltages counts: a start that does not lead anywhere is given up for
// them, and Newton's method begins there. It reports whether there is a solution;
// out says which and how.
func (s *Solver) Solve(in *Input, start []complex128, tol Tolerance, out *Solution) bool {
	out.Iterations = 0
	_ = s.ready() // singular says it
	if s.singular < 0 {
		s.setPull(in)
		s.ensureNoLoad(in)
		if start != nil {
			copy(out.V, start)
			if s.fixedPoint(in, tol, out) && s.bounded(out) {
				return true
			}
		}
		// Where a law's slope makes the iteration diverge it does so from anywhere.
		if start == nil || len(s.Groups) == 0 {
			copy(out.V, s.noLoad)
			if s.fixedPoint(in, tol, out) && s.bounded(out) {
				return true
			}
		}
		copy(out.V, s.noLoad)
		if s.newton.solve(in, tol, out) && s.bounded(out) {
			return true
		}
	} else {
		out.Worst = int(s.singular)
	}
	out.Path = None
	return false
}

// bounded tells whether no voltage has run away.
func (s *Solver) bounded(out *Solution) bool {
	for u, v := range out.V {
		if m := cmplx.Abs(v) * s.perUnit[u]; !(m <= runaway) {
			out.Worst, out.Change = u, m
			return false
		}
	}
	return true
}

func (s *Solver) fixedPoint(in *Input, tol Tolerance, out *Solution) bool {
	out.Path = FixedPoint
	s.currents(s.inject, out.V, in)
	last := math.Inf(1)
	slow, patience := 0, 12
	if len(s.Groups) > 0 {
		patience = 4
	}
	for range maxFixedPoint {
		out.Iterations++
		copy(s.x, s.pull)
		s.gather(s.x, s.inject)
		s.pat.solve(s.f, s.x)
		copy(s.old, out.V)
		s.expand(out.V, s.x, in)
		change, worst := s.change(out.V, s.old)
		out.Change, out.Worst = change, worst
		if !(change <= runaway) {
			return false
		}
		s.old, s.inject = s.inject, s.old
		s.currents(s.inject, out.V, in)
		// What is left of the way when each step is rate times the one before; below half
		// it is less than the last step.
		left := change
		if rate := change / last; rate > 0.5 && rate < 1 {
			left = change * rate / (1 - rate)
		}
		if left < tol.Change || change < 1e-10 && change > 0.5*last {
			// The second: no digit is left to gain.
			if s.matched(out.V, tol) {
				return true
			}
		}
		if change > 0.9*last {
			if slow++; slow > patience {
				return false
			}
		}
		last = change
	}
	return false
}

// change returns the largest change of a voltage in p.u., and where.
func (s *Solver) change(v, old []complex128) (float64, int) {
	worst, at := 0.0, 0
	for u := range v {
		d := v[u] - old[u]
		m := (real(d)*real(d) + imag(d)*imag(d)) * s.perUnit[u] * s.perUnit[u]
		if m > worst || m != m {
			worst, at = m, u
			if m != m {
				break
			}
		}
	}
	return math.Sqrt(worst), at
}

// matched tells whether the currents of the injections at v (inject) are those that
// v was solved with (old), as power at every node.
func (s *Solver) matched(v []complex128, tol Tolerance) bool {
	clear(s.nodeMismatch)
	for u := range v {
		if node := s.Net.Unknowns[u].Node; node >= 0 {
			if d := s.inject[u] - s.old[u]; d != 0 {
				s.nodeMismatch[node] += complex(cmplx.Abs(v[u]*cmplx.Conj(d)), 0)
			}
		}
	}
	for n, m := range s.nodeMismatch {
		if real(m) > tol.Mismatch*max(1000, s.nodeSize[n]) {
			return false
		}
	}
	return true
}

// NewSolution makes room for a solution of the solver.
func (s *Solver) NewSolution() *Solution {
	return &Solution{V: make([]complex128, len(s.Net.Unknowns))}
}

// LowAt returns the injection with a bent characteristic that stands furthest below
// the corner, or −1 where none does.
func (s *Solver) LowAt(v []complex128) int {
	at, least := -1, Corner*(1-1e-12)
	for k := range s.Injections {
		j := &s.Injections[k]
		if j.Bent() && !j.Generator {
			if m := cmplx.Abs(j.across(v)) / j.Nominal; m < least {
				at, least = k, m
			}
		}
	}
	return at
}
