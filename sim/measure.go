package sim

import (
	"math"
	"math/cmplx"

	"yearflow/devices"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
)

// capacitorMeter finds the voltage and the flow that a capacitor's control reads: V120
// of its named phase, else of its first; a pair over √3·nominal; the watched section
// at its from end.
func (e *Engine) capacitorMeter(c *feeder.Capacitor) *capacitorMeter {
	node := &e.net.Model.Nodes[c.Node]
	at := e.net.At[c.Node]
	first := node.Phases[0]
	if len(c.Phases) > 0 {
		first = c.Phases[0]
	} else if len(c.Pairs) > 0 {
		first = c.Pairs[0][0]
	}
	cm := &capacitorMeter{from: at[first], to: network.Ground, base: e.net.Unknowns[at[first]].Nominal / 120}
	pair := func(a, b feeder.Phase) {
		cm.from, cm.to, cm.base = at[a], at[b], node.Nominal*1000/120
	}
	s := c.Control
	switch {
	case s != nil && len(s.Phase) == 2:
		pair(s.Phase[0], s.Phase[1])
	case s != nil && len(s.Phase) == 1:
		cm.from = at[s.Phase[0]]
		cm.base = e.net.Unknowns[cm.from].Nominal / 120
	case !node.Grounded && len(c.Pairs) > 0:
		pair(c.Pairs[0][0], c.Pairs[0][1])
	}
	if s != nil && s.Watched != nil {
		var one *feeder.Phase
		if len(s.Phase) == 1 {
			one = &s.Phase[0]
		}
		cm.watched = e.watch(s.Watched, one)
	}
	return cm
}

// watchedNodes returns the from node of a watched element.
func (e *Engine) watch(w *feeder.Watched, only *feeder.Phase) []watchedPhase {
	m := e.net.Model
	var from int
	var kinds []network.Kind
	var coupling network.Kind
	switch w.Kind {
	case "section":
		from, kinds, coupling = m.Sections[w.Index].From, []network.Kind{network.Section}, network.Reference
	case "transformer":
		from, kinds, coupling = m.Transformers[w.Index].From, []network.Kind{network.Transformer, network.TransformerNoLoad}, network.Reference
	case "regulator":
		from, kinds, coupling = m.Regulators[w.Index].From, []network.Kind{network.RegulatorNoLoad}, network.Regulator
	default:
		from, coupling = m.Switches[w.Index].From, network.Switch
	}
	var out []watchedPhase
	for p, u := range e.net.At[from] {
		if u == network.Ground || only != nil && feeder.Phase(p) != *only {
			continue
		}
		wp := watchedPhase{unknown: u}
		for _, k := range kinds {
			for _, el := range e.net.ElementsOf(k, w.Index) {
				for t := range e.net.Elements[el].From {
					if e.net.Elements[el].Terminals[t] == u {
						wp.flows = append(wp.flows, e.net.Offsets[el]+t)
					}
				}
			}
		}
		for k := range e.net.Couplings {
			c := &e.net.Couplings[k]
			if c.Kind == coupling && c.Index == w.Index {
				for t, v := range c.Terminals {
					if v == u {
						wp.parts = append(wp.parts, part{k, t})
					}
				}
			}
		}
		if len(wp.flows)+len(wp.parts) > 0 {
			out = append(out, wp)
		}
	}
	return out
}

// watchedRating is the rating of a watched section in A; NaN where it is not known.
func (e *Engine) watchedRating(w *feeder.Watched) float64 {
	m := e.net.Model
	if w == nil {
		return math.NaN()
	}
	switch w.Kind {
	case "section":
		s := &m.Sections[w.Index]
		if feeder.Unknown(s.Rating) {
			return m.Constructions[s.Construction].Rating
		}
		return s.Rating
	case "transformer":
		t := &m.Transformers[w.Index]
		if len(t.Phases) == 1 {
			return t.KVA / t.HighKV
		}
		return t.KVA / (sqrt3 * t.HighKV)
	case "regulator":
		return m.Regulators[w.Index].Rating
	}
	return m.Switches[w.Index].Rating
}

// solved is an instant that currents and voltages can be read of: the state at hand, or a
// lane.
type solved interface {
	volt(unknown int32) complex128
	flow(place int) complex128
	coupling(k int) complex128
	value(series int) float64
}

// present is the state at hand.
type present struct{ *Engine }

func (s present) volt(u int32) complex128   { return s.state.V[u] }
func (s present) flow(i int) complex128     { return s.state.Flow[i] }
func (s present) coupling(k int) complex128 { return s.state.Coupling[k] }
func (s present) value(series int) float64  { return s.in.values[series] }

// drawnAt returns the current that parts of couplings draw, A.
func drawnAt[S solved](e *Engine, x S, parts []part) (sum complex128) {
	for _, p := range parts {
		c := &e.net.Couplings[p.coupling]
		sum += complex(c.Base[p.terminal]+c.Inverse[p.terminal]/e.ratio[p.coupling], 0) * x.coupling(p.coupling)
	}
	return sum
}

// into returns the current that enters an element at its from end, A.
func into[S solved](e *Engine, x S, w *watchedPhase) complex128 {
	current := drawnAt(e, x, w.parts)
	for _, f := range w.flows {
		current += x.flow(f)
	}
	return current
}

func across[S solved](x S, from, to int32) complex128 {
	v := x.volt(from)
	if to != network.Ground {
		v -= x.volt(to)
	}
	return v
}

func (e *Engine) between(from, to int32) complex128 { return across(present{e}, from, to) }

// measure sets what a device's control sees in the solution at hand.
func (e *Engine) measure(d *device, wall devices.Time) { d.reading = read(e, present{e}, d, wall) }

// read returns what a device's control sees of a solved instant.
func read[S solved](e *Engine, x S, d *device, wall devices.Time) Reading {
	r := Reading{Wall: wall}
	if t := d.tap; t != nil {
		r.Volts = across(x, t.from, t.to)
		r.Amperes = -drawnAt(e, x, t.leaving)
		if t.forward {
			return r
		}
		r.SourceVolts = across(x, t.sourceFrom, t.sourceTo)
		r.SourceAmperes = -into(e, x, &t.source)
		return r
	}
	c := d.cap
	r.V120 = cmplx.Abs(across(x, c.from, c.to)) / c.base
	for i := range c.watched {
		w := &c.watched[i]
		current := into(e, x, w)
		s := x.volt(w.unknown) * cmplx.Conj(current)
		r.KW += real(s) / 1000
		r.KVAR += imag(s) / 1000
		r.Current = math.Max(r.Current, cmplx.Abs(current))
	}
	if k := e.in.outside[d.Index]; k >= 0 {
		r.Outside = x.value(k)
	}
	return r
}
