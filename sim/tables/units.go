package tables

import (
	"math/big"
	"strings"
)

// unit is one way to write a dimension: base units = factor·(value + shift).
// Factors are decimal fractions, so that they are exact.
type unit struct {
	name   string
	factor string
	shift  string // blank: none
}

// dimension is a set of units that can be turned into each other.
type dimension struct {
	name  string
	units []unit
}

// The international foot is 0.3048 m, the inch 0.0254 m and the mile 1609.344 m
// exactly (international yard and pound agreement of 1959).
func dimensions() []dimension {
	return []dimension{
		{"length", []unit{{"ft", "0.3048", ""}, {"m", "1", ""}, {"km", "1000", ""}, {"mi", "1609.344", ""}, {"in", "0.0254", ""}, {"mil", "0.0000254", ""}}},
		{"voltage", []unit{{"V", "1", ""}, {"kV", "1000", ""}}},
		{"current", []unit{{"A", "1", ""}, {"kA", "1000", ""}}},
		{"real power", []unit{{"kW", "1000", ""}, {"MW", "1000000", ""}, {"W", "1", ""}}},
		{"reactive power", []unit{{"kvar", "1000", ""}, {"Mvar", "1000000", ""}, {"var", "1", ""}}},
		{"apparent power", []unit{{"kVA", "1000", ""}, {"MVA", "1000000", ""}, {"VA", "1", ""}}},
		{"energy", []unit{{"kWh", "1000", ""}, {"MWh", "1000000", ""}, {"Wh", "1", ""}}},
		{"impedance per length", []unit{{"ohm/mi", "1/1609.344", ""}, {"ohm/km", "1/1000", ""}, {"ohm/kft", "1/304.8", ""}, {"ohm/m", "1", ""}}},
		{"susceptance per length", []unit{{"uS/mi", "1/1609.344", ""}, {"uS/km", "1/1000", ""}, {"uS/kft", "1/304.8", ""}}},
		{"time", []unit{{"s", "1", ""}, {"min", "60", ""}, {"h", "3600", ""}}},
		{"share", []unit{{"pu", "1", ""}, {"%", "0.01", ""}}},
		{"temperature", []unit{{"degC", "1", ""}, {"degF", "5/9", "-32"}}},
		{"angle", []unit{{"deg", "1", ""}}},
		{"resistivity", []unit{{"ohm m", "1", ""}}},
		{"share per temperature", []unit{{"%/degC", "1", ""}}},
	}
}

// names lists the units of a dimension as a sentence has them.
func (d *dimension) names() string {
	parts := make([]string, len(d.units))
	for i, u := range d.units {
		parts[i] = "[" + u.name + "]"
	}
	if len(parts) == 1 {
		return parts[0]
	}
	return strings.Join(parts[:len(parts)-1], ", ") + " or " + parts[len(parts)-1]
}

// find returns the unit of that name. Capitals may differ, except where they
// tell mega from milli.
func (d *dimension) find(name string) (unit, bool) {
	name = strings.Join(strings.Fields(strings.ReplaceAll(name, "µ", "u")), " ")
	for _, u := range d.units {
		if u.name == name {
			return u, true
		}
	}
	for _, u := range d.units {
		if strings.EqualFold(u.name, name) && (u.name[0] == name[0] || (u.name[0] != 'm' && u.name[0] != 'M')) {
			return u, true
		}
	}
	return unit{}, false
}

// dimensionOf returns the dimension that has a unit of that name.
func dimensionOf(name string) (dimension, unit, bool) {
	for _, d := range dimensions() {
		if u, ok := d.find(name); ok {
			return d, u, true
		}
	}
	return dimension{}, unit{}, false
}

// rational reads "1/304.8" or "0.3048".
func rational(s string) *big.Rat {
	num, den, cut := strings.Cut(s, "/")
	r, ok := new(big.Rat).SetString(num)
	if !ok {
		panic("tables: not a number in the list of units: " + s)
	}
	if cut {
		d, ok := new(big.Rat).SetString(den)
		if !ok {
			panic("tables: not a number in the list of units: " + s)
		}
		r.Quo(r, d)
	}
	return r
}

// conversion turns values of one unit into another of the same dimension; it rounds
// once, so that 5280 ft is 1.609344 km to the last bit.
type conversion struct {
	same         bool
	factor       *big.Rat
	before, back *big.Rat
}

func convert(from, to unit) conversion {
	if from == to {
		return conversion{same: true}
	}
	c := conversion{factor: new(big.Rat).Quo(rational(from.factor), rational(to.factor)), before: new(big.Rat), back: new(big.Rat)}
	if from.shift != "" {
		c.before = rational(from.shift)
	}
	if to.shift != "" {
		c.back = rational(to.shift)
	}
	return c
}

// of converts a finite number.
func (c conversion) of(x float64) float64 {
	if c.same {
		return x
	}
	r := new(big.Rat).SetFloat64(x)
	r.Add(r, c.before)
	r.Mul(r, c.factor)
	r.Sub(r, c.back)
	f, _ := r.Float64()
	return f
}
