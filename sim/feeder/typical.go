package feeder

import "math"

// typicalUnit is a single-phase liquid-filled unit as they are made now.
type typicalUnit struct {
	kVA, resistance, impedance float64 // kVA, per cent, per cent
}

// typicalUnits: resistance from load losses that meet the efficiencies of
// 10 CFR 431.196 (levels of 2016) at half load; impedance the middle of the usual
// range. Common practice, not measured.
func typicalUnits() []typicalUnit {
	return []typicalUnit{
		{10, 1.50, 1.95}, {15, 1.37, 1.95}, {25, 1.20, 2.05}, {37.5, 1.09, 2.15},
		{50, 1.02, 2.2}, {75, 0.93, 2.4}, {100, 0.87, 2.5}, {167, 0.77, 2.75},
	}
}

// typical returns resistance and reactance, p.u. on the rating, of a bank that the
// table leaves blank, and what it was taken from. Beyond single-phase units: 5.75 %
// from 500 kVA three-phase (IEEE C57.12.34, recalled from memory), 8 % and 0.4 % load
// loss from 5 MVA (common practice for substations).
func typical(kVA float64, units int) (r, x float64, of string) {
	each := kVA / float64(units)
	var row typicalUnit
	switch {
	case kVA >= 5000:
		row, of = typicalUnit{kVA, 0.4, 8}, "a substation transformer"
	case each > 250:
		row, of = typicalUnit{kVA, 0.9, 5.75}, "a transformer of 750 to 2,500 kVA"
	default:
		best := math.Inf(1)
		for _, t := range typicalUnits() {
			if d := math.Abs(math.Log(each / t.kVA)); d < best {
				best, row = d, t
			}
		}
		of = "a unit of " + amount(row.kVA) + " kVA"
	}
	z := row.impedance / 100
	r = row.resistance / 100
	return r, math.Sqrt(z*z - r*r), of
}
