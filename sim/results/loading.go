package results

import (
	"math"

	"yearflow/sim/feeder"
	"yearflow/sim/network"
)

// loadingRow is a row of loading.csv: a phase of a section, switch or regulator in
// A, or a transformer bank in kVA.
type loadingRow struct {
	element           string
	phase             string
	rating, emergency float64 // NaN, or nothing: unknown

	kind     network.Kind
	from, to int // places in State.Flow of the phase at both ends
	coupling int // of a switch or a regulator
	ratioOf  int // position in State.Taps; −1: ratio 1
	reg      *feeder.Regulator
	flows    *endFlow // of a transformer
}

// nameLoading lists the rows of loading.csv in the order of the tables: sections,
// switches that are closed, transformers, regulators. A current is the larger one
// of both ends (of a regulator the current of either winding), a transformer's
// loading the apparent power of the bank at its high side.
func (m *Meter) nameLoading() {
	model := m.net.Model
	for i := range model.Sections {
		m.sectionLoading(i)
	}
	for i := range model.Switches {
		s := &model.Switches[i]
		m.couplingLoading(network.Switch, i, loadingRow{element: s.Name, rating: s.Rating, emergency: math.NaN()}, nil)
	}
	for i := range model.Transformers {
		t := &model.Transformers[i]
		m.loading = append(m.loading, loadingRow{element: t.Name, rating: t.KVA, emergency: math.NaN(),
			kind: network.Transformer, flows: m.transformerFlow(i)})
	}
	for i := range model.Regulators {
		r := &model.Regulators[i]
		m.couplingLoading(network.Regulator, i, loadingRow{element: r.Name, rating: r.Rating, emergency: math.NaN()}, r)
	}
}

func (m *Meter) sectionLoading(i int) {
	s := &m.net.Model.Sections[i]
	row := loadingRow{element: s.Name, rating: s.Rating, emergency: s.Emergency, kind: network.Section, coupling: -1, ratioOf: -1}
	if feeder.Unknown(row.rating) && s.Construction < len(m.net.Model.Constructions) {
		row.rating = m.net.Model.Constructions[s.Construction].Rating
	}
	for _, e := range m.net.ElementsOf(network.Section, i) {
		el := &m.net.Elements[e]
		for _, p := range [...]feeder.Phase{feeder.A, feeder.B, feeder.C, feeder.Leg1, feeder.Leg2} {
			for k := range el.From {
				if m.net.Unknowns[el.Terminals[k]].Phase == p {
					row.phase = p.String()
					row.from, row.to = m.net.Offsets[e]+k, m.net.Offsets[e]+el.From+k
					m.loading = append(m.loading, row)
				}
			}
		}
	}
}

// couplingLoading adds a row for each phase of a switch or a regulator, which has
// one coupling for each, the phase's terminal at the from side first.
func (m *Meter) couplingLoading(kind network.Kind, index int, row loadingRow, r *feeder.Regulator) {
	row.kind, row.reg = kind, r
	for _, p := range [...]feeder.Phase{feeder.A, feeder.B, feeder.C, feeder.Leg1, feeder.Leg2} {
		for c := range m.net.Couplings {
			co := &m.net.Couplings[c]
			if co.Kind != kind || co.Index != index || m.net.Unknowns[co.Terminals[0]].Phase != p {
				continue
			}
			row.phase, row.coupling, row.ratioOf = p.String(), c, -1
			if co.Unit >= 0 {
				row.ratioOf = m.tapsFrom[index] + co.Unit
			}
			m.loading = append(m.loading, row)
		}
	}
}

func (m *Meter) readLoading(s *State, r *Reading) {
	for i := range m.loading {
		row := &m.loading[i]
		switch row.kind {
		case network.Section:
			r.loading[i] = max(magnitude(s.Flow[row.from]), magnitude(s.Flow[row.to]))
		case network.Transformer:
			r.loading[i] = magnitude(row.flows.power(s)) / 1000
		default:
			a := magnitude(s.Coupling[row.coupling])
			if row.ratioOf >= 0 {
				a = max(a, a/ratioOf(row.reg, s.Taps[row.ratioOf]))
			}
			r.loading[i] = a
		}
	}
}

