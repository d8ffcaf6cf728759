package feeder

import (
	"strings"
)

// unit reads the terminals of one single-phase winding pair of a bank of units.
func (b *builder) unit(r *transformerRow, t *Transformer, ps []Phase, what string) bool {
	if !r.HighEnds.Given || !r.LowEnds.Given {
		b.faults.Add(r.Row.At, "%s: a unit needs high terminals (such as AN or AB) and low terminals (such as an or ab)", what)
		return false
	}
	high, ok1 := terminals(r.HighEnds.Value)
	if !ok1 {
		b.faults.Add(r.HighEnds.At, "%s: high terminals %q: want a phase and neutral such as AN, or two phases such as AB", what, r.HighEnds.Value)
	}
	low, ok2 := terminals(r.LowEnds.Value)
	if !ok2 {
		b.faults.Add(r.LowEnds.At, "%s: low terminals %q: want a phase and neutral such as an, or two phases such as ab", what, r.LowEnds.Value)
	}
	if !ok1 || !ok2 {
		return false
	}
	if word(ordered(ps)) != word(ordered(high)) {
		b.faults.Add(r.Phases.At, "%s: phases %s are not the letters of its high terminals, %s", what, r.Phases.Value, r.HighEnds.Value)
		return false
	}
	if r.MidTap.Value && len(low) == 1 {
		b.faults.Add(r.MidTap.At, "%s: a low winding from %s to neutral has no middle to ground; give two phases, such as ab", what, r.LowEnds.Value)
		return false
	}
	t.Phases, t.HighEnds, t.LowEnds, t.MidTap = ordered(ps), high, low, r.MidTap.Value
	return true
}

// terminals reads the two ends of a winding; neutral is left out.
func terminals(s string) ([]Phase, bool) {
	s = strings.ToUpper(strings.ReplaceAll(strings.TrimSpace(s), "-", ""))
	if len(s) != 2 || strings.ContainsAny(s, "12") {
		return nil, false
	}
	ps, err := parsePhases(strings.TrimSuffix(s, "N"))
	return ps, err == nil
}
