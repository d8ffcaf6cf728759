package powerflow

import "yearflow/sim/network"

// Flows sets flow to the currents, A, that every element takes in at its
// terminals (Network.Offsets); those of open capacitors are zero.
func (s *Solver) Flows(flow, v []complex128) { s.FlowsWith(flow, v, s.closed) }

// FlowsWith is Flows for capacitors as given. It may be called while the solver is at
// work.
func (s *Solver) FlowsWith(flow, v []complex128, closed []bool) {
	for e := range s.Net.Elements {
		s.flowsOf(e, flow, v, closed)
	}
}

func (s *Solver) flowsOf(e int, flow, v []complex128, closed []bool) {
	el := &s.Net.Elements[e]
	out := flow[s.Net.Offsets[e]:s.Net.Offsets[e+1]]
	w := len(out)
	if el.Kind == network.Capacitor && !closed[el.Index] {
		clear(out)
		return
	}
	for p := range out {
		var i complex128
		for q, y := range el.Y[p*w : p*w+w] {
			i += y * v[el.Terminals[q]]
		}
		out[p] = i
	}
}

// Couplings sets own to the current, A, of every coupling and source to what each
// fixed voltage delivers (Network.Fixed): what is left of Kirchhoff's current law
// at the dependent and at the fixed unknowns once elements and injections are
// counted. in, v and flow belong to one solution.
//
// A coupling draws c·own at a terminal of coefficient c; at the dependent unknowns
// of a cluster Σ flow − inject + Cpᵀ·own = 0.
func (s *Solver) Couplings(own, source []complex128, in *Input, v, flow []complex128) {
	// rest is the current that each unknown still has to receive.
	rest := s.old
	s.currents(s.inject, v, in)
	for u := range rest {
		rest[u] = -s.inject[u]
	}
	for e := range s.Net.Elements {
		off := s.Net.Offsets[e]
		for p, u := range s.Net.Elements[e].Terminals {
			rest[u] += flow[off+p]
		}
	}
	s.couple(own, source, rest, s.red, s.ratio)
}

// couple finds the currents of couplings and fixed voltages from what dependent and fixed
// unknowns still have to receive, rest, which it changes.
func (s *Solver) couple(own, source, rest []complex128, red *reduction, ratio []float64) {
	for k := range red.clusters {
		c := &red.clusters[k]
		m := len(c.dep)
		for i, kk := range c.couplings {
			var sum complex128
			for j, d := range c.dep {
				// own = −Cp⁻ᵀ·rest
				sum -= complex(c.inverse[j*m+i], 0) * rest[d]
			}
			own[kk] = sum
		}
	}
	for kk := range s.Net.Couplings {
		cp := &s.Net.Couplings[kk]
		for t, u := range cp.Terminals {
			rest[u] += complex(cp.Base[t]+cp.Inverse[t]/ratio[kk], 0) * own[kk]
		}
	}
	for f, x := range s.Net.Fixed {
		source[f] = rest[x.Unknown]
	}
}

// Sense reads, of a solution, the currents that controls look at: Flows at some places,
// and Couplings, as these would find them. Groups are none of its business: a solver that
// has some has no Sense.
type Sense struct {
	s                              *Solver
	unknowns, elements, injections []int32
	rest                           []complex128
}

// NewSense prepares the reading of flows at some places.
func (s *Solver) NewSense(flows []int) *Sense {
	n := s.Net
	x := &Sense{s: s, rest: make([]complex128, len(n.Unknowns))}
	counts := make([]bool, len(n.Unknowns))
	mark := func(u int32) {
		if !counts[u] {
			counts[u] = true
			x.unknowns = append(x.unknowns, u)
		}
	}
	for _, f := range n.Fixed {
		mark(f.Unknown)
	}
	for k := range s.red.clusters {
		for _, u := range s.red.clusters[k].dep {
			mark(u)
		}
	}
	wanted := make([]bool, n.Offsets[len(n.Elements)])
	for _, f := range flows {
		wanted[f] = true
	}
	for e := range n.Elements {
		takes := false
		for p, u := range n.Elements[e].Terminals {
			takes = takes || counts[u] || wanted[n.Offsets[e]+p]
		}
		if takes {
			x.elements = append(x.elements, int32(e))
		}
	}
	for k := range s.Injections {
		for _, u := range s.Injections[k].ends() {
			if counts[u] {
				x.injections = append(x.injections, int32(k))
				break
			}
		}
	}
	return x
}

// Read sets flow at the places, and at others of the same elements, and own and source as
// Couplings does.
func (x *Sense) Read(flow, own, source []complex128, in *Input, v []complex128) {
	s := x.s
	x.read(flow, own, source, in.Power, v, s.red, s.ratio, s.closed)
}

// read is Read at positions of the devices.
func (x *Sense) read(flow, own, source, power, v []complex128, red *reduction, ratio []float64, closed []bool) {
	s := x.s
	for _, u := range x.unknowns {
		x.rest[u] = 0
	}
	for _, k := range x.injections {
		j := &s.Injections[k]
		i := j.current(power[k], j.across(v))
		x.rest[j.From] += i
		if j.To != network.Ground {
			x.rest[j.To] -= i
		}
	}
	for _, e := range x.elements {
		s.flowsOf(int(e), flow, v, closed)
		off := s.Net.Offsets[e]
		for p, u := range s.Net.Elements[e].Terminals {
			x.rest[u] += flow[off+p]
		}
	}
	s.couple(own, source, x.rest, red, ratio)
}

// DrawnBy is what an injection that stands alone draws, VA, where it is asked for power.
func (s *Solver) DrawnBy(k int, power complex128, v []complex128) complex128 {
	j := &s.Injections[k]
	x := j.across(v)
	i := j.current(power, x)
	return x * complex(real(i), -imag(i))
}

// Drawn sets power to what each injection draws, VA, at voltages v.
func (s *Solver) Drawn(power []complex128, in *Input, v []complex128) {
	s.shares(v, in)
	for k := range s.Injections {
		x := s.Injections[k].across(v)
		i := s.ampere(k, x, in)
		power[k] = x * complex(real(i), -imag(i))
	}
}