// ratioOf returns load-side over source-side voltage of a regulator at a tap:
// 1 + range/steps·t for type A, 1/(1 − range/steps·t) for type B.
func ratioOf(r *feeder.Regulator, tap int) float64 {
	step := r.Range / float64(r.Steps) * float64(tap)
	if r.TypeB {
		return 1 / (1 - step)
	}
	return 1 + step
}

// endFlow measures what an element takes in at its from side.
type endFlow struct {
	name   string
	phases []phaseFlow
}

// phaseFlow sums the currents of one phase at an end: of elements, and of couplings.
type phaseFlow struct {
	phase     feeder.Phase
	unknown   int32
	flows     []int
	couplings []int
}

func (f *phaseFlow) current(s *State) complex128 {
	var i complex128
	for _, k := range f.flows {
		i += s.Flow[k]
	}
	for _, k := range f.couplings {
		i += s.Coupling[k]
	}
	return i
}

func (e *endFlow) power(s *State) complex128 {
	var re, im float64
	for k := range e.phases {
		v, i := s.V[e.phases[k].unknown], e.phases[k].current(s)
		re += real(v)*real(i) + imag(v)*imag(i)
		im += imag(v)*real(i) - real(v)*imag(i)
	}
	return complex(re, im)
}

// newEndFlow gathers the from side of an element: the parts of the given kinds, and
// couplings whose first terminal stands there.
func (m *Meter) newEndFlow(name string, node, index int, kinds ...network.Kind) *endFlow {
	e := &endFlow{name: name}
	for _, p := range m.net.Model.Nodes[node].Phases {
		f := phaseFlow{phase: p, unknown: m.net.At[node][p]}
		for _, kind := range kinds {
			for _, i := range m.net.ElementsOf(kind, index) {
				el := &m.net.Elements[i]
				for k := range el.From {
					if el.Terminals[k] == f.unknown {
						f.flows = append(f.flows, m.net.Offsets[i]+k)
					}
				}
			}
			for c := range m.net.Couplings {
				co := &m.net.Couplings[c]
				if co.Kind == kind && co.Index == index && co.Terminals[0] == f.unknown {
					f.couplings = append(f.couplings, c)
				}
			}
		}
		if len(f.flows)+len(f.couplings) > 0 {
			e.phases = append(e.phases, f)
		}
	}
	return e
}

func (m *Meter) transformerFlow(i int) *endFlow {
	t := &m.net.Model.Transformers[i]
	return m.newEndFlow(t.Name, t.From, i, network.Transformer, network.TransformerNoLoad)
}

func (m *Meter) regulatorFlow(i int) *endFlow {
	r := &m.net.Model.Regulators[i]
	return m.newEndFlow(r.Name, r.From, i, network.Regulator, network.RegulatorNoLoad)
}

// flowOf finds the element of a name that flows can be logged of: a section, a
// transformer, a regulator or a switch, in this order.
func (m *Meter) flowOf(name string) (*endFlow, bool) {
	model := m.net.Model
	for i := range model.Sections {
		if s := &model.Sections[i]; s.Name == name {
			return m.newEndFlow(name, s.From, i, network.Section), true
		}
	}
	for i := range model.Transformers {
		if model.Transformers[i].Name == name {
			return m.transformerFlow(i), true
		}
	}
	for i := range model.Regulators {
		if r := &model.Regulators[i]; r.Name == name {
			return m.regulatorFlow(i), true
		}
	}
	for i := range model.Switches {
		if s := &model.Switches[i]; s.Name == name {
			return m.newEndFlow(name, s.From, i, network.Switch), true
		}
	}
	return nil, false
}
