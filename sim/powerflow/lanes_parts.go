package powerflow

import (
	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
)

// lanePart is a part of the values, with all that an iteration does to them. The parts but
// the first are subtrees of the elimination tree, small enough to stay in the processor's
// second cache from the way back of one iteration to the way forth of the next; the first
// is the top of the tree. Nothing in one subtree touches another: what is connected stands
// on one path to the root.
type lanePart struct {
	loads [lists]*vector.Loads
	blank vector.Blank // values at which no list begins

	pull, gather, expand       vector.Rows
	pullBy, gatherBy, expandBy vector.Groups // the same in lanes of their own positions
	pulls                      [][]fixedStamp
	gathers, expands           []int32 // coefficients
	forward, backward          vector.Groups
	down, up                   []int32 // places in W; in M, and below zero −1 − place in W
	downBy, upBy               []laneCoef
	dependent                  [2]int // values of its dependent unknowns
}

// laneCoef is a coefficient that differs from lane to lane: its number, and its place as in
// down and up.
type laneCoef struct {
	coef  int
	place int32
}

// coefAt is a coefficient of a part, coefs a row of them.
type coefAt struct{ part, at int32 }

type coefs struct {
	part     int32
	from, to int
}

// mostOfPart bounds the values of a part. What an iteration reads and writes of each is about
// 600 bytes: voltage, current, power, coefficients. Measured on 22,000 values with a second
// cache of 1 MB, parts of 1,500 to 2,500 take a fifth less time than no parts, smaller ones
// gain less; 2,200 values fit without.
const mostOfPart = 2000

// divide finds the parts: the largest subtrees that are small enough, several to a part
// where they are small.
func (l *Lanes) divide(mostOfPart int) {
	b, n := l.blocks, len(l.blocks.groups)
	l.parts, l.partOf = make([]lanePart, 1), make([]int32, n)
	if l.free < 2*mostOfPart || len(l.s.Groups) > 0 {
		return
	}
	parent := make([]int32, n)
	size := make([]int, n)
	var upward []int32 // from the leaves
	for _, g := range b.levels() {
		upward = append(upward, g)
	}
	for _, g := range upward {
		size[g] += len(b.groups[g].columns)
		parent[g] = -1
		if rows := b.groups[g].rows; len(rows) > 0 {
			parent[g] = b.of[rows[0]]
			size[parent[g]] += size[g]
		}
	}
	room := 0
	for k := n - 1; k >= 0; k-- {
		g := upward[k]
		if size[g] > mostOfPart {
			continue
		}
		if p := parent[g]; p >= 0 && size[p] <= mostOfPart {
			l.partOf[g] = l.partOf[p]
			continue
		}
		if size[g] > room {
			l.parts = append(l.parts, lanePart{})
			room = mostOfPart
		}
		room -= size[g]
		l.partOf[g] = int32(len(l.parts) - 1)
	}
	if !l.divides() {
		l.parts = l.parts[:1]
		clear(l.partOf)
	}
}

// divides tells whether no injection and no dependent unknown stands between two subtrees.
func (l *Lanes) divides() bool {
	s := l.s
	for _, terms := range s.red.terms {
		if l.partOfTerms(terms) < 0 {
			return false
		}
	}
	for i := range s.Injections {
		j := &s.Injections[i]
		if j.To == network.Ground {
			continue
		}
		if a, b := l.partOfTerms(s.red.terms[j.From]), l.partOfTerms(s.red.terms[j.To]); a > 0 && b > 0 && a != b {
			return false
		}
	}
	return true
}

// partOfTerms is the part of an unknown: of those of the unknowns that it follows from the
// one below the top. Below zero there are two of these.
func (l *Lanes) partOfTerms(terms []term) (part int32) {
	for _, t := range terms {
		if t.col < 0 {
			continue
		}
		if p := l.partOf[l.blocks.of[l.s.pat.place[t.col]]]; part == 0 {
			part = p
		} else if p > 0 && p != part {
			return -1
		}
	}
	return part
}

// iterate moves the lanes of a mask by one iteration, and returns those that had a load
// below the corner before it. on says that another iteration is expected: then every
// subtree is prepared for it while it is at hand.
func (l *Lanes) iterate(mask uint8, moved *[vector.Lanes]float64, on bool) (below uint8) {
	top := &l.parts[0]
	if !l.forth {
		l.below = l.drawPart(l.x, l.Block, l.asked, 0, mask)
		for k := range l.parts[1:] {
			l.goForth(k+1, mask)
		}
	}
	below = l.below
	keep := mask &^ below
	l.forth, l.below = on && len(l.parts) > 1, 0
	top.inject(l.x)
	top.forward.Add(l.x, l.x)
	var found vector.Moved
	*moved = [vector.Lanes]float64{}
	l.goBack(top, keep, &found, moved)
	if l.forth {
		l.below |= l.drawPart(l.x, l.Block, l.asked, 0, keep)
	}
	for k := range l.parts[1:] {
		l.goBack(&l.parts[k+1], keep, &found, moved)
		if l.forth {
			l.goForth(k+1, keep)
		}
	}
	for lane := range moved {
		moved[lane] = max(moved[lane], found.Most(lane))
	}
	return below
}

// goForth sets the currents of a subtree and eliminates it.
func (l *Lanes) goForth(part int, mask uint8) {
	p := &l.parts[part]
	l.below |= l.drawPart(l.x, l.Block, l.asked, part, mask)
	p.inject(l.x)
	p.forward.Add(l.x, l.x)
}

// inject adds what fixed voltages drive and what dependent unknowns receive.
func (p *lanePart) inject(x []float64) {
	p.pull.Add(x, x)
	p.pullBy.Add(x, x)
	p.gather.Add(x, x)
	p.gatherBy.Add(x, x)
}

// goBack finds the voltages of a part from those above it.
func (l *Lanes) goBack(p *lanePart, keep uint8, found *vector.Moved, moved *[vector.Lanes]float64) {
	p.backward.Back(l.v, l.x, l.weight, keep, found)
	from, to := p.dependent[0], p.dependent[1]
	if from == to {
		return
	}
	p.expand.Set(l.x, l.v)
	p.expandBy.Set(l.x, l.v)
	var followed [vector.Lanes]float64
	vector.Advance(l.v[from*vector.Width:], l.x[from*vector.Width:], l.weight[from:to], keep, &followed)
	for lane := range moved {
		moved[lane] = max(moved[lane], followed[lane])
	}
}

// drawPart sets the currents that are put into a part to what its injections draw at the
// voltages of a block, negative, and returns the lanes with a load below the corner.
func (l *Lanes) drawPart(into []float64, b *Block, a *powers, part int, mask uint8) (below uint8) {
	p := &l.parts[part]
	p.blank.Clear(into)
	for i := lists - 1; i >= 0; i-- { // those that begin come first
		below |= p.loads[i].Draw(into, b.v, a.power[part*lists+i])
	}
	if part == 0 {
		for g := range l.s.Groups {
			below |= l.drawGroup(into, b, a, g, mask)
		}
	}
	return below
}
