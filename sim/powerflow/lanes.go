package powerflow

import (
	"math"
	"math/cmplx"

	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
)

// Lanes solves several instants of one device state at once, by the fixed point that
// Solver iterates, with the factor of the same solver: the same equations for every
// kind of element. An instant that contracts slowly, or at which a load falls below the
// corner, is left to the solver.
//
// A lane depends on its own inputs and start alone, never on its neighbours or on
// which of the kernels of package vector is at work. It is not safe for use by several
// goroutines at once; several Lanes of one solver are, while its devices stand still.
type Lanes struct {
	Iterations [vector.Lanes]int
	Change     [vector.Lanes]float64 // the largest of the last iteration, p.u.

	s       *Solver
	version int // of the solver's factor that the coefficients are of

	// Values: the independent unknowns level by level of the factor, the dependent ones,
	// then two of each fixed voltage. Of v the first of these two is the voltage that
	// injections see, the second that of the equations; the first of x takes the current that
	// is put into a fixed voltage. x has currents, and of the dependent ones the voltages that
	// follow.
	*Block
	flat      *Curve // of the voltages that all lanes start from
	x         []float64
	slot      []int32 // by unknown, into v
	order     []int32 // of the factor's groups
	rank      []int32 // of an independent unknown's place in the elimination order among the values
	free, all int     // independent ones, and those with the dependent ones
	held      int     // the second value of the first fixed voltage
	weight    []float64

	states    *states // of lanes of their own positions
	blocks    *blocks
	parts     []lanePart
	partOf    []int32    // by group of columns
	valuePart []int32    // by value
	downs     [][]coefAt // by group of columns: where its W goes forth
	ups       []coefs    // by group of columns: where its M and W come back
	forth     bool       // the subtrees have gone forth already
	below     uint8      // lanes that had a load below the corner then

	asked  *powers
	listed []int32 // injections in the order of the lists
	list   []int32 // by injection: its list, by part and kind; −1: it is one of a group
	member []int32 // by injection: its place in the list

	least float64 // change that keeps every node's mismatch, where loads are at their largest
}

// Block is the voltages that lanes found: who takes it out of a Lanes, by Exchange, can
// read it while the next one is solved.
type Block struct {
	l *Lanes
	v []float64
}

// NewBlock makes room for a block.
func (l *Lanes) NewBlock() *Block { return &Block{l: l, v: vector.Make(l.held + len(l.s.Net.Fixed))} }

// Exchange returns the block at hand and goes on with another. Fixed voltages stay.
func (l *Lanes) Exchange(next *Block) *Block {
	old := l.Block
	copy(next.v[l.all*vector.Width:], old.v[l.all*vector.Width:])
	l.Block = next
	return old
}

// sensitivity bounds how much of its power an injection's current moves by, as power,
// for a voltage that moves by one: across a pair twice the move of each end, at 0.7 p.u.
// of √3 times its nominal: 2/(0.7·√3), and some for what is above 1 p.u. That of an
// inverter is the slope of its function besides.
const (
	sensitivity    = 2.5
	groupSteepness = 100
)

// NewLanes prepares lanes of a solver. largest is the most that each injection draws,
// VA, whatever the instant.
func NewLanes(s *Solver, largest []float64) *Lanes { return newLanes(s, largest, mostOfPart) }

func newLanes(s *Solver, largest []float64, mostOfPart int) *Lanes {
	l := &Lanes{s: s, version: -1, free: s.red.free}
	l.place(mostOfPart)
	l.rows()
	l.branches()
	l.tolerate(largest)
	l.flat = l.NewCurve()
	return l
}

