package sim

import (
	"math"

	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/results"
)

// The rule of PhaseSwaps. Compared are the changes from one sample to the next, since
// the day's course and the source are shared by all phases and would make any two
// voltages alike.
const (
	swapSamples = 200  // changes that are needed
	swapMargin  = 0.1  // by which the correlation with the other phase is higher
	swapLeast   = 0.3  // a weaker likeness is no advice
	swapZ       = 3.29 // one in a thousand by chance, two-sided
)

// swapWatch follows one measured voltage and the phases that it may be of.
type swapWatch struct {
	point  int // of Measured.points
	own    int // of candidates
	node   int
	phases []feeder.Phase
	at     [][]voltagePoint

	sum, open []float64 // ∫ dt over the step, over the sample
	last      []float64 // of the sample before
	before    float64   // measured
	known     bool
	pairs     []comoments
}

// comoments are the running sums of a correlation, by Welford's recurrence (B. P.
// Welford, Technometrics 4 (1962) 419).
type comoments struct {
	n                int
	mx, my           float64
	xx, yy, together float64
}

func (c *comoments) add(x, y float64) {
	c.n++
	dx, dy := x-c.mx, y-c.my
	c.mx += dx / float64(c.n)
	c.my += dy / float64(c.n)
	c.xx += dx * (x - c.mx)
	c.yy += dy * (y - c.my)
	c.together += dx * (y - c.my)
}

// correlation is Pearson's; 0 where one of the two never changes.
func (c *comoments) correlation() float64 {
	if !(c.xx > 0) || !(c.yy > 0) {
		return 0
	}
	return c.together / math.Sqrt(c.xx*c.yy)
}

// swapWatches finds the measured voltages that name one phase, and the phases they are
// held against: those of the node; of a node with one phase, or behind a single-phase
// transformer, those of the nearest place towards the source that has more.
func (e *Engine) swapWatches(points []meterPoint) (out []swapWatch) {
	var via []int
	hops := e.hops()
	for i := range points {
		p := &points[i]
		if p.Quantity != feeder.MeasuredVoltage || len(p.Phases) != 1 {
			continue
		}
		if via == nil {
			via = e.via(hops)
		}
		node, own, ok := e.severalPhases(p.Node, p.Phases[0], hops, via)
		if !ok {
			continue
		}
		w := swapWatch{point: i, node: node, own: -1}
		for _, ph := range e.net.Model.Nodes[node].Phases {
			if ph == own {
				w.own = len(w.phases)
			}
			w.phases = append(w.phases, ph)
			w.at = append(w.at, e.voltagePoints(node, []feeder.Phase{ph}))
		}
		n := len(w.phases)
		w.sum, w.open, w.last, w.pairs = make([]float64, n), make([]float64, n), make([]float64, n), make([]comoments, n)
		if w.own >= 0 {
			out = append(out, w)
		}
	}
	return out
}

// severalPhases walks towards the source to a grounded node of several phases, and
// tells which of them feeds the phase or leg that it started from.
func (e *Engine) severalPhases(node int, phase feeder.Phase, hops []hop, via []int) (int, feeder.Phase, bool) {
	m := e.net.Model
	for {
		if n := &m.Nodes[node]; len(n.Phases) > 1 && n.Grounded && !phase.Leg() {
			return node, phase, true
		}
		k := via[node]
		if k < 0 {
			return 0, 0, false
		}
		h := hops[k]
		if h.kind == network.Transformer {
			t := &m.Transformers[h.index]
			if len(t.Phases) != 1 || len(t.HighEnds) > 1 || h.b != node {
				return 0, 0, false // between two phases, or a bank that turns them
			}
			phase = t.Phases[0]
		}
		node = h.a + h.b - node
	}
}

// watchOf returns the watch of a measurement, or nil.
func (r *Measured) watchOf(point int) *swapWatch {
	for i := range r.swaps {
		if r.swaps[i].point == point {
			return &r.swaps[i]
		}
	}
	return nil
}

func (w *swapWatch) interval(e *Engine, dt float64) {
	for k := range w.at {
		w.sum[k] += e.readVoltage(w.at[k]) * dt
	}
}

func (w *swapWatch) step(*stepSum) {
	for k := range w.sum {
		w.open[k] += w.sum[k]
		w.sum[k] = 0
	}
}

// sample takes the end of a sample of ns length.
func (w *swapWatch) sample(measured, ns float64) {
	for k := range w.open {
		v := w.open[k] / ns
		if w.known {
			w.pairs[k].add(measured-w.before, v-w.last[k])
		}
		w.last[k], w.open[k] = v, 0
	}
	w.before, w.known = measured, true
}

// gap forgets the sample before: a change over a gap is none from sample to sample.
func (w *swapWatch) gap() {
	w.known = false
	clear(w.open)
}

// likely returns the phase that the measured voltage is clearly more like than its own,
// and the correlations with both. Clearly: at least 200 changes, a correlation of at
// least 0.3 and higher by more than 0.1, and a difference of Fisher's z,
//
//	(artanh r₂ − artanh r₁) / √(2/(n−3))
//
// above 3.29 (R. A. Fisher, Metron 1 (1921) 3). The test takes the two correlations as
// independent; they are of the same measurement, so that their difference varies less
// and the test errs on the side of silence.
func (w *swapWatch) likely() (other int, own, best float64, ok bool) {
	n := w.pairs[w.own].n
	own = w.pairs[w.own].correlation()
	best = math.Inf(-1)
	for k := range w.pairs {
		if r := w.pairs[k].correlation(); k != w.own && r > best {
			other, best = k, r
		}
	}
	if n < swapSamples || best < swapLeast || best-own <= swapMargin {
		return other, own, best, false
	}
	z := (fisher(best) - fisher(own)) / math.Sqrt(2/float64(n-3))
	return other, own, best, z > swapZ
}

// fisher is artanh r, held finite for a perfect correlation.
func fisher(r float64) float64 {
	const most = 1 - 1e-12
	return math.Atanh(math.Max(-most, math.Min(most, r)))
}

// PhaseSwaps proposes, for measured voltages that name one phase, another phase whose
// modelled voltage the measured one is clearly more like.
func (r *Measured) PhaseSwaps() []results.SwapRow {
	var out []results.SwapRow
	for i := range r.swaps {
		w := &r.swaps[i]
		other, own, best, ok := w.likely()
		if !ok {
			continue
		}
		p := &r.points[w.point]
		out = append(out, results.SwapRow{Place: p.Place, Phase: p.Phase, Likely: w.phases[other].String(), At: r.e.net.Model.Nodes[w.node].Name,
			Own: w.phases[w.own].String(), Correlation: own, WithLikely: best, Samples: w.pairs[w.own].n})
	}
	return out
}
