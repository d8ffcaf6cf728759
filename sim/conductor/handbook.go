package conductor

import "math"

// Sources of the handbook. Nothing was copied from a page: all values were recalled,
// then held against each other (resistance times area, diameter from stranding, GMR
// over radius), which the tests repeat.
const (
	fromAppendixA = "recalled from memory of W. H. Kersting, Distribution System Modeling and Analysis, appendix A"
	fromAppendixB = "recalled from memory of W. H. Kersting, Distribution System Modeling and Analysis, appendix B; rating in duct"
	fromTandD     = "recalled from memory of Westinghouse, Electrical Transmission and Distribution Reference Book, chapter 3"
	fromFeeder13  = "recalled from memory of the IEEE PES 13-node test feeder (W. H. Kersting), data of its cables"
	fromStranding = "recalled from memory of W. H. Kersting, Distribution System Modeling and Analysis, appendix A; diameter and GMR agree with the stranding, rating not recalled"
)

// unknown stands for a rating that was not recalled.
var unknown = math.NaN()

// bare is a row of the handbook in the units of its sources.
type bare struct {
	name         string
	ohmPerMile   float64 // 60 Hz, 50 °C
	gmrFoot      float64
	diameterInch float64
	ampere       float64 // conductor at 75 °C in air of 25 °C
	source       string
}

// insulated is a 15 kV cable with an aluminium core. Strands are zero for a tape.
type insulated struct {
	name, core  string
	outsideInch float64 // over the neutral, or over the tape
	strands     int
	strand      string
	ampere      float64
}

// tapeMil is the thickness of the copper tape of the handbook's cables.
const tapeMil = 5

// Handbook returns the conductors and cables that are built in, in the order of
// kind and size; the slices are the caller's own. Sizes up to 4/0 are AWG, others
// kcmil; AA is all aluminium of hard-drawn (1350) wire, ACSR has the strands of
// aluminium and steel before it, Cu is hard-drawn copper. CN is a concentric neutral
// of a third of the core's conductance (1/3, and no fewer than six strands) or all of
// it (full), TS a tape shield. A rating is common practice for planning, not a limit
// of a maker.
func Handbook() ([]Conductor, []Cable) {
	cs := make([]Conductor, 0, len(bares))
	for _, b := range bares {
		cs = append(cs, Conductor{
			Name:     b.name,
			R:        b.ohmPerMile / mile,
			GMR:      b.gmrFoot * foot,
			Diameter: b.diameterInch * inch,
			Rating:   b.ampere,
			Source:   b.source,
		})
	}
	ks := make([]Cable, 0, len(insulateds))
	for _, c := range insulateds {
		k := Cable{Name: c.name, Conductor: c.core, Permittivity: DefaultPermittivity, Rating: c.ampere, Source: fromAppendixB}
		if c.strands > 0 {
			k.OutsideDiameter, k.Strands, k.Strand = c.outsideInch*inch, c.strands, c.strand
		} else {
			k.ShieldDiameter, k.ShieldThickness, k.ShieldResistivity = c.outsideInch*inch, tapeMil*mil, DefaultShieldResistivity
		}
		ks = append(ks, k)
	}
	return cs, ks
}

