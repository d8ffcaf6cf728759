package feeder

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"yearflow/sim/tables"
)

func (b *builder) transformers() {
	for i := range b.t.transformers {
		joined := len(b.links)
		b.transformer(&b.t.transformers[i])
		b.torn = b.torn || len(b.links) == joined
	}
}

func (b *builder) transformer(r *transformerRow) {
	what := "transformer " + strconv.Quote(r.Name.Value)
	from, to, ok := b.ends(r.From, r.To, what)
	ps, okPhases := b.phasesOf(r.Phases, what)
	if r.Connection.Value == "" {
		return
	}
	group, pairs, err := parseConnection(r.Connection.Value)
	if err != nil {
		b.faults.Add(r.Connection.At, "%s: %v", what, err)
		return
	}
	if group != "unit" && (r.MidTap.Value || r.HighEnds.Given || r.LowEnds.Given) {
		b.faults.Add(r.Row.At, "%s: terminals and mid-tap belong to connection unit, not to %s", what, group)
	}
	if okPhases && ps[0].Leg() {
		b.faults.Add(r.Phases.At, "%s: phases %s are the legs of a secondary; phases names the high side", what, r.Phases.Value)
		return
	}
	if !ok || !okPhases {
		return
	}
	t := Transformer{Name: r.Name.Value, At: r.Row.At, From: from, To: to, KVA: r.Rating.Value, HighKV: r.High.Value, LowKV: r.Low.Value,
		TapKV: r.Tap.Value, Connection: group, Pairs: pairs, NoLoadLoss: r.NoLoad.Value, Exciting: r.Exciting.Value}
	if !r.Tap.Given {
		t.TapKV = t.HighKV
	}
	if !r.Exciting.Given {
		t.Exciting = t.NoLoadLoss / (t.KVA * 1000)
		b.assumeMany(r.Row.At, "transformers: exciting current [%]", "that of the no-load loss alone")
	} else if t.Exciting < t.NoLoadLoss/(t.KVA*1000)*(1-1e-9) {
		b.warnings.Add(r.Exciting.At, "%s: exciting current %s %% is less than its loss part, %s %%; it is the magnitude and includes the loss", what, amount(100*t.Exciting), amount(100*t.NoLoadLoss/(t.KVA*1000)))
	}
	l := link{kind: "transformer", name: t.Name, at: t.At, from: from, to: to}
	three := []Phase{A, B, C}
	units := 1
	switch group {
	case "1ph":
		if len(ps) == 3 {
			b.faults.Add(r.Phases.At, "%s: a 1ph unit stands on one phase, or on a pair such as AB; for three phases give a vector group such as YNyn0", what)
			return
		}
		t.Phases, l.fromPhases, l.toPhases = ps, ps, append([]Phase(nil), ps...)
		l.borrow = len(ps) == 2
	case "center-tap":
		if len(ps) == 3 {
			b.faults.Add(r.Phases.At, "%s: a centre-tapped transformer stands on one phase, or on a pair such as AB", what)
			return
		}
		t.Phases, t.HighEnds, t.LowEnds, t.MidTap = ps, ps, []Phase{Leg1, Leg2}, true
		l.fromPhases, l.toPhases = ps, t.LowEnds
	case "unit":
		if !b.unit(r, &t, ps, what) {
			return
		}
		l.fromPhases, l.toPhases = t.HighEnds, t.LowEnds
	case "open-wye/open-delta":
		high := ordered([]Phase{pairs[0][0], pairs[1][0]})
		if len(high) != 2 {
			b.faults.Add(r.Connection.At, "%s: the first letter of each pair is its high phase; %s and %s have the same", what, pairs[0], pairs[1])
			return
		}
		if w := word(ordered(ps)); w != "ABC" && w != word(high) {
			b.faults.Add(r.Phases.At, "%s: the pairs %s-%s have their high windings on %s, phases says %s", what, pairs[0], pairs[1], word(high), r.Phases.Value)
			return
		}
		t.Phases, l.fromPhases, l.toPhases, units = high, high, three, 2
	default:
		if len(ps) != 3 {
			b.faults.Add(r.Phases.At, "%s: connection %s needs phases ABC, got %s", what, group, r.Phases.Value)
			return
		}
		t.Phases, l.fromPhases, l.toPhases, units = three, three, three, 3
		if strings.HasPrefix(group, "open") {
			units = 2
		}
	}
	if !r.Row.Bad {
		b.leakage(r, &t, units, what)
	}
	b.model.Transformers = append(b.model.Transformers, t)
	b.join(l)
}

// leakage finds R and X, p.u. on the rating, from any two of the five columns.
func (b *builder) leakage(r *transformerRow, t *Transformer, units int, what string) {
	type column struct {
		name string
		cell tables.Number
	}
	given := ""
	var names []string
	for i, c := range []column{{"impedance", r.Impedance}, {"x/r", r.XR}, {"load loss", r.LoadLoss}, {"resistance", r.Resistance}, {"reactance", r.Reactance}} {
		if c.cell.Given {
			given += string("zklrx"[i])
			names = append(names, c.name)
		}
	}
	z, k, x := r.Impedance.Value, r.XR.Value, r.Reactance.Value
	res := r.Resistance.Value
	if r.LoadLoss.Given {
		res = r.LoadLoss.Value / (t.KVA * 1000)
	}
	other := func(a float64) float64 { return math.Sqrt(z*z - a*a) }
	switch given {
	case "":
		var of string
		t.R, t.X, of = typical(t.KVA, units)
		b.assume(r.Row.At, what+": resistance and reactance [%]", fmt.Sprintf("%.3g and %.3g (typical of %s)", 100*t.R, 100*t.X, of))
		return
	case "zk":
		t.R = z / math.Hypot(1, k)
		t.X = t.R * k
	case "zl", "zr":
		t.R, t.X = res, other(res)
		if math.IsNaN(t.X) {
			b.faults.Add(r.Impedance.At, "%s: its resistance, %s %%, exceeds its impedance, %s %%", what, amount(100*res), amount(100*z))
		}
	case "zx":
		t.R, t.X = other(x), x
		if math.IsNaN(t.R) {
			b.faults.Add(r.Impedance.At, "%s: its reactance, %s %%, exceeds its impedance, %s %%", what, amount(100*x), amount(100*z))
		}
	case "kl", "kr":
		t.R, t.X = res, k*res
	case "kx":
		t.R, t.X = x/k, x
	case "lx", "rx":
		t.R, t.X = res, x
	case "lr":
		b.faults.Add(r.Resistance.At, "%s: load loss and resistance are two sources of one value; give impedance, x/r or reactance with one of them", what)
		return
	default:
		if len(names) == 1 {
			b.faults.Add(r.Row.At, "%s: %s alone does not give its impedance; give two of impedance, x/r, load loss, resistance and reactance, or none for a typical unit", what, names[0])
		} else {
			b.faults.Add(r.Row.At, "%s: %s are %d sources of two values; leave all but two blank", what, strings.Join(names, ", "), len(names))
		}
		return
	}
	if t.R == 0 && t.X == 0 {
		b.faults.Add(r.Row.At, "%s has no impedance; a bank needs one", what)
	}
}
