package results

import (
	"math"
	"math/cmplx"

	"yearflow/sim/feeder"
	"yearflow/sim/network"
)

// LossKind tells the kinds of losses apart; their order is that of the files.
type LossKind uint8

// The kinds of losses.
const (
	LineLoss LossKind = iota
	TransformerLoadLoss
	TransformerNoLoadLoss
	RegulatorLoss
	lossKinds = 4
)

// String returns the kind in the words of losses.csv.
func (k LossKind) String() string {
	return [...]string{"line", "transformer load", "transformer no-load", "regulator"}[k]
}

// lossRow names a row of losses.csv.
type lossRow struct {
	element string
	kind    LossKind
}

// Meter reads powers, losses, voltages and loading from solved instants of one
// network. It does not change and may be shared.
type Meter struct {
	Points []Point

	net      *network.Network
	losses   []lossRow
	loading  []loadingRow
	parts    []part // elements that lose power
	caps     []part
	sources  []sourcePhase
	three    [][feeder.PhaseCount]int32 // unknowns of the three-phase nodes
	threeAt  []int                      // their nodes
	tapsFrom []int                      // of a regulator's units in State.Taps
}

// part is an element that is summed into a row.
type part struct {
	terminals []int32
	flow      int // of its first terminal in State.Flow
	row       int
	kind      LossKind
}

type sourcePhase struct {
	source  int
	phase   feeder.Phase
	unknown int32
}

// Reading is what a Meter read at one instant. Powers are VA.
type Reading struct {
	Source, Load, Generation complex128
	Capacitors               complex128 // delivered: positive reactive power
	Losses                   complex128
	ByKind                   [lossKinds]complex128
	SourcePhase              [3]complex128
	SourceCurrent            [3]float64 // A; of several sources the sum of magnitudes
	PU                       []float64  // by Meter.Points
	Lowest, Highest          int        // into Meter.Points; −1 where there is none
	Unbalance                float64    // %, the largest; NaN without three-phase nodes
	UnbalanceAt              int        // node; −1
	NegativeSequence         float64    // %, the largest; NaN without three-phase nodes

	loss    []float64 // W, by Meter.losses
	loading []float64 // A or kVA, by Meter.loading
}

// NewMeter prepares the reading of a network.
func NewMeter(n *network.Network) *Meter {
	m := &Meter{Points: Points(n), net: n, tapsFrom: tapOffsets(n.Model)}
	rows := m.nameLosses()
	for e := range n.Elements {
		el := &n.Elements[e]
		p := part{terminals: el.Terminals, flow: n.Offsets[e]}
		switch el.Kind {
		case network.Section:
			p.row, p.kind = rows[LineLoss][el.Index], LineLoss
		case network.Transformer:
			p.row, p.kind = rows[TransformerLoadLoss][el.Index], TransformerLoadLoss
		case network.TransformerNoLoad:
			p.row, p.kind = rows[TransformerNoLoadLoss][el.Index], TransformerNoLoadLoss
		case network.RegulatorSeries, network.RegulatorNoLoad:
			p.row, p.kind = rows[RegulatorLoss][el.Index], RegulatorLoss
		case network.Capacitor:
			m.caps = append(m.caps, p)
			continue
		default:
			// The source's own impedance lies before the node where its power is
			// measured; a reference carries no current.
			continue
		}
		m.parts = append(m.parts, p)
	}
	for i := range n.Model.Sources {
		s := &n.Model.Sources[i]
		for _, p := range n.Model.Nodes[s.Node].Phases {
			m.sources = append(m.sources, sourcePhase{i, p, n.At[s.Node][p]})
		}
	}
	for i := range n.Model.Nodes {
		if len(n.Model.Nodes[i].Phases) == 3 {
			m.three = append(m.three, n.At[i])
			m.threeAt = append(m.threeAt, i)
		}
	}
	m.nameLoading()
	return m
}

func tapOffsets(m *feeder.Model) []int {
	at := make([]int, len(m.Regulators)+1)
	for i := range m.Regulators {
		at[i+1] = at[i] + len(m.Regulators[i].Units)
	}
	return at
}

// nameLosses lists the rows of losses.csv in the order of the tables: sections,
// transformers (load, then no-load), regulators; and returns their places by kind
// and index.
func (m *Meter) nameLosses() (rows [lossKinds][]int) {
	model := m.net.Model
	add := func(kind LossKind, name string) {
		rows[kind] = append(rows[kind], len(m.losses))
		m.losses = append(m.losses, lossRow{name, kind})
	}
	for i := range model.Sections {
		add(LineLoss, model.Sections[i].Name)
	}
	for i := range model.Transformers {
		add(TransformerLoadLoss, model.Transformers[i].Name)
		add(TransformerNoLoadLoss, model.Transformers[i].Name)
	}
	for i := range model.Regulators {
		add(RegulatorLoss, model.Regulators[i].Name)
	}
	return rows
}

// NewReading makes a reading that Read can fill.
func (m *Meter) NewReading() *Reading {
	return &Reading{
		PU:      make([]float64, len(m.Points)),
		loss:    make([]float64, len(m.losses)),
		loading: make([]float64, len(m.loading)),
	}
}

// Read fills r from a solved instant, without allocation. The loss of an element is
//
//	S = Σ V·conj(I)
//
// over its terminals, I being the current it takes in. An ideal coupling loses
// nothing by its definition.
func (m *Meter) Read(s *State, r *Reading) {
	m.readPowers(s, r)
	m.readVoltages(s, r)
	m.readUnbalance(s, r)
	m.readLoading(s, r)
}

