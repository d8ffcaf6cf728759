package sim

import (
	"math"
	"math/cmplx"

	"yearflow/devices"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

// battery is a storage unit in the run.
type battery struct {
	index      int // into Model.Batteries
	sheet      devices.Battery
	state      devices.BatteryState
	asked      float64 // kW that its dispatch asks for, positive delivered
	kW         float64 // kW that it delivers: its functions may take from that
	prescribed bool    // asked is given, for a single instant
	profile    int     // series of its profile, −1 none
	scale      float64 // kW per unit of the profile
	branches   []int   // injections
	inverter   *inverter
	exchanged  devices.Exchange

	// The flow that it follows, positive towards where it stands, and the batteries
	// behind the same place, each of which lowers it by what it delivers.
	watched []watchedPhase
	sign    float64
	behind  []bool  // by battery
	same    []bool  // by battery: follows the same place
	moved   float64 // kW, within the round at hand
}

// dispatchSettled is the power, kW, below which a battery that follows a flow is not
// moved again within one instant (the contract asks for 0.1 kW).
const dispatchSettled = 0.02

// dispatchRounds bounds the solutions of one instant that batteries ask for.
const dispatchRounds = 50

// wanted is the power that a battery's dispatch wants at an instant, kW; of one that
// follows a flow, what it may keep of the power that it has.
func (e *Engine) wanted(b *battery, now devices.Time) float64 {
	if b.prescribed {
		return b.asked
	}
	if len(b.watched) > 0 {
		return b.sheet.Allowed(b.state, b.asked)
	}
	r := devices.BatteryReading{}
	if b.profile >= 0 {
		r.Profile = e.in.values[b.profile] * b.scale
	}
	return b.sheet.Request(b.state, r, now)
}

// ask puts what a battery's dispatch wants into the solver's input.
func (e *Engine) ask(b *battery, now devices.Time) { e.put(b, e.wanted(b, now)) }

func (e *Engine) put(b *battery, kW float64) {
	b.asked = kW
	for _, j := range b.branches {
		e.input.Power[j] = complex(-kW*1000/float64(len(b.branches)), 0)
	}
}

// delivered is what a battery delivers in the solution at hand, kW.
func (e *Engine) delivered(b *battery) float64 {
	if b.inverter != nil {
		v := e.groupVoltage(b.inverter.group)
		p := b.inverter.law.output(b.asked, v).P
		if v < powerflow.Corner {
			p *= (v / powerflow.Corner) * (v / powerflow.Corner)
		}
		return p
	}
	for _, k := range b.branches {
		if e.branchVoltage(k) < powerflow.Corner {
			return real(e.state.Storage[b.index]) / 1000
		}
	}
	return b.asked
}

// follow reads the flows that batteries follow and sets what they ask for; it reports
// whether anything moved, so that the instant has to be solved again. Batteries take
// their turn in the order of the table, and each counts on what those before it have
// just moved behind the same place: two of them never answer the same power twice. Of
// those that follow the same place the first does all that it can and the next sees
// what is left, whatever they did before, so that they never work against each other.
func (e *Engine) follow(now devices.Time) bool {
	all := e.plants.batteries
	for _, b := range all {
		b.moved = 0
	}
	any := false
	for _, b := range all {
		if len(b.watched) == 0 || b.prescribed {
			continue
		}
		flow := b.sign * e.flowKW(b.watched)
		for j, o := range all {
			switch {
			case b.behind[j] && b.same[j] && j > b.index:
				flow += e.delivered(o)
			case b.behind[j]:
				flow -= o.moved
			}
		}
		kW := b.sheet.Request(b.state, devices.BatteryReading{Flow: flow, Present: e.delivered(b)}, now)
		if math.Abs(kW-b.asked) > dispatchSettled {
			b.moved, any = kW-b.asked, true
			e.put(b, kW)
		}
	}
	return any
}

// flowKW is the real power that enters watched phases.
func (e *Engine) flowKW(ws []watchedPhase) (kW float64) {
	for i := range ws {
		w := &ws[i]
		current := drawnAt(e, present{e}, w.parts)
		for _, f := range w.flows {
			current += e.state.Flow[f]
		}
		kW += real(e.state.V[w.unknown]*cmplx.Conj(current)) / 1000
	}
	return kW
}

// watchFlows finds what batteries that follow a flow measure, and which of them stand
// behind the same place. A section may be written either way round: the flow counts
// towards the side that no source stands on. In a loop it counts from from to to.
func (e *Engine) watchFlows() {
	m := e.net.Model
	for i, b := range e.plants.batteries {
		w := m.Batteries[i].Watched
		if w == nil {
			continue
		}
		b.watched = e.watch(w, nil)
		b.sign, b.behind, b.same = 1, make([]bool, len(e.plants.batteries)), make([]bool, len(e.plants.batteries))
		for j := range m.Batteries {
			o := m.Batteries[j].Watched
			b.same[j] = o != nil && o.Kind == w.Kind && o.Index == w.Index
		}
		from, to := ends(m, w)
		fed := e.fedWithout(w)
		switch {
		case fed[from] && fed[to]: // a loop: who stands behind it cannot be said
			continue
		case fed[to]:
			b.sign = -1
		}
		for j := range m.Batteries {
			b.behind[j] = !fed[m.Batteries[j].Node]
		}
		if !b.behind[i] {
			e.in.odd.Add(m.Batteries[i].At, "battery %q follows the flow through %s %q, which it does not stand behind: nothing that it does moves that flow, and it will run at its power or not at all",
				m.Batteries[i].Name, w.Kind, watchedName(m, w))
		}
	}
}

// fedWithout tells of each node whether a source reaches it without passing a watched
// element.
func (e *Engine) fedWithout(w *feeder.Watched) []bool {
	m := e.net.Model
	kind := map[string]network.Kind{"section": network.Section, "switch": network.Switch, "transformer": network.Transformer, "regulator": network.Regulator}[w.Kind]
	ways := make([][]int, len(m.Nodes))
	for _, h := range e.hops() {
		if h.kind != kind || h.index != w.Index {
			ways[h.a], ways[h.b] = append(ways[h.a], h.b), append(ways[h.b], h.a)
		}
	}
	fed := make([]bool, len(m.Nodes))
	var queue []int
	for _, s := range m.Sources {
		fed[s.Node] = true
		queue = append(queue, s.Node)
	}
	for ; len(queue) > 0; queue = queue[1:] {
		for _, n := range ways[queue[0]] {
			if !fed[n] {
				fed[n] = true
				queue = append(queue, n)
			}
		}
	}
	return fed
}

// ends are the nodes of a watched element.
func ends(m *feeder.Model, w *feeder.Watched) (from, to int) {
	switch w.Kind {
	case "section":
		return m.Sections[w.Index].From, m.Sections[w.Index].To
	case "transformer":
		return m.Transformers[w.Index].From, m.Transformers[w.Index].To
	case "regulator":
		return m.Regulators[w.Index].From, m.Regulators[w.Index].To
	}
	return m.Switches[w.Index].From, m.Switches[w.Index].To
}

func watchedName(m *feeder.Model, w *feeder.Watched) string {
	switch w.Kind {
	case "section":
		return m.Sections[w.Index].Name
	case "transformer":
		return m.Transformers[w.Index].Name
	case "regulator":
		return m.Regulators[w.Index].Name
	}
	return m.Switches[w.Index].Name
}
