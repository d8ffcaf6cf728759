package powerflow

import "yearflow/sim/network"

// Flows sets flow to the currents, A, that every element takes in at its
// terminals (Network.Offsets); those of open capacitors are zero.
func (s *Solver) Flows(flow, v []complex128) {
	for e := range s.Net.Elements {
		el := &s.Net.Elements[e]
		out := flow[s.Net.Offsets[e]:s.Net.Offsets[e+1]]
		w := len(out)
		if el.Kind == network.Capacitor && !s.closed[el.Index] {
			clear(out)
			continue
		}
		for p := range out {
			var i complex128
			for q, y := range el.Y[p*w : p*w+w] {
				i += y * v[el.Terminals[q]]
			}
			out[p] = i
		}
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
	for k := range s.red.clusters {
		c := &s.red.clusters[k]
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
			rest[u] += complex(cp.Base[t]+cp.Inverse[t]/s.ratio[kk], 0) * own[kk]
		}
	}
	for f, x := range s.Net.Fixed {
		source[f] = rest[x.Unknown]
	}
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
