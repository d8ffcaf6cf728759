package feeder

import (
	"fmt"
	"strings"
)

// later ends the refusal of what the program does not do yet.
const later = "comes with a later version"

// parsePhases reads a list of phases such as "ABC" or "B", in the order written.
func parsePhases(s string) ([]Phase, error) {
	var out []Phase
	for _, r := range s {
		var p Phase
		switch r {
		case 'A', 'B', 'C':
			p = Phase(r - 'A')
		case '1', '2':
			p = Leg1 + Phase(r-'1')
		default:
			return nil, fmt.Errorf("phases %q: want some of A, B, C, or the legs 1, 2 of a centre-tapped secondary", s)
		}
		for _, q := range out {
			if q == p {
				return nil, fmt.Errorf("phases %q: %s stands twice", s, p)
			}
		}
		out = append(out, p)
	}
	if len(out) == 0 {
		return nil, fmt.Errorf("no phases; want some of A, B, C")
	}
	for _, q := range out {
		if q.Leg() != out[0].Leg() {
			return nil, fmt.Errorf("phases %q: phases and legs of a centre-tapped secondary do not go together", s)
		}
	}
	return out, nil
}

// ordered returns the phases in the order A, B, C.
func ordered(ps []Phase) []Phase {
	var set phaseSet
	for _, p := range ps {
		set[p] = true
	}
	return listed(set)
}

// phaseSet marks phases.
type phaseSet [PhaseCount]bool

func listed(set phaseSet) []Phase {
	var out []Phase
	for p, has := range set {
		if has {
			out = append(out, Phase(p))
		}
	}
	return out
}

// word returns the letters of phases.
func word(ps []Phase) string {
	var b strings.Builder
	for _, p := range ps {
		b.WriteString(p.String())
	}
	return b.String()
}

// parsePairs reads the pairs of a delta connection: one pair, or all three of ABC.
func parsePairs(s string) ([]Pair, error) {
	ps, err := parsePhases(s)
	if err != nil {
		return nil, err
	}
	switch len(ps) {
	case 2:
		return []Pair{{ps[0], ps[1]}}, nil
	case 3:
		return []Pair{{A, B}, {B, C}, {C, A}}, nil
	case 1:
		if ps[0].Leg() {
			return nil, fmt.Errorf("phases %q: one leg has nothing to be in delta with; 12 stands across both", s)
		}
	}
	return nil, fmt.Errorf("phases %q: a delta connection stands on a pair such as AB, or on ABC", s)
}

// ofPairs returns the phases that pairs touch, in the order A, B, C.
func ofPairs(pairs []Pair) []Phase {
	var set phaseSet
	for _, p := range pairs {
		set[p[0]], set[p[1]] = true, true
	}
	return listed(set)
}

// parseUnits reads the pairs of an open bank, such as "AB-BC".
func parseUnits(s string) ([]Pair, error) {
	a, b, ok := strings.Cut(strings.ToUpper(strings.ReplaceAll(s, " ", "")), "-")
	if !ok {
		return nil, fmt.Errorf("want the two pairs that have a unit, such as AB-BC, got %q", s)
	}
	var out []Pair
	for _, w := range []string{a, b} {
		ps, err := parsePhases(w)
		if err != nil || len(ps) != 2 {
			return nil, fmt.Errorf("want the two pairs that have a unit, such as AB-BC, got %q", s)
		}
		out = append(out, Pair{ps[0], ps[1]})
	}
	if len(ofPairs(out)) != 3 {
		return nil, fmt.Errorf("the pairs %s do not reach all three phases", s)
	}
	return out, nil
}
