package powerflow

import "yearflow/sim/powerflow/vector"

// powers are what the injections of a Lanes are asked for, by lane.
type powers struct {
	l      *Lanes
	power  [][]float64  // by part and list, values: P and Q at 1 p.u., VA, as the lists have them
	given  []complex128 // by group and lane
	drives []vector.Drives
	lead   []drive // by group: how its first member's power follows the series
}

// drive says how a power follows rows of values: P the first, Q the second.
type drive struct {
	p, q  int
	share complex128
}

func (l *Lanes) newPowers() *powers {
	a := &powers{l: l, given: make([]complex128, len(l.s.Groups)*vector.Lanes)}
	for k := range l.parts {
		for _, list := range l.parts[k].loads {
			a.power = append(a.power, vector.Make(list.Len()))
		}
	}
	return a
}

func (a *powers) follow(l *Lanes, p, q []int, share []complex128) {
	a.drives = make([]vector.Drives, len(a.power))
	a.lead = make([]drive, len(l.s.Groups))
	for _, k := range l.listed {
		if list := l.list[k]; list >= 0 {
			a.drives[list].Drive(p[k], q[k], share[k])
		}
	}
	for g := range a.lead {
		k := l.s.Groups[g].Members[0]
		a.lead[g] = drive{p[k], q[k], share[k]}
	}
}

func (a *powers) drive(values []float64) {
	for i := range a.drives {
		a.drives[i].Scale(a.power[i], values)
	}
	for g, d := range a.lead {
		for lane := range vector.Lanes {
			a.given[g*vector.Lanes+lane] = complex(real(d.share)*values[d.p*vector.Lanes+lane], imag(d.share)*values[d.q*vector.Lanes+lane])
		}
	}
}

// of is the real power, W at 1 p.u., that an injection is asked for in a lane: of one in
// a group what the group is given.
func (a *powers) of(injection, lane int) float64 { return real(a.complex(injection, lane)) }

// complex is the same with the reactive power, VA.
func (a *powers) complex(injection, lane int) complex128 {
	list := a.l.list[injection]
	if list < 0 {
		return a.given[int(a.l.s.Injections[injection].Group-1)*vector.Lanes+lane]
	}
	return vector.At(a.power[list], int(a.l.member[injection]), lane)
}
