package sim

import (
	"fmt"
	"math"
	"math/cmplx"

	"yearflow/sim/feeder"
	"yearflow/sim/network"
)

// Balance is the nodal equation of one node.phase, number by number:
//
//	Σ over elements (Σ Y·V) + load − generation − source = 0
//
// Currents are in A, powers in VA, both counted into the element.
type Balance struct {
	Phase    string
	V        complex128 // V to ground
	Base     float64    // V, nominal line to neutral
	Elements []BalanceElement
	Load     complex128 // VA drawn here; of a delta load what its line current draws
	Gen      complex128 // VA delivered
	Source   complex128 // VA delivered
	// Sum is what is left, VA: it must be nothing.
	Sum complex128
}

// BalanceElement is one element at the node.
type BalanceElement struct {
	Kind, Name string
	Neighbour  string // node at its other end; blank for a shunt
	// Terms are its admittances: the first is that of the place itself. An ideal
	// element (a regulator, a closed switch) has none.
	Terms   []BalanceTerm
	Current complex128 // A into the element
	Power   complex128 // VA into the element
}

// BalanceTerm is one admittance of an element and the voltage it stands with.
type BalanceTerm struct {
	At string     // node.phase, or what the inner point is
	Y  complex128 // S, the entry of the element's admittance matrix
	V  complex128 // V
}

// Balance returns the nodal equations of a node for the instant solved last.
func (e *Engine) Balance(node string) ([]Balance, error) {
	m := e.net.Model
	i, ok := m.NodeIndex(node)
	if !ok {
		return nil, fmt.Errorf("no node named %q", node)
	}
	var out []Balance
	for _, p := range m.Nodes[i].Phases {
		u := e.net.At[i][p]
		b := Balance{Phase: p.String(), V: e.state.V[u], Base: e.net.Unknowns[u].Nominal}
		for k := range e.net.Elements {
			if be, ok := e.balanceElement(k, u); ok {
				b.Elements = append(b.Elements, be)
				b.Sum += be.Power
			}
		}
		for k := range e.net.Couplings {
			if be, ok := e.balanceCoupling(k, u); ok {
				b.Elements = append(b.Elements, be)
				b.Sum += be.Power
			}
		}
		for k := range e.in.injections {
			j := &e.in.injections[k]
			var i complex128
			across := e.between(j.From, j.To)
			if across != 0 {
				i = cmplx.Conj(e.drawn[k] / across)
			}
			switch u {
			case j.From:
			case j.To:
				i = -i
			default:
				continue
			}
			s := b.V * cmplx.Conj(i)
			if j.Generator {
				b.Gen -= s
			} else {
				b.Load += s
			}
		}
		for f, x := range e.net.Fixed {
			if x.Unknown == u {
				b.Source += b.V * cmplx.Conj(e.source[f])
			}
		}
		b.Sum += b.Load - b.Gen - b.Source
		out = append(out, b)
	}
	return out, nil
}

func (e *Engine) balanceElement(k int, u int32) (BalanceElement, bool) {
	el := &e.net.Elements[k]
	at := -1
	for t, v := range el.Terminals {
		if v == u {
			at = t
		}
	}
	if at < 0 || el.Kind == network.Reference || el.Kind == network.Capacitor && !e.state.Closed[el.Index] {
		return BalanceElement{}, false
	}
	be := BalanceElement{Kind: el.Kind.String(), Name: e.elementName(el.Kind, el.Index)}
	w := len(el.Terminals)
	place := e.net.Unknowns[u].Node
	term := func(t int) {
		v := el.Terminals[t]
		if y := el.Y[at*w+t]; y != 0 || t == at {
			be.Terms = append(be.Terms, BalanceTerm{e.net.Unknowns[v].Name, y, e.state.V[v]})
		}
		if n := e.net.Unknowns[v].Node; n >= 0 && n != place {
			be.Neighbour = e.net.Model.Nodes[n].Name
		}
	}
	term(at)
	for t := range el.Terminals {
		if t != at {
			term(t)
		}
	}
	if r := e.net.Model.Regulators; el.Kind == network.RegulatorSeries {
		be.Neighbour = e.net.Model.Nodes[r[el.Index].From].Name // beyond the inner point
	}
	be.Current = e.state.Flow[e.net.Offsets[k]+at]
	be.Power = e.state.V[u] * cmplx.Conj(be.Current)
	return be, true
}

