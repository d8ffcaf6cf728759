package network

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"yearflow/sim/feeder"
)

// winding is one single-phase unit of a bank: high terminals p, q and low
// terminals r, s (unknowns, or Ground), with the rated voltages of both.
type winding struct {
	p, q, r, s int32
	high, low  float64 // V, the windings' rated voltages
	tap        float64 // V, the high winding's voltage at the tap in use
}

// transformer stamps a bank unit by unit. A unit of ratio n and leakage admittance
// y (seen from the low side) couples its terminals as y·v·vᵀ with
//
//	v = (p: +1/n, q: −1/n, r: −1, s: +1)
//
// (Chen and Dillon, Power system modeling, Proc. IEEE 62(7), 1974, in the form of
// single windings). Star points that are not grounded are inner points.
func (n *Network) transformer(i int) error {
	t := &n.Model.Transformers[i]
	if t.MidTap {
		n.midTapped(i)
		return nil
	}
	ws, inner, err := n.windings(t)
	if err != nil {
		return err
	}
	if t.R == 0 && t.X == 0 {
		return fmt.Errorf("transformer %q has no impedance: give impedance [%%] and x/r", t.Name)
	}
	term := make([]int32, 0, 8)
	for _, p := range t.Phases {
		term = append(term, n.At[t.From][p])
	}
	from := len(term)
	for _, p := range n.Model.Nodes[t.To].Phases {
		term = append(term, n.At[t.To][p])
	}
	to := len(term) - from
	term = append(term, inner...)
	where := func(u int32) int {
		for k, v := range term {
			if v == u {
				return k
			}
		}
		return -1
	}
	share := t.KVA * 1000 / float64(len(ws))
	k := len(term)
	load, core := make([]complex128, k*k), make([]complex128, k*k)
	for _, w := range ws {
		y := complex(share/(w.low*w.low), 0) / complex(t.R, t.X)
		stamp(load, k, y, []int{where(w.p), where(w.q), where(w.r), where(w.s)},
			[]float64{w.low / w.tap, -w.low / w.tap, -1, 1})
		g := t.NoLoadLoss / float64(len(ws)) / (w.high * w.high)
		a := t.Exciting * share / (w.high * w.high)
		b := math.Sqrt(math.Max(0, a*a-g*g))
		stamp(core, k, complex(g, -b), []int{where(w.p), where(w.q)}, []float64{1, -1})
	}
	n.element(Element{Transformer, i, term, from, to, load})
	if t.NoLoadLoss != 0 || t.Exciting != 0 {
		n.element(Element{TransformerNoLoad, i, term, from, to, core})
	}
	return nil
}

// stamp adds y·v·vᵀ to the k × k matrix m; a place of −1 is ground.
func stamp(m []complex128, k int, y complex128, at []int, v []float64) {
	for a, i := range at {
		for b, j := range at {
			if i >= 0 && j >= 0 {
				m[i*k+j] += y * complex(v[a]*v[b], 0)
			}
		}
	}
}

// windings lists the units of a bank and the star points that it brings along.
func (n *Network) windings(t *feeder.Transformer) (ws []winding, inner []int32, err error) {
	hi, lo := n.At[t.From], n.At[t.To]
	high, low, tap := t.HighKV*1000, t.LowKV*1000, t.TapKV*1000
	switch t.Connection {
	case "1ph":
		switch len(t.Phases) {
		case 1:
			p := t.Phases[0]
			return []winding{{hi[p], Ground, lo[p], Ground, high, low, tap}}, nil, nil
		case 2:
			p, q := t.Phases[0], t.Phases[1]
			w := winding{hi[p], hi[q], lo[p], Ground, high, low, tap}
			if lo[q] != Ground {
				w.s = lo[q]
			}
			return []winding{w}, nil, nil
		}
		return nil, nil, fmt.Errorf("transformer %q: a 1ph unit stands on one phase or on a pair", t.Name)
	case "unit":
		w := winding{hi[t.HighEnds[0]], Ground, lo[t.LowEnds[0]], Ground, high, low, tap}
		if len(t.HighEnds) == 2 {
			w.q = hi[t.HighEnds[1]]
		}
		if len(t.LowEnds) == 2 {
			w.s = lo[t.LowEnds[1]]
		}
		return []winding{w}, nil, nil
	case "open-wye/open-delta":
		for _, p := range t.Pairs {
			ws = append(ws, winding{hi[p[0]], Ground, lo[p[0]], lo[p[1]], high / sqrt3, low, tap / sqrt3})
		}
		return ws, nil, nil
	case "open-delta/open-delta":
		for _, p := range t.Pairs {
			ws = append(ws, winding{hi[p[0]], hi[p[1]], lo[p[0]], lo[p[1]], high, low, tap})
		}
		return ws, nil, nil
	}
	return n.vectorGroup(t)
}