// bares is not changed after the program starts.
var bares = [...]bare{
	{"6 6/1 ACSR", 3.98, 0.00394, 0.198, 100, fromAppendixA},
	{"5 6/1 ACSR", 3.18, 0.00416, 0.223, 120, fromTandD},
	{"4 6/1 ACSR", 2.57, 0.00437, 0.250, 140, fromAppendixA},
	{"4 7/1 ACSR", 2.55, 0.00452, 0.257, 140, fromTandD},
	{"3 6/1 ACSR", 2.07, 0.00430, 0.281, 160, fromTandD},
	{"2 6/1 ACSR", 1.69, 0.00418, 0.316, 180, fromAppendixA},
	{"2 7/1 ACSR", 1.65, 0.00504, 0.325, 180, fromTandD},
	{"1 6/1 ACSR", 1.38, 0.00418, 0.355, 200, fromTandD},
	{"1/0 6/1 ACSR", 1.12, 0.00446, 0.398, 230, fromAppendixA},
	{"2/0 6/1 ACSR", 0.895, 0.00510, 0.447, 270, fromAppendixA},
	{"3/0 6/1 ACSR", 0.723, 0.00600, 0.502, 300, fromAppendixA},
	{"4/0 6/1 ACSR", 0.592, 0.00814, 0.563, 340, fromAppendixA},
	{"266.8 26/7 ACSR", 0.385, 0.0217, 0.642, 460, fromAppendixA},
	{"300 26/7 ACSR", 0.342, 0.0230, 0.680, 490, fromTandD},
	{"336.4 26/7 ACSR", 0.306, 0.0244, 0.721, 530, fromAppendixA},
	{"336.4 30/7 ACSR", 0.306, 0.0255, 0.741, 530, fromTandD},
	{"397.5 26/7 ACSR", 0.259, 0.0265, 0.783, 590, fromAppendixA},
	{"397.5 30/7 ACSR", 0.259, 0.0278, 0.806, 600, fromTandD},
	{"477 26/7 ACSR", 0.216, 0.0290, 0.858, 670, fromAppendixA},
	{"477 30/7 ACSR", 0.216, 0.0304, 0.883, 670, fromTandD},
	{"500 30/7 ACSR", 0.206, 0.0311, 0.904, 690, fromTandD},
	{"556.5 26/7 ACSR", 0.1859, 0.0313, 0.927, 730, fromAppendixA},
	{"556.5 30/7 ACSR", 0.1859, 0.0328, 0.953, 730, fromTandD},
	{"605 26/7 ACSR", 0.1720, 0.0327, 0.966, 760, fromTandD},
	{"605 54/7 ACSR", 0.1775, 0.0321, 0.953, 750, fromTandD},
	{"636 26/7 ACSR", 0.1618, 0.0335, 0.990, 780, fromTandD},
	{"636 54/7 ACSR", 0.1688, 0.0329, 0.977, 770, fromTandD},
	{"666.6 54/7 ACSR", 0.1601, 0.0337, 1.000, 800, fromTandD},
	{"715.5 26/7 ACSR", 0.1442, 0.0355, 1.051, 840, fromTandD},
	{"715.5 54/7 ACSR", 0.1482, 0.0349, 1.036, 830, fromTandD},
	{"795 26/7 ACSR", 0.1288, 0.0375, 1.108, 900, fromAppendixA},
	{"795 54/7 ACSR", 0.1378, 0.0368, 1.093, 900, fromTandD},
	{"874.5 54/7 ACSR", 0.1228, 0.0386, 1.146, 950, fromTandD},
	{"900 54/7 ACSR", 0.1185, 0.0391, 1.162, 970, fromTandD},
	{"954 54/7 ACSR", 0.1128, 0.0403, 1.196, 1010, fromTandD},

	{"4 AA", 2.453, 0.00700, 0.232, 90, fromAppendixA},
	{"2 AA", 1.541, 0.00883, 0.292, 156, fromAppendixA},
	{"1 AA", 1.224, 0.00991, 0.328, unknown, fromStranding},
	{"1/0 AA", 0.970, 0.0111, 0.368, 202, fromAppendixA},
	{"2/0 AA", 0.769, 0.0125, 0.414, 230, fromAppendixA},
	{"3/0 AA", 0.611, 0.0140, 0.464, 263, fromAppendixA},
	{"4/0 AA", 0.484, 0.0158, 0.522, 299, fromAppendixA},
	{"250 AA", 0.410, 0.0171, 0.567, 329, fromAppendixA},
	{"266.8 AA", 0.384, 0.0177, 0.586, unknown, fromStranding},
	{"336.4 AA", 0.305, 0.0210, 0.666, 410, fromAppendixA},
	{"350 AA", 0.294, 0.0214, 0.679, unknown, fromStranding},
	{"397.5 AA", 0.258, 0.0228, 0.724, 440, fromAppendixA},
	{"477 AA", 0.216, 0.0254, 0.795, 510, fromAppendixA},
	{"500 AA", 0.206, 0.0260, 0.813, unknown, fromStranding},
	{"556.5 AA", 0.186, 0.0275, 0.858, 560, fromAppendixA},
	{"700 AA", 0.148, 0.0308, 0.963, unknown, fromStranding},
	{"750 AA", 0.139, 0.0319, 0.997, unknown, fromStranding},
	{"795 AA", 0.131, 0.0328, 1.026, 720, fromAppendixA},

	{"14 Cu", 14.8722, 0.00208, 0.0641, 20, fromFeeder13},
	{"12 Cu", 9.3747, 0.00262, 0.0808, 40, fromAppendixA},
	{"10 Cu", 5.9026, 0.00331, 0.1019, 75, fromAppendixA},
	{"8 Cu", 3.80, 0.00416, 0.1285, 90, fromTandD},
	{"6 Cu", 2.41, 0.00568, 0.201, 130, fromAppendixA},
	{"4 Cu", 1.518, 0.00717, 0.254, 180, fromAppendixA},
	{"2 Cu", 0.964, 0.00883, 0.292, 230, fromAppendixA},
	{"1 Cu", 0.765, 0.00992, 0.328, 270, fromTandD},
	{"1/0 Cu", 0.607, 0.01113, 0.368, 310, fromAppendixA},
	{"2/0 Cu", 0.481, 0.01252, 0.414, 360, fromTandD},
	{"3/0 Cu", 0.382, 0.01404, 0.464, 420, fromTandD},
	{"4/0 Cu", 0.303, 0.01579, 0.522, 480, fromAppendixA},
	{"250 Cu", 0.257, 0.01813, 0.574, 540, fromTandD},
	{"300 Cu", 0.215, 0.01987, 0.629, 610, fromTandD},
	{"350 Cu", 0.1845, 0.0214, 0.679, 670, fromTandD},
	{"400 Cu", 0.1619, 0.0229, 0.726, 730, fromTandD},
	{"500 Cu", 0.1303, 0.0260, 0.814, 840, fromTandD},
}

