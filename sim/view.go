package sim

import (
	"math"
	"math/cmplx"
	"slices"

	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/results"
)

// VoltageRow is the voltage of one place: of a phase to ground, or, on a part that
// nothing grounds, between two phases.
type VoltageRow struct {
	Node, Phase string
	KV, PU      float64
	V120        float64 // V
	Angle       float64 // deg
}

// Voltages lists the voltages of the instant solved last, by node and phase.
func (e *Engine) Voltages() []VoltageRow {
	var out []VoltageRow
	for _, p := range results.Points(e.net) {
		v := e.between(p.U, p.W)
		pu := cmplx.Abs(v) / p.Base
		out = append(out, VoltageRow{Node: e.net.Model.Nodes[p.Node].Name, Phase: p.Phase, KV: cmplx.Abs(v) / 1000, PU: pu, V120: 120 * pu, Angle: cmplx.Phase(v) * 180 / math.Pi})
	}
	return out
}

// FlowRow is what one element carries at its from end, and what it loses.
type FlowRow struct {
	Kind, Name, From, To string
	Amperes              [feeder.PhaseCount]float64 // by phase; NaN where it has none
	KW, KVAR             float64                    // into its from end
	LossKW               float64
	Taps                 []int // of a regulator
}

// Flows lists sections, switches, transformers and regulators of the instant solved
// last, in the order of their tables.
func (e *Engine) Flows() []FlowRow {
	var out []FlowRow
	m := e.net.Model
	for _, h := range e.hops() {
		r := e.traceRow(h, h.a, h.b)
		f := FlowRow{Kind: r.Kind, Name: r.Name, From: r.From, To: r.To, LossKW: r.LossKW}
		for p := range f.Amperes {
			f.Amperes[p] = math.NaN()
			u := e.net.At[h.a][p]
			if u == network.Ground {
				continue
			}
			i, ok := e.entering(h, u)
			if !ok {
				continue
			}
			f.Amperes[p] = cmplx.Abs(i)
			s := e.state.V[u] * cmplx.Conj(i)
			f.KW += real(s) / 1000
			f.KVAR += imag(s) / 1000
		}
		if h.kind == network.Regulator {
			first := e.unitAt[h.index]
			f.Taps = append(f.Taps, e.state.Taps[first:first+len(m.Regulators[h.index].Units)]...)
		}
		out = append(out, f)
	}
	return out
}

// entering returns the current into an element at an unknown.
func (e *Engine) entering(h hop, u int32) (sum complex128, ok bool) {
	kinds := []network.Kind{h.kind}
	switch h.kind {
	case network.Transformer:
		kinds = append(kinds, network.TransformerNoLoad)
	case network.Regulator:
		kinds = []network.Kind{network.RegulatorSeries, network.RegulatorNoLoad}
	}
	for _, k := range kinds {
		for _, el := range e.net.ElementsOf(k, h.index) {
			for t, v := range e.net.Elements[el].Terminals {
				if v == u {
					sum += e.state.Flow[e.net.Offsets[el]+t]
					ok = true
				}
			}
		}
	}
	for k := range e.net.Couplings {
		c := &e.net.Couplings[k]
		if c.Kind != h.kind || c.Index != h.index {
			continue
		}
		for t, v := range c.Terminals {
			if v == u {
				sum += complex(c.Base[t]+c.Inverse[t]/e.ratio[k], 0) * e.state.Coupling[k]
				ok = true
			}
		}
	}
	return sum, ok
}

// Meter reads powers and losses of instants of this engine.
func (e *Engine) Meter() *results.Meter { return results.NewMeter(e.net) }

// ProfileFiles are the profile and weather files that the study was read from.
func (e *Engine) ProfileFiles() []string {
	files := slices.Clone(e.in.set.Files())
	if w := e.Study.Settings.Weather.File; w != "" && firstSolar(e.net.Model) != nil {
		files = append(files, w)
	}
	if e.in.meters != nil {
		files = append(files, e.in.meters.set.Files()...)
	}
	return files
}
