// Package network turns a checked feeder into the nodal equations of its phases.
//
// A network is made of two things only. An Element is linear: a few terminals and
// the small admittance matrix between them (a section, a transformer bank, a
// capacitor, the series part of a regulator). A Coupling is ideal: a linear
// relation between terminal voltages that holds exactly (a regulator unit at its
// tap, a closed switch). Stiff voltages are Fixed. Everything the program solves,
// meters or reports is read from these three.
package network

import (
	"fmt"
	"math/cmplx"
	"sort"

	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// Kind tells which table an Element or a Coupling comes from.
type Kind uint8

// The kinds of element.
const (
	Section Kind = iota
	Transformer
	TransformerNoLoad
	RegulatorSeries
	RegulatorNoLoad
	Capacitor
	SourceImpedance
	Reference // ties the common mode of a part that nothing grounds
	Regulator // couplings only
	Switch    // couplings only
)

var kindNames = [...]string{"section", "transformer", "transformer no-load", "regulator", "regulator no-load", "capacitor", "source", "reference", "regulator", "switch"}

// String returns the name of the kind in the words of the results.
func (k Kind) String() string {
	if int(k) < len(kindNames) {
		return kindNames[k]
	}
	return fmt.Sprintf("Kind(%d)", uint8(k))
}

const sqrt3 = 1.7320508075688772935274463415058723669428

// Ground stands for the earth in a list of terminals.
const Ground = int32(-1)

// Unknown is one voltage of the nodal equations, in volts to ground.
type Unknown struct {
	Node    int          // index into Model.Nodes; −1 for an inner point
	Phase   feeder.Phase // of a node
	Nominal float64      // V, line to neutral
	Name    string       // node.phase, or what the inner point is
}

// Element is a linear element: the currents into it are Y·V over its terminals.
// The first From terminals are those of its from side, the next To those of its
// to side, any others are inner points.
type Element struct {
	Kind      Kind
	Index     int // into the model's list of that kind
	Terminals []int32
	From, To  int
	Y         []complex128 // S, row by row, len(Terminals)²
}

// Coupling is one relation Σ (Base[k] + Inverse[k]/ratio)·V[Terminals[k]] = 0.
// The current that it draws at terminal k is the same coefficient times the
// coupling's own current, so that it neither takes nor gives power.
type Coupling struct {
	Kind      Kind
	Index     int // into the model's list of that kind
	Unit      int // of a regulator; −1 where the ratio is 1
	Terminals []int32
	Base      []float64
	Inverse   []float64
}

// Fixed is a voltage that a source holds.
type Fixed struct {
	Unknown int32
	Source  int
	Phase   feeder.Phase
}

// Network is the admittance model of a feeder. It does not change while a study
// runs; tap ratios and capacitor positions are given to the solver.
type Network struct {
	Model     *feeder.Model
	Unknowns  []Unknown
	At        [][feeder.PhaseCount]int32 // node, phase → unknown; Ground where the node lacks the phase
	Elements  []Element
	Couplings []Coupling
	Fixed     []Fixed
	Offsets   []int // of an element's terminals in a list of all terminals; one more than Elements

	// of holds the elements that belong to one row of a table, by kind and index.
	of map[key][]int
}

type key struct {
	kind  Kind
	index int
}

// ElementsOf returns the positions in Elements of those of one kind and index.
func (n *Network) ElementsOf(k Kind, index int) []int { return n.of[key{k, index}] }

// Build makes the network of a checked feeder. An error is a tables.Faults.
func Build(m *feeder.Model) (*Network, error) {
	n := &Network{Model: m, At: make([][feeder.PhaseCount]int32, len(m.Nodes)), of: map[key][]int{}}
	var faults tables.Faults
	for i := range m.Nodes {
		n.At[i] = [feeder.PhaseCount]int32{Ground, Ground, Ground, Ground, Ground}
		for _, p := range m.Nodes[i].Phases {
			n.At[i][p] = n.add(Unknown{i, p, 1000 * m.Nodes[i].ToGround(p), m.Nodes[i].Name + "." + p.String()})
		}
	}
	// Everything is stamped in the order of names, so that the order of rows moves
	// no rounding.
	n.sources()
	for _, i := range byName(len(m.Sections), func(i int) string { return m.Sections[i].Name }) {
		if err := n.section(i); err != nil {
			faults.Add(m.Sections[i].At, "%v", err)
		}
	}
	for _, i := range byName(len(m.Transformers), func(i int) string { return m.Transformers[i].Name }) {
		if err := n.transformer(i); err != nil {
			faults.Add(m.Transformers[i].At, "%v", err)
		}
	}
	for _, i := range byName(len(m.Regulators), func(i int) string { return m.Regulators[i].Name }) {
		n.regulator(i)
	}
	for _, i := range byName(len(m.Switches), func(i int) string { return m.Switches[i].Name }) {
		n.closedSwitch(i)
	}
	for _, i := range byName(len(m.Capacitors), func(i int) string { return m.Capacitors[i].Name }) {
		n.capacitor(i)
	}
	n.references()
	n.Offsets = append(n.Offsets, 0)
	for _, e := range n.Elements {
		n.Offsets = append(n.Offsets, n.Offsets[len(n.Offsets)-1]+len(e.Terminals))
	}
	return n, faults.Err()
}

func byName(count int, name func(int) string) []int {
	order := make([]int, count)
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(a, b int) bool { return name(order[a]) < name(order[b]) })
	return order
}