// insulateds is not changed after the program starts.
var insulateds = [...]insulated{
	{"2 AA CN 15kV full", "2 AA", 0.98, 10, "14 Cu", 120},
	{"1/0 AA CN 15kV full", "1/0 AA", 1.06, 16, "14 Cu", 155},
	{"2 AA CN 15kV 1/3", "2 AA", 0.98, 6, "14 Cu", 135},
	{"1/0 AA CN 15kV 1/3", "1/0 AA", 1.06, 6, "14 Cu", 175},
	{"4/0 AA CN 15kV 1/3", "4/0 AA", 1.21, 11, "14 Cu", 240},
	{"250 AA CN 15kV 1/3", "250 AA", 1.29, 13, "14 Cu", 260},
	{"350 AA CN 15kV 1/3", "350 AA", 1.39, 18, "14 Cu", 320},
	{"500 AA CN 15kV 1/3", "500 AA", 1.56, 16, "12 Cu", 385},
	{"750 AA CN 15kV 1/3", "750 AA", 1.79, 15, "10 Cu", 470},
	{"1/0 AA TS 15kV", "1/0 AA", 0.88, 0, "", 165},
	{"2/0 AA TS 15kV", "2/0 AA", 0.93, 0, "", 190},
	{"3/0 AA TS 15kV", "3/0 AA", 0.97, 0, "", 215},
	{"4/0 AA TS 15kV", "4/0 AA", 1.02, 0, "", 245},
	{"250 AA TS 15kV", "250 AA", 1.08, 0, "", 270},
}