func (e *Engine) balanceCoupling(k int, u int32) (BalanceElement, bool) {
	c := &e.net.Couplings[k]
	found := false
	be := BalanceElement{Kind: c.Kind.String(), Name: e.elementName(c.Kind, c.Index)}
	place := e.net.Unknowns[u].Node
	for t, v := range c.Terminals {
		if v == u {
			found = true
			be.Current += complex(c.Base[t]+c.Inverse[t]/e.ratio[k], 0) * e.state.Coupling[k]
		} else if n := e.net.Unknowns[v].Node; n >= 0 && n != place {
			be.Neighbour = e.net.Model.Nodes[n].Name
		}
	}
	be.Power = e.state.V[u] * cmplx.Conj(be.Current)
	return be, found
}

func (e *Engine) elementName(k network.Kind, index int) string {
	m := e.net.Model
	switch k {
	case network.Section:
		return m.Sections[index].Name
	case network.Transformer, network.TransformerNoLoad, network.Reference:
		return m.Transformers[index].Name
	case network.Regulator, network.RegulatorSeries, network.RegulatorNoLoad:
		return m.Regulators[index].Name
	case network.Capacitor:
		return m.Capacitors[index].Name
	case network.Switch:
		return m.Switches[index].Name
	}
	return m.Nodes[m.Sources[index].Node].Name
}

// TraceRow is one element on the way from the source to a node.
type TraceRow struct {
	Kind, Name string
	From, To   string // nodes, from the source's side
	Phases     []TracePhase
	LossKW     float64 // of the whole element
}

// TracePhase is one phase of a TraceRow.
type TracePhase struct {
	Phase   feeder.Phase
	Current complex128 // A entering from the source's side
	V120    float64    // at the far end
	Change  float64    // of V120, far end less near end; NaN where the near end lacks the phase
	Tap     *int       // of a regulator's unit on this phase
}

// hop is one element between two nodes.
type hop struct {
	kind  network.Kind
	index int
	a, b  int
}

// Trace walks from the nearest source to a node, in the instant solved last: the way
// with the fewest elements.
func (e *Engine) Trace(node string) ([]TraceRow, error) {
	m := e.net.Model
	target, ok := m.NodeIndex(node)
	if !ok {
		return nil, fmt.Errorf("no node named %q", node)
	}
	hops := e.hops()
	via := e.via(hops)
	var rows []TraceRow
	n := target
	for via[n] >= 0 {
		h := hops[via[n]]
		near := h.a + h.b - n
		rows = append(rows, e.traceRow(h, near, n))
		n = near
	}
	for i := range m.Sources {
		if m.Sources[i].Node == n {
			if ks := e.net.ElementsOf(network.SourceImpedance, i); len(ks) > 0 {
				rows = append(rows, e.traceSource(ks[0], n))
			}
		}
	}
	for i, j := 0, len(rows)-1; i < j; i, j = i+1, j-1 {
		rows[i], rows[j] = rows[j], rows[i]
	}
	return rows, nil
}

// via returns, by node, the hop by which it is reached from the nearest source with the
// fewest elements; −1 at a source, −2 where nothing leads to it.
func (e *Engine) via(hops []hop) []int {
	m := e.net.Model
	via := make([]int, len(m.Nodes))
	for i := range via {
		via[i] = -2
	}
	at := make([][]int, len(m.Nodes))
	for k, h := range hops {
		at[h.a] = append(at[h.a], k)
		at[h.b] = append(at[h.b], k)
	}
	var queue []int
	for _, s := range m.Sources {
		via[s.Node] = -1
		queue = append(queue, s.Node)
	}
	for len(queue) > 0 {
		n := queue[0]
		queue = queue[1:]
		for _, k := range at[n] {
			far := hops[k].a + hops[k].b - n
			if via[far] == -2 {
				via[far] = k
				queue = append(queue, far)
			}
		}
	}
	return via
}