func (n *Network) add(u Unknown) int32 {
	n.Unknowns = append(n.Unknowns, u)
	return int32(len(n.Unknowns) - 1)
}

func (n *Network) element(e Element) {
	k := key{e.Kind, e.Index}
	n.of[k] = append(n.of[k], len(n.Elements))
	n.Elements = append(n.Elements, e)
}

func (n *Network) sources() {
	for i, s := range n.Model.Sources {
		at := n.At[s.Node]
		if s.Stiff() || s.AtBus {
			for _, p := range n.Model.Nodes[s.Node].Phases {
				n.Fixed = append(n.Fixed, Fixed{at[p], i, p})
			}
			continue
		}
		// Sequence values to phase values: self (z0 + 2 z1)/3, mutual (z0 − z1)/3
		// (Kersting, Distribution System Modeling and Analysis, ch. 4).
		zs, zm := (s.Z0+2*s.Z1)/3, (s.Z0-s.Z1)/3
		ph := n.Model.Nodes[s.Node].Phases
		k := len(ph)
		z := make([]complex128, k*k)
		t := make([]int32, 2*k)
		for a, p := range ph {
			u := n.Unknowns[at[p]]
			u.Node, u.Name = -1, "source behind "+u.Name
			t[a] = n.add(u)
			t[k+a] = at[p]
			n.Fixed = append(n.Fixed, Fixed{t[a], i, p})
			for b := range ph {
				z[a*k+b] = zm
			}
			z[a*k+a] = zs
		}
		y, ok := invert(z, k)
		if !ok {
			y = make([]complex128, k*k)
			for a := range k {
				y[a*k+a] = 1 / s.Z1
			}
		}
		n.element(Element{SourceImpedance, i, t, k, k, series(y, k)})
	}
}

// series returns the 2k × 2k matrix of a k-phase series admittance.
func series(y []complex128, k int) []complex128 {
	w := 2 * k
	out := make([]complex128, w*w)
	for a := range k {
		for b := range k {
			v := y[a*k+b]
			out[a*w+b], out[(k+a)*w+k+b] = v, v
			out[a*w+k+b], out[(k+a)*w+b] = -v, -v
		}
	}
	return out
}

func (n *Network) section(i int) error {
	s := &n.Model.Sections[i]
	m := &n.Model.Constructions[s.Construction].Matrices
	k := len(s.Phases)
	z := make([]complex128, k*k)
	t := make([]int32, 2*k)
	for a, p := range s.Phases {
		t[a], t[k+a] = n.At[s.From][p], n.At[s.To][p]
		for b := range k {
			z[a*k+b] = m.Z[a][b] * complex(s.LengthKM, 0)
		}
	}
	y, ok := invert(z, k)
	if !ok {
		return fmt.Errorf("section %q: the impedance matrix of construction %q has no inverse: look at its impedances and at the length", s.Name, n.Model.Constructions[s.Construction].Name)
	}
	full := series(y, k)
	w := 2 * k
	for a := range k {
		for b := range k {
			half := complex(0, m.B[a][b]*s.LengthKM/2)
			full[a*w+b] += half
			full[(k+a)*w+k+b] += half
		}
	}
	n.element(Element{Section, i, t, k, k, full})
	return nil
}

