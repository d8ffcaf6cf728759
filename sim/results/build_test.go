package results

import (
	"math"
	"math/cmplx"
	"testing"
	"time"

	"yearflow/sim/conductor"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
)

// tiny is a feeder with one of everything that is metered:
//
//	src ──line1── n1 ══reg══ n2 ──lat── n3 (A)
//	                │         ├── tx ──  low   (480 V, grounded)
//	               cap        └── dd ──  shop  (480 V, nothing grounds it)
type tiny struct {
	plan *Plan
	net  *network.Network
}

var abc = []feeder.Phase{feeder.A, feeder.B, feeder.C}

func unknown() float64 { return math.NaN() }

// lineMatrices is a line of 0.3 + j0.6 ohm/km self and j0.2 mutual, without charging.
func lineMatrices() conductor.Matrices {
	m := conductor.Matrices{N: 3}
	for i := range 3 {
		for j := range 3 {
			m.Z[i][j] = complex(0.1, 0.2)
		}
		m.Z[i][i] = complex(0.3, 0.6)
	}
	return m
}

func tinyModel() *feeder.Model {
	node := func(name string, kv float64, grounded bool, part int, phases ...feeder.Phase) feeder.Node {
		return feeder.Node{Name: name, Phases: phases, Nominal: kv, Grounded: grounded, Part: part, X: unknown(), Y: unknown()}
	}
	m := &feeder.Model{Frequency: 60}
	m.Nodes = []feeder.Node{
		node("low", 0.48, true, 1, abc...),
		node("n1", 12.47, true, 0, abc...),
		node("n2", 12.47, true, 0, abc...),
		node("n3", 12.47, true, 0, feeder.A),
		node("shop", 0.48, false, 2, abc...),
		node("src", 12.47, true, 0, abc...),
	}
	low, n1, n2, n3, shop, src := 0, 1, 2, 3, 4, 5
	m.Nodes[n1].X, m.Nodes[n1].Y = 1200, -35.5
	m.Nodes[low].HasLoad, m.Nodes[low].Customers = [feeder.PhaseCount]bool{true, true, true}, [feeder.PhaseCount]float64{12, 12, 12}
	m.Nodes[n3].HasLoad[0], m.Nodes[n3].Customers[0] = true, 7
	m.Nodes[shop].HasLoad, m.Nodes[shop].Customers = [feeder.PhaseCount]bool{true, true, false}, [feeder.PhaseCount]float64{1, 1, 0}
	m.Sources = []feeder.Source{{Node: src, Nominal: 12.47, Voltage: 1}}
	m.Constructions = []feeder.Construction{{Name: "pole", Kind: "matrix", Rating: 340, Matrices: lineMatrices()}}
	m.Sections = []feeder.Section{
		{Name: "line1", From: src, To: n1, Phases: []feeder.Phase{feeder.B, feeder.A, feeder.C}, LengthKM: 2, Rating: unknown(), Emergency: 400, Winter: unknown()},
		{Name: "lat", From: n2, To: n3, Phases: []feeder.Phase{feeder.A}, LengthKM: 0.5, Rating: 90, Emergency: unknown(), Winter: unknown()},
	}
	m.Transformers = []feeder.Transformer{
		{Name: "tx", From: n2, To: low, Phases: abc, KVA: 300, HighKV: 12.47, LowKV: 0.48, TapKV: 12.47, Connection: "Dyn1", R: 0.01, X: 0.04, NoLoadLoss: 600, Exciting: 0.01},
		{Name: "dd", From: n2, To: shop, Phases: abc, KVA: 150, HighKV: 12.47, LowKV: 0.48, TapKV: 12.47, Connection: "Dd0", R: 0.012, X: 0.03},
	}
	r := feeder.Regulator{Name: "reg", From: n1, To: n2, Phases: abc, PT: 60, CT: 100, Range: 0.1, Steps: 16, Rating: 100, NoLoadLoss: 200, LoadLoss: 300, Impedance: 0.005}
	for _, p := range abc {
		r.Units = append(r.Units, feeder.RegulatorUnit{Phase: p, Settings: &feeder.TapSettings{HighestTap: 16, LowestTap: -16}})
	}
	m.Regulators = []feeder.Regulator{r}
	m.Capacitors = []feeder.Capacitor{{Name: "cap", Node: n1, Phases: abc, KVAR: 300, NominalKV: 12.47, Closed: true}}
	zip := feeder.ZIP{PP: 1, QP: 1}
	m.Loads = []feeder.Load{
		{Name: "town", Node: low, Phases: abc, KW: 100, ZIP: zip, Customers: 12},
		{Name: "farm", Node: n3, Phases: []feeder.Phase{feeder.A}, KW: 20, ZIP: zip, Customers: 7},
		{Name: "press", Node: shop, Connection: feeder.Delta, Pairs: []feeder.Pair{{feeder.A, feeder.B}}, KW: 30, ZIP: zip, Customers: 1},
	}
	m.Generators = []feeder.Generator{{Name: "sun", Node: n1, Phases: abc, Kind: "solar", KVA: 50, KW: unknown(), PF: 1}}
	return m
}