// vectorGroup lists the three units of a bank that is named by its vector group
// (IEC 60076-1): the high winding's letters, the low winding's, and the clock
// number, by which the low side lags in steps of 30°.
func (n *Network) vectorGroup(t *feeder.Transformer) (ws []winding, inner []int32, err error) {
	group := strings.TrimRight(t.Connection, "0123456789")
	clock, err := strconv.Atoi(t.Connection[len(group):])
	cut := 1
	if strings.HasPrefix(group, "YN") {
		cut = 2
	}
	if err != nil || len(group) <= cut {
		return nil, nil, fmt.Errorf("transformer %q: connection %q is not a vector group", t.Name, t.Connection)
	}
	h, l := group[:cut], group[cut:]
	hi, lo := n.At[t.From], n.At[t.To]
	high, low, tap := t.HighKV*1000, t.LowKV*1000, t.TapKV*1000
	star := func(side string, node int) int32 {
		if side == "YN" || side == "yn" {
			return Ground
		}
		u := n.add(Unknown{-1, 0, n.Model.Nodes[node].Nominal * 1000 / sqrt3, "star of " + t.Name})
		inner = append(inner, u)
		return u
	}
	hiDelta, loDelta := h == "D", l == "d"
	hiStar, loStar := Ground, Ground
	hv, lv, tv := high, low, tap
	if !hiDelta {
		hiStar, hv, tv = star(h, t.From), high/sqrt3, tap/sqrt3
	}
	if !loDelta {
		loStar, lv = star(l, t.To), low/sqrt3
	}
	if odd := clock%2 == 1; odd != (hiDelta != loDelta) {
		return nil, nil, fmt.Errorf("transformer %q: connection %q: clock number %d cannot be had from these windings", t.Name, t.Connection, clock)
	}
	// The angle of the high winding minus that of the low winding's first terminal
	// must be the clock number. A delta high winding on phases (k, k+2) stands 30°
	// behind phase k, on (k, k+1) 30° ahead; likewise the low ones. An even rest of
	// the clock turns the low terminals by whole phases and by the winding's sign.
	for k := range 3 {
		w := winding{high: hv, low: lv, tap: tv}
		p, q := hi[k], hiStar
		turn := clock // in units of 30° that the low terminals must lag
		if hiDelta {
			if loDelta {
				q = hi[(k+1)%3] // AB against ab: no turn of their own
			} else {
				q = hi[(k+2)%3] // A–C lags A by 30°: one hour
				turn = clock - 1
			}
		}
		if !hiDelta && loDelta {
			turn = clock - 1 // A against a–b, which leads a by 30°: one hour
		}
		// turn is even: 0, 4, 8 move the low terminals by one phase each, 2, 6, 10 do
		// so with the winding reversed (6 hours = reversal).
		turn = ((turn % 12) + 12) % 12
		reversed := turn%4 == 2
		if reversed {
			turn = (turn + 6) % 12
		}
		shift := turn / 4
		// A low side that lags by 120° per shift has the terminal before in phase.
		r, s := lo[(k-shift+3)%3], loStar
		if loDelta {
			s = lo[(k-shift+4)%3]
		}
		if reversed {
			r, s = s, r
		}
		w.p, w.q, w.r, w.s = p, q, r, s
		ws = append(ws, w)
	}
	return ws, inner, nil
}

// regulator stamps the units of a bank: their ideal part as couplings, what they
// lose as elements. The series part stands on the load side (an inner point is
// made for it), the no-load loss on the source side at nominal voltage.
func (n *Network) regulator(i int) {
	r := &n.Model.Regulators[i]
	ln := n.Model.Nodes[r.From].Nominal * 1000 / sqrt3
	unitV := ln
	if r.Connection != feeder.RegulatorWye {
		unitV = ln * sqrt3
	}
	from, to := n.At[r.From], n.At[r.To]
	out := to // what the ideal part feeds: the bus, or the inner point before the series part
	z := seriesOf(r, unitV)
	unit := map[feeder.Phase]int{}
	for u := range r.Units {
		unit[r.Units[u].Phase] = u
	}
	for _, p := range r.Phases {
		if _, has := unit[p]; has && z != 0 {
			out[p] = n.add(Unknown{-1, p, ln, r.Name + " before its impedance, phase " + p.String()})
			y := 1 / z
			n.element(Element{RegulatorSeries, i, []int32{out[p], to[p]}, 1, 1, []complex128{y, -y, -y, y}})
		}
	}
	for _, p := range r.Phases {
		u, has := unit[p]
		if !has {
			n.Couplings = append(n.Couplings, Coupling{Regulator, i, -1, []int32{from[p], to[p]}, []float64{1, -1}, []float64{0, 0}})
			continue
		}
		if r.Connection == feeder.RegulatorWye {
			n.Couplings = append(n.Couplings, Coupling{Regulator, i, u, []int32{from[p], out[p]}, []float64{1, 0}, []float64{0, -1}})
		} else {
			// V_A − V_b = (V_a − V_b)/ratio: the common bushing is on the load side.
			q := r.Units[u].Pair[1]
			n.Couplings = append(n.Couplings, Coupling{Regulator, i, u, []int32{from[p], out[p], out[q]}, []float64{1, 0, -1}, []float64{0, -1, 1}})
		}
		if r.NoLoadLoss != 0 {
			g := complex(r.NoLoadLoss/(unitV*unitV), 0)
			if r.Connection == feeder.RegulatorWye {
				n.element(Element{RegulatorNoLoad, i, []int32{from[p]}, 1, 0, []complex128{g}})
			} else {
				n.element(Element{RegulatorNoLoad, i, []int32{from[p], from[r.Units[u].Pair[1]]}, 2, 0, []complex128{g, -g, -g, g}})
			}
		}
	}
}

// seriesOf returns the series impedance of one unit in ohm: the load loss at rated
// current, and the impedance in per cent of nominal voltage over rated current.
func seriesOf(r *feeder.Regulator, unitV float64) complex128 {
	if !(r.Rating > 0) {
		return 0
	}
	res := r.LoadLoss / (r.Rating * r.Rating)
	abs := r.Impedance * unitV / r.Rating
	return complex(res, math.Sqrt(math.Max(0, abs*abs-res*res)))
}