func (n *Network) closedSwitch(i int) {
	s := &n.Model.Switches[i]
	if !s.Closed {
		return
	}
	for _, p := range s.Phases {
		n.Couplings = append(n.Couplings, Coupling{Switch, i, -1,
			[]int32{n.At[s.From][p], n.At[s.To][p]}, []float64{1, -1}, []float64{0, 0}})
	}
}

// capacitor stamps the susceptance B = Q/V² of each unit, with the sign of an
// admittance: a capacitor's is +jB.
func (n *Network) capacitor(i int) {
	c := &n.Model.Capacitors[i]
	at := n.At[c.Node]
	v := c.NominalKV * 1000
	if c.Connection == feeder.Delta {
		k := len(c.Pairs)
		b := complex(0, c.KVAR*1000/float64(k)/(v*v))
		for _, p := range c.Pairs {
			n.element(Element{Capacitor, i, []int32{at[p[0]], at[p[1]]}, 2, 0, []complex128{b, -b, -b, b}})
		}
		return
	}
	k := len(c.Phases)
	b := complex(0, c.KVAR*1000/float64(k)/(v*v/3))
	for _, p := range c.Phases {
		n.element(Element{Capacitor, i, []int32{at[p]}, 1, 0, []complex128{b}})
	}
}

// references ties the common mode of every part that nothing grounds and that no
// charging refers to earth. The tie is y·u·uᵀ over the bank's terminals, u all
// ones: the currents of such a part add up to nothing, so y·(ΣV) = 0, ΣV = 0 and
// the tie carries no current. It is the limit of an equal, vanishing leak on each
// terminal, at any y.
func (n *Network) references() {
	m := n.Model
	done := map[int]bool{}
	for i := range m.Nodes {
		if m.Nodes[i].Grounded {
			done[m.Nodes[i].Part] = true
		}
	}
	for _, e := range n.Elements {
		if e.Kind == Section && charged(e) {
			done[m.Nodes[n.Unknowns[e.Terminals[0]].Node].Part] = true
		}
	}
	tie := func(node int, y float64, index int) {
		part := m.Nodes[node].Part
		if done[part] {
			return
		}
		done[part] = true
		var t []int32
		for _, p := range m.Nodes[node].Phases {
			t = append(t, n.At[node][p])
		}
		yy := make([]complex128, len(t)*len(t))
		for k := range yy {
			yy[k] = complex(y, 0)
		}
		n.element(Element{Reference, index, t, len(t), 0, yy})
	}
	for _, i := range byName(len(m.Transformers), func(i int) string { return m.Transformers[i].Name }) {
		t := &m.Transformers[i]
		y := t.KVA * 1000 / (t.LowKV * t.LowKV * 1e6)
		tie(t.To, y, i)
		tie(t.From, y*t.LowKV*t.LowKV/(t.HighKV*t.HighKV), i)
	}
}

// charged tells whether a section has shunt admittance: its rows then do not add
// up to nothing.
func charged(e Element) bool {
	w := len(e.Terminals)
	for a := range w {
		var sum complex128
		for b := range w {
			sum += e.Y[a*w+b]
		}
		if cmplx.Abs(sum) > 1e-12*cmplx.Abs(e.Y[a*w+a]) {
			return true
		}
	}
	return false
}

// invert returns the inverse of the k × k matrix a, row by row, by Gauss-Jordan
// elimination with row exchange, and false where it has none.
func invert(a []complex128, k int) ([]complex128, bool) {
	w := append([]complex128(nil), a...)
	inv := make([]complex128, k*k)
	for i := range k {
		inv[i*k+i] = 1
	}
	for c := range k {
		best := c
		for r := c; r < k; r++ {
			if cmplx.Abs(w[r*k+c]) > cmplx.Abs(w[best*k+c]) {
				best = r
			}
		}
		if w[best*k+c] == 0 || cmplx.IsNaN(w[best*k+c]) || cmplx.IsInf(w[best*k+c]) {
			return nil, false
		}
		for j := range k {
			w[c*k+j], w[best*k+j] = w[best*k+j], w[c*k+j]
			inv[c*k+j], inv[best*k+j] = inv[best*k+j], inv[c*k+j]
		}
		d := 1 / w[c*k+c]
		for j := range k {
			w[c*k+j] *= d
			inv[c*k+j] *= d
		}
		for r := range k {
			if r == c {
				continue
			}
			f := w[r*k+c]
			for j := range k {
				w[r*k+j] -= f * w[c*k+j]
				inv[r*k+j] -= f * inv[c*k+j]
			}
		}
	}
	return inv, true
}