// newTiny builds the feeder with a period of a zone's days.
func newTiny(t testing.TB, start, end time.Time, step time.Duration) *tiny {
	t.Helper()
	m := tinyModel()
	net, err := network.Build(m)
	if err != nil {
		t.Fatal(err)
	}
	set := &feeder.Settings{Title: "Tiny", Frequency: 60, ScaleLoad: 1, ScaleGeneration: 1,
		Period: feeder.Period{Start: start.UnixNano(), End: end.UnixNano(), Step: int64(step), Zone: start.Location()},
		Run:    feeder.RunSettings{Voltages: "auto"}}
	plan := &Plan{Model: m, Settings: set, Network: net, Case: "base"}
	for u, p := range abc {
		plan.TapNames = append(plan.TapNames, "reg."+p.String())
		plan.Devices = append(plan.Devices, Device{Kind: TapDevice, Name: "reg", Phase: p.String(), Unit: u, Units: []int{u}, Lowest: -16, Highest: 16})
	}
	plan.Devices = append(plan.Devices, Device{Kind: CapacitorDevice, Name: "cap"})
	return &tiny{plan, net}
}

// state makes an instant that fulfils the nodal equations: voltages are chosen as p.u.
// of the nodes (level, by node name; the regulator's load side follows from its taps),
// and loads, generation and the source take what the elements leave over.
func (t *tiny) state(level map[string]float64, taps [3]int, closed bool) *State {
	n, m := t.net, t.plan.Model
	s := &State{V: make([]complex128, len(n.Unknowns)), Flow: make([]complex128, n.Offsets[len(n.Elements)]),
		Coupling: make([]complex128, len(n.Couplings)), Source: make([][3]complex128, 1),
		Load: make([]complex128, len(m.Loads)), Generation: make([]complex128, len(m.Generators)),
		Taps: taps[:], Closed: []bool{closed}}
	for u, x := range n.Unknowns {
		if x.Node < 0 {
			continue
		}
		name := m.Nodes[x.Node].Name
		angle := -2 * math.Pi / 3 * float64(x.Phase)
		if name == "low" {
			angle -= math.Pi / 6
		}
		pu := 1.0
		if v, ok := level[name]; ok {
			pu = v
		}
		pu += level[name+"."+x.Phase.String()]
		s.V[u] = cmplx.Rect(x.Nominal*pu, angle-level[name+" behind"])
	}
	t.holdRegulator(s)
	sums := t.flows(s)
	t.meet(s, sums)
	return s
}

// holdRegulator sets the inner points before the regulator's series part by its ratios.
func (t *tiny) holdRegulator(s *State) {
	for _, c := range t.net.Couplings {
		ratio := 1 + 0.1/16*float64(s.Taps[c.Unit])
		s.V[c.Terminals[1]] = s.V[c.Terminals[0]] * complex(ratio, 0)
	}
}

// flows computes Y·V of every element and returns the sum of currents out of each
// unknown.
func (t *tiny) flows(s *State) []complex128 {
	sums := make([]complex128, len(t.net.Unknowns))
	for e := range t.net.Elements {
		el := &t.net.Elements[e]
		if el.Kind == network.Capacitor && !s.Closed[el.Index] {
			continue
		}
		k := len(el.Terminals)
		for a := range k {
			var i complex128
			for b := range k {
				i += el.Y[a*k+b] * s.V[el.Terminals[b]]
			}
			s.Flow[t.net.Offsets[e]+a] = i
			if el.Kind != network.Reference {
				sums[el.Terminals[a]] += i
			}
		}
	}
	return sums
}

// meet gives couplings, source, loads and the generator the currents that are left.
func (t *tiny) meet(s *State, sums []complex128) {
	for k, c := range t.net.Couplings {
		ratio := complex(1+0.1/16*float64(s.Taps[c.Unit]), 0)
		s.Coupling[k] = sums[c.Terminals[1]] * ratio // what the inner point needs
		sums[c.Terminals[0]] += s.Coupling[k]
		sums[c.Terminals[1]] = 0
	}
	left := func(node string) (va complex128) {
		for u, x := range t.net.Unknowns {
			if x.Node >= 0 && t.plan.Model.Nodes[x.Node].Name == node {
				va -= s.V[u] * cmplx.Conj(sums[u])
			}
		}
		return va
	}
	for p := range 3 {
		s.Source[0][p] = sums[t.net.At[5][p]]
	}
	s.Load[0], s.Load[1], s.Load[2] = left("low"), left("n3"), left("shop")
	// n2 has no load of its own: what is left there is booked with the generator,
	// which stands for anything that balances.
	s.Generation[0] = -left("n1") - left("n2")
}