// refresh takes over the coefficients of the solver's device state.
func (l *Lanes) refresh() {
	s := l.s
	if l.states != nil {
		l.states.ready()
		return
	}
	if l.version == s.version {
		return
	}
	before := l.version
	l.version = s.version
	put := func(r *vector.Rows, z complex128) { r.Coef = append(r.Coef, real(z), imag(z)) }
	for k := range l.parts {
		p := &l.parts[k]
		p.pull.Coef, p.gather.Coef, p.expand.Coef = p.pull.Coef[:0], p.gather.Coef[:0], p.expand.Coef[:0]
		for _, row := range p.pulls {
			for _, st := range row {
				put(&p.pull, -s.Net.Elements[st.element].Y[st.entry]*complex(s.coef(st.a)*s.coef(st.b), 0))
			}
		}
		for _, c := range p.gathers {
			put(&p.gather, complex(s.coef(c), 0))
		}
		for _, c := range p.expands {
			put(&p.expand, complex(s.coef(c), 0))
		}
	}
	b := l.blocks
	for i := range b.groups {
		if !b.stale(i, s.update.changed, before) {
			continue
		}
		b.update(i, s.pat, s.f)
		l.take(i)
	}
}

// take puts W and M of a group where the substitutions read them.
func (l *Lanes) take(group int) {
	b := l.blocks
	for _, k := range l.downs[group] {
		p := &l.parts[k.part]
		z := b.w[p.down[k.at]]
		p.forward.Coef[2*k.at], p.forward.Coef[2*k.at+1] = -real(z), -imag(z)
	}
	p := &l.parts[l.ups[group].part]
	for k := l.ups[group].from; k < l.ups[group].to; k++ {
		if at := p.up[k]; at >= 0 {
			p.backward.Coef[2*k], p.backward.Coef[2*k+1] = real(b.m[at]), imag(b.m[at])
		} else {
			z := b.w[-1-at]
			p.backward.Coef[2*k], p.backward.Coef[2*k+1] = -real(z), -imag(z)
		}
	}
}

// Follow says how every injection's power follows the rows of values that Drive gets:
// P row p and Q row q, times its share, VA.
func (l *Lanes) Follow(p, q []int, share []complex128) { l.asked.follow(l, p, q, share) }

// Drive sets the powers of all lanes from rows of vector.Lanes values.
func (l *Lanes) Drive(values []float64) { l.asked.drive(values) }

// Source sets what a fixed voltage is in a lane, V.
func (l *Lanes) Source(lane, fixed int, z complex128) {
	vector.Put(l.v, l.all+fixed, lane, z)
	vector.Put(l.v, l.held+fixed, lane, z)
	vector.Put(l.x, l.held+fixed, lane, z)
}

// Input sets the inputs of a lane.
func (l *Lanes) Input(lane int, in *Input) {
	for f, z := range in.Source {
		l.Source(lane, f, z)
	}
	for k, z := range in.Power {
		if list := l.list[k]; list >= 0 {
			vector.Put(l.asked.power[list], int(l.member[k]), lane, z)
		}
	}
	for g := range l.s.Groups {
		l.asked.given[g*vector.Lanes+lane] = in.Power[l.s.Groups[g].Members[0]]
	}
}

// Start sets the voltages that the lanes of a mask start from, or the no-load voltages
// of their device state at the inputs in where start is nil.
func (l *Lanes) Start(mask uint8, start []complex128, in *Input) {
	if start == nil {
		start = l.s.unloaded(in)
	}
	for u, at := range l.slot {
		if int(at) >= l.all {
			continue
		}
		for lane := range vector.Lanes {
			if mask>>lane&1 == 1 {
				vector.Put(l.v, int(at), lane, start[u])
			}
		}
	}
}