// Balance returns how far an instant is from source + generation + capacitors =
// load + losses, in W and var, and the sum of the apparent powers that it is to be
// compared with.
func (m *Meter) Balance(s *State) (p, q, scale float64) {
	r := Reading{loss: make([]float64, len(m.losses))}
	m.readPowers(s, &r)
	return r.Balance()
}

// Balance is the Balance of the instant that was read.
func (r *Reading) Balance() (p, q, scale float64) {
	d := r.Source + r.Generation + r.Capacitors - r.Load - r.Losses
	for _, x := range [...]complex128{r.Source, r.Generation, r.Capacitors, r.Load, r.Losses} {
		scale += cmplx.Abs(x)
	}
	return real(d), imag(d), scale
}

func (m *Meter) readPowers(s *State, r *Reading) {
	r.Source, r.Load, r.Generation, r.Capacitors, r.Losses = 0, 0, 0, 0, 0
	r.ByKind = [lossKinds]complex128{}
	r.SourcePhase, r.SourceCurrent = [3]complex128{}, [3]float64{}
	clear(r.loss)
	for i := range m.parts {
		p := &m.parts[i]
		va := p.power(s)
		r.loss[p.row] += real(va)
		r.ByKind[p.kind] += va
	}
	for _, va := range r.ByKind {
		r.Losses += va
	}
	for i := range m.caps {
		r.Capacitors -= m.caps[i].power(s)
	}
	for _, x := range m.sources {
		i := s.Source[x.source][x.phase]
		va := apparent(s.V[x.unknown], i)
		r.Source += va
		r.SourcePhase[x.phase] += va
		r.SourceCurrent[x.phase] += magnitude(i)
	}
	for _, va := range s.Load {
		r.Load += va
	}
	for _, va := range s.Generation {
		r.Generation += va
	}
	for _, va := range s.Storage {
		if real(va) >= 0 {
			r.Generation += va
		} else {
			r.Load -= va
		}
	}
	for _, va := range s.Charging {
		r.Load += va
	}
}

// apparent is V·conj(I), VA.
func apparent(v, i complex128) complex128 {
	return complex(float64(real(v)*real(i))+float64(imag(v)*imag(i)), float64(imag(v)*real(i))-float64(real(v)*imag(i)))
}

// power returns Σ V·conj(I) over an element's terminals, VA.
func (p *part) power(s *State) (sum complex128) {
	flow := s.Flow[p.flow : p.flow+len(p.terminals)]
	for k, t := range p.terminals {
		if t >= 0 {
			sum += apparent(s.V[t], flow[k])
		}
	}
	return sum
}

// magnitude is |z| without the care for overflow of math.Hypot: volts and amperes
// are far from it. Conversions round the products, as package vector does, so that a
// value is the same whichever way it was read.
func magnitude(z complex128) float64 {
	return math.Sqrt(float64(real(z)*real(z)) + float64(imag(z)*imag(z)))
}

func (m *Meter) readVoltages(s *State, r *Reading) {
	r.Lowest, r.Highest = -1, -1
	low, high := math.Inf(1), math.Inf(-1)
	for i := range m.Points {
		v := m.Points[i].PU(s.V)
		r.PU[i] = v
		if v < low {
			low, r.Lowest = v, i
		}
		if v > high {
			high, r.Highest = v, i
		}
	}
}

// readUnbalance finds the largest unbalance, the largest deviation of the
// line-to-line magnitudes from their mean over that mean (NEMA MG 1), and the
// largest |V2|/|V1|, over the three-phase nodes.
func (m *Meter) readUnbalance(s *State, r *Reading) {
	r.Unbalance, r.UnbalanceAt, r.NegativeSequence = math.NaN(), -1, math.NaN()
	worst, ratio := -1.0, -1.0
	for k, u := range m.three {
		a, b, c := s.V[u[0]], s.V[u[1]], s.V[u[2]]
		d, ok := unbalance(a, b, c)
		if !ok {
			continue
		}
		if d > worst {
			worst, r.UnbalanceAt = d, m.threeAt[k]
		}
		if q, ok := sequences(a, b, c); ok {
			ratio = max(ratio, q)
		}
	}
	if worst >= 0 {
		r.Unbalance = 100 * worst
	}
	if ratio >= 0 {
		r.NegativeSequence = 100 * ratio
	}
}

// unbalance is that of three voltages to ground; there is none without voltages.
func unbalance(a, b, c complex128) (float64, bool) {
	ab, bc, ca := magnitude(a-b), magnitude(b-c), magnitude(c-a)
	mean := (ab + bc + ca) / 3
	if mean <= 0 {
		return 0, false
	}
	return max(math.Abs(ab-mean), math.Abs(bc-mean), math.Abs(ca-mean)) / mean, true
}

// sequences is |V2|/|V1| of three voltages; there is none without a positive sequence.
func sequences(a, b, c complex128) (float64, bool) {
	const re, im = -0.5, 0.86602540378443864676372317075293618 // 1∠120°
	// b·a + c·a² and b·a² + c·a share the sum and the difference of b and c.
	sum, dif := b+c, b-c
	half := complex(real(a)+re*real(sum), imag(a)+re*imag(sum))
	turn := complex(-im*imag(dif), im*real(dif))
	v1, v2 := magnitude(half+turn), magnitude(half-turn)
	return v2 / v1, v1 > 0
}