func (e *Engine) hops() (out []hop) {
	m := e.net.Model
	for i, s := range m.Sections {
		out = append(out, hop{network.Section, i, s.From, s.To})
	}
	for i, s := range m.Switches {
		if s.Closed {
			out = append(out, hop{network.Switch, i, s.From, s.To})
		}
	}
	for i, s := range m.Transformers {
		out = append(out, hop{network.Transformer, i, s.From, s.To})
	}
	for i, s := range m.Regulators {
		out = append(out, hop{network.Regulator, i, s.From, s.To})
	}
	return out
}

func (e *Engine) v120(node int, p feeder.Phase) (float64, bool) {
	u := e.net.At[node][p]
	if u == network.Ground {
		return 0, false
	}
	return 120 * cmplx.Abs(e.state.V[u]) / e.net.Unknowns[u].Nominal, true
}

// traceRow reads one element between near (the source's side) and far.
func (e *Engine) traceRow(h hop, near, far int) TraceRow {
	m := e.net.Model
	row := TraceRow{Kind: h.kind.String(), Name: e.elementName(h.kind, h.index), From: m.Nodes[near].Name, To: m.Nodes[far].Name}
	enter := map[int32]complex128{}
	loss := 0.0
	add := func(k network.Kind) {
		for _, el := range e.net.ElementsOf(k, h.index) {
			off := e.net.Offsets[el]
			for t, u := range e.net.Elements[el].Terminals {
				i := e.state.Flow[off+t]
				enter[u] += i
				loss += real(e.state.V[u] * cmplx.Conj(i))
			}
		}
	}
	switch h.kind {
	case network.Section:
		add(network.Section)
	case network.Transformer:
		add(network.Transformer)
		add(network.TransformerNoLoad)
	case network.Regulator:
		add(network.RegulatorSeries)
		add(network.RegulatorNoLoad)
	}
	for k := range e.net.Couplings {
		c := &e.net.Couplings[k]
		if c.Kind != h.kind || c.Index != h.index {
			continue
		}
		for t, u := range c.Terminals {
			enter[u] += complex(c.Base[t]+c.Inverse[t]/e.ratio[k], 0) * e.state.Coupling[k]
		}
	}
	row.LossKW = loss / 1000
	for _, p := range m.Nodes[far].Phases {
		i, carried := enter[e.net.At[near][p]]
		v, _ := e.v120(far, p)
		if !carried {
			i = -enter[e.net.At[far][p]] // a leg, or a phase that begins here: what comes out
		}
		tp := TracePhase{Phase: p, V120: v, Current: i, Change: math.NaN()}
		above := p
		if h.kind == network.Transformer && p.Leg() {
			above = m.Transformers[h.index].HighEnds[0] // a leg follows the phase that feeds it
		}
		if before, ok := e.v120(near, above); ok {
			tp.Change = v - before
			if !carried && h.kind == network.Section {
				continue
			}
		}
		if h.kind == network.Regulator {
			for u := range m.Regulators[h.index].Units {
				if m.Regulators[h.index].Units[u].Phase == p {
					tap := e.state.Taps[e.unitAt[h.index]+u]
					tp.Tap = &tap
				}
			}
		}
		row.Phases = append(row.Phases, tp)
	}
	return row
}

// traceSource is the source's own impedance, as the first row.
func (e *Engine) traceSource(k, node int) TraceRow {
	m := e.net.Model
	el := &e.net.Elements[k]
	row := TraceRow{Kind: el.Kind.String(), Name: m.Nodes[node].Name, From: "(source)", To: m.Nodes[node].Name}
	off := e.net.Offsets[k]
	for t := range el.From {
		u, w := el.Terminals[t], el.Terminals[el.From+t]
		v := 120 * cmplx.Abs(e.state.V[w]) / e.net.Unknowns[w].Nominal
		row.Phases = append(row.Phases, TracePhase{Phase: e.net.Unknowns[w].Phase, Current: e.state.Flow[off+t], V120: v,
			Change: v - 120*cmplx.Abs(e.state.V[u])/e.net.Unknowns[u].Nominal})
		row.LossKW += real(e.state.V[u]*cmplx.Conj(e.state.Flow[off+t])+e.state.V[w]*cmplx.Conj(e.state.Flow[off+el.From+t])) / 1000
	}
	return row
}
