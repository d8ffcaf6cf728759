package profiles

import "strings"

// unit turns a written value into the base unit: (v + add)·mul/div.
type unit struct {
	base          string
	add, mul, div float64
}

func (u unit) apply(v float64) float64 { return (v + u.add) * u.mul / u.div }

func (u unit) plain() bool { return u.add == 0 && u.mul == 1 && u.div == 1 }

// wantUnits is what a header cell may carry.
const wantUnits = "[pu], [%], [kW], [MW], [W], [kvar], [Mvar], [var], [V], [kV], [A], [kA], [degC], [degF], [W/m2], [kW/m2], " +
	"or a currency of three letters per energy such as [USD/kWh], [EUR/MWh]"

// unitOf returns the unit that a header names. Capitals may differ, except where
// they tell mega from milli.
func unitOf(text string) (unit, bool) {
	if strings.HasPrefix(text, "m") {
		return unit{}, false
	}
	switch strings.ToLower(text) {
	case "pu", "p.u.":
		return unit{"pu", 0, 1, 1}, true
	case "%":
		return unit{"pu", 0, 1, 100}, true
	case "kw":
		return unit{"kW", 0, 1, 1}, true
	case "mw":
		return unit{"kW", 0, 1000, 1}, true
	case "w":
		return unit{"kW", 0, 1, 1000}, true
	case "kvar":
		return unit{"kvar", 0, 1, 1}, true
	case "mvar":
		return unit{"kvar", 0, 1000, 1}, true
	case "var":
		return unit{"kvar", 0, 1, 1000}, true
	case "v":
		return unit{"V", 0, 1, 1}, true
	case "kv":
		return unit{"V", 0, 1000, 1}, true
	case "a":
		return unit{"A", 0, 1, 1}, true
	case "ka":
		return unit{"A", 0, 1000, 1}, true
	case "degc", "°c":
		return unit{"degC", 0, 1, 1}, true
	case "degf", "°f":
		return unit{"degC", -32, 5, 9}, true
	case "w/m2", "w/m²":
		return unit{"W/m2", 0, 1, 1}, true
	case "kw/m2", "kw/m²":
		return unit{"W/m2", 0, 1000, 1}, true
	}
	return priceUnit(text)
}

// priceUnit reads a currency (three capitals, as in ISO 4217) per energy.
func priceUnit(text string) (unit, bool) {
	currency, energy, ok := strings.Cut(text, "/")
	if !ok || len(currency) != 3 {
		return unit{}, false
	}
	for i := range 3 {
		if currency[i] < 'A' || currency[i] > 'Z' {
			return unit{}, false
		}
	}
	base := currency + "/kWh"
	switch strings.ToLower(energy) {
	case "kwh":
		return unit{base, 0, 1, 1}, true
	case "mwh":
		return unit{base, 0, 1, 1000}, true
	case "wh":
		return unit{base, 0, 1000, 1}, true
	}
	return unit{}, false
}
