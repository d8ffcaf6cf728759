package powerflow

import (
	"fmt"

	"yearflow/sim/network"
)

// stamp adds c(a)·c(b)·y of an element to a slot.
type stamp struct {
	slot    int32
	element int32
	entry   int32
	a, b    int32 // coefficients, −1 for one
}

type fixedStamp struct {
	row, fixed     int32 // row in elimination order
	element, entry int32
	a, b           int32
}

// plan lists where each entry of each element goes.
func (s *Solver) plan() {
	n, red := s.Net, s.red
	for e := range n.Elements {
		el := &n.Elements[e]
		w := len(el.Terminals)
		for p, u := range el.Terminals {
			for q, v := range el.Terminals {
				if el.Y[p*w+q] == 0 {
					continue
				}
				for _, a := range red.terms[u] {
					if a.col < 0 {
						continue
					}
					row := s.pat.place[a.col]
					for _, b := range red.terms[v] {
						if b.col < 0 {
							s.toFixed = append(s.toFixed, fixedStamp{row, -1 - b.col, int32(e), int32(p*w + q), a.coef, b.coef})
							continue
						}
						// The slots hold one triangle: what falls into the other is left out.
						if col := s.pat.place[b.col]; col > row {
							continue
						}
						st := stamp{s.pat.slot(a.col, b.col), int32(e), int32(p*w + q), a.coef, b.coef}
						if a.coef < 0 && b.coef < 0 && el.Kind != network.Capacitor {
							s.still = append(s.still, st)
						} else {
							s.moving = append(s.moving, st)
						}
					}
				}
			}
		}
	}
}

// SetDevices takes the ratio of every coupling (Network.Couplings; 1 where it has
// no unit) and the state of every capacitor bank, and factors anew where they
// changed. The error says that the network has no unique solution; Solve then finds
// none, and where.
func (s *Solver) SetDevices(ratio []float64, closed []bool) error {
	if err := s.place(ratio, closed); err != nil {
		return err
	}
	return s.ready()
}

// Place takes them as SetDevices does, and factors when a solution is asked for: who finds
// it elsewhere, such as in positioned Lanes, need not wait for that.
func (s *Solver) Place(ratio []float64, closed []bool) { _ = s.place(ratio, closed) }

func (s *Solver) place(ratio []float64, closed []bool) error {
	same := s.singular < 0
	for i, r := range ratio {
		same = same && s.ratio[i] == r
	}
	for i, c := range closed {
		same = same && s.closed[i] == c
	}
	if same {
		return nil
	}
	copy(s.ratio, ratio)
	copy(s.closed, closed)
	return s.moved()
}

// DeviceState numbers the device states that SetDevices has been given; two numbers
// that are equal are the same state.
func (s *Solver) DeviceState() int { return s.version }

func (s *Solver) assemble() error {
	clear(s.base)
	for _, st := range s.still {
		s.base[st.slot] += s.Net.Elements[st.element].Y[st.entry]
	}
	if err := s.moved(); err != nil {
		return err
	}
	return s.ready()
}

// moved takes a new device state over, up to the factor.
func (s *Solver) moved() error {
	s.version++
	s.noLoadValid = false
	if k := s.red.update(s.ratio); k >= 0 {
		s.singular, s.late = s.red.clusters[k].dep[0], false // nothing to factor: the place stands
		return fmt.Errorf("the taps of the regulators make the network's equations singular at %s: look at regulators in a loop", s.Net.Unknowns[s.singular].Name)
	}
	s.singular, s.late = -1, true
	return nil
}

// ready factors, where devices have moved since that was done.
func (s *Solver) ready() error {
	if !s.late {
		return nil
	}
	s.late = false
	u := s.update
	for _, slot := range u.moving {
		s.next[slot] = s.base[slot]
	}
	for _, st := range s.moving {
		el := &s.Net.Elements[st.element]
		if el.Kind == network.Capacitor && !s.closed[el.Index] {
			continue
		}
		s.next[st.slot] += el.Y[st.entry] * complex(s.coef(st.a)*s.coef(st.b), 0)
	}
	if !u.valid {
		copy(s.y, s.base)
	}
	for _, slot := range u.moving {
		if z := s.next[slot]; z != s.y[slot] || !u.valid {
			s.y[slot] = z
			u.stale[u.columnOf(slot)] = true
		}
	}
	if row := u.factor(s.pat, s.f, s.y, s.version); row >= 0 {
		s.singular = s.unknownAt(row)
		return fmt.Errorf("the network's equations are singular at %s: some part of the feeder has nothing to hold its voltage, or a capacitor resonates with a line", s.Net.Unknowns[s.singular].Name)
	}
	return nil
}

// unknownAt returns the unknown that stands for a row of the elimination order.
func (s *Solver) unknownAt(row int) int32 {
	for u, terms := range s.red.terms {
		if len(terms) == 1 && terms[0].coef < 0 && terms[0].col >= 0 && int(s.pat.place[terms[0].col]) == row {
			return int32(u)
		}
	}
	return 0
}

func (s *Solver) coef(c int32) float64 {
	if c < 0 {
		return 1
	}
	return s.red.coef[c]
}