// Solve iterates the lanes of a mask and returns those that arrived. The others, and
// those at which some load stands below the corner, are the solver's.
func (l *Lanes) Solve(mask uint8, tol Tolerance) (arrived uint8) {
	switch {
	case l.states != nil:
		mask &^= l.states.bad
	case l.s.ready() != nil || l.s.singular >= 0:
		return 0
	}
	l.refresh()
	limit := min(tol.Change, tol.Mismatch*l.least)
	var last, moved [vector.Lanes]float64
	var slow [vector.Lanes]int
	for lane := range last {
		last[lane] = math.Inf(1)
		l.Iterations[lane] = 0
	}
	l.forth = false
	on := false
	for range maxFixedPoint {
		below := l.iterate(mask, &moved, on)
		on = false
		mask &^= below
		for lane := range vector.Lanes {
			if mask>>lane&1 == 0 {
				continue
			}
			change := math.Sqrt(moved[lane])
			l.Iterations[lane]++
			l.Change[lane] = change
			left := change
			if rate := change / last[lane]; rate > 0.5 && rate < 1 {
				left = change * rate / (1 - rate)
			}
			switch {
			case left < limit:
				mask &^= 1 << lane
				arrived |= 1 << lane
			case !(change <= runaway):
				mask &^= 1 << lane
			case change > 0.9*last[lane]:
				if slow[lane]++; slow[lane] > 4 {
					mask &^= 1 << lane
				}
			}
			on = on || !(change*min(change/last[lane], 0.1) < limit) // of one that goes on so
			last[lane] = change
		}
		if mask == 0 {
			break
		}
	}
	return arrived
}

// Hold takes the lanes of a mask as solved where they start: their inputs are those of the
// solution that they start from.
func (l *Lanes) Hold(mask uint8) (arrived uint8) {
	l.Iterations, l.Change = [vector.Lanes]int{}, [vector.Lanes]float64{}
	return mask
}

// The lists of injections: by whether they stand across a pair (1) and are not of constant
// power alone (2), and those that are the first at their value.
const (
	firstWye = 4
	firstZIP = 5
	lists    = 6
)

// draw sets the currents that are put in to what the injections draw at the voltages of a
// block, negative, and returns the lanes with a load below the corner.
func (l *Lanes) draw(into []float64, b *Block, a *powers, mask uint8) (below uint8) {
	for k := range l.parts {
		below |= l.drawPart(into, b, a, k, mask)
	}
	return below
}

// drawGroup does so for a group, lane by lane.
func (l *Lanes) drawGroup(into []float64, b *Block, a *powers, g int, mask uint8) (below uint8) {
	s := l.s
	group := &s.Groups[g]
	n := float64(len(group.Members))
	for lane := range vector.Lanes {
		if mask>>lane&1 == 0 {
			continue
		}
		mean := b.GroupVoltage(g, lane)
		if !(mean >= Corner) {
			below |= 1 << lane
			continue
		}
		p, _ := group.Law.Draws(a.given[g*vector.Lanes+lane], mean)
		p = complex(real(p)/n, -imag(p)/n)
		for _, k := range group.Members {
			j := &s.Injections[k]
			x := b.across(j, lane)
			i := p * x * complex(1/(real(x)*real(x)+imag(x)*imag(x)), 0)
			at := int(l.slot[j.From])
			vector.Put(into, at, lane, vector.At(into, at, lane)-i)
			if j.To != network.Ground {
				at = int(l.slot[j.To])
				vector.Put(into, at, lane, vector.At(into, at, lane)+i)
			}
		}
	}
	return below
}

func (b *Block) across(j *Injection, lane int) complex128 {
	x := b.V(j.From, lane)
	if j.To != network.Ground {
		x -= b.V(j.To, lane)
	}
	return x
}

// GroupVoltage is the mean voltage of a group's branches in a lane, p.u.
func (b *Block) GroupVoltage(g, lane int) (mean float64) {
	s := b.l.s
	members := s.Groups[g].Members
	for _, k := range members {
		mean += cmplx.Abs(b.across(&s.Injections[k], lane)) / s.Injections[k].Nominal
	}
	return mean / float64(len(members))
}

// V is the voltage of an unknown in a lane.
func (b *Block) V(u int32, lane int) complex128 { return vector.At(b.v, int(b.l.slot[u]), lane) }

// Voltages are the values, and where each unknown's stands among them.
func (b *Block) Voltages() (v []float64, slot []int32) { return b.v, b.l.slot }

// Take sets out to the solution of a lane that arrived.
func (l *Lanes) Take(lane int, out *Solution) {
	for u, at := range l.slot {
		out.V[u] = vector.At(l.v, int(at), lane)
	}
	out.Path, out.Iterations, out.Change = InLanes, l.Iterations[lane], l.Change[lane]
}
