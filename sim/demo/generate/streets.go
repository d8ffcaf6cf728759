package main

// A leg is one span of street with a line or a cable in it: it leads from a node
// that an earlier leg made to a new one.
type leg struct {
	from, to     string
	phases       string // in the order of the construction's positions
	construction string // blank: a regulator or a switch stands here, with a row of its own
	metres       float64
	bearing      float64 // degrees, clockwise from north
}

// An area is a part of the town with the nodes whose names begin with one of
// the prefixes.
type area struct {
	name     string
	prefixes []string
}

var areas = []area{
	{"Substation", []string{"sub-"}},
	{"Old Town", []string{"main", "aspen", "birch", "foundry", "M01", "M02", "M03", "M04", "M05", "M06"}},
	{"Millrace", []string{"mill"}},
	{"Cottonwood Draw", []string{"cotton"}},
	{"Orchard Flat", []string{"orchard", "elk", "fir", "juniper", "M07", "M08", "M09", "M10", "M11", "M12", "M13"}},
	{"Lark Bench", []string{"bench", "lark", "M14", "M15"}},
	{"Tallgrass Canyon", []string{"canyon", "sage", "gulch", "hawk", "M16", "M17", "M18", "M19", "M20"}},
}

// streets is the plan of the feeder: the trunk M01 to M20 runs 13 km from the
// Saltlick substation through Quillwater to Tallgrass Canyon.
var streets = []leg{
	// The yard: transformer, load tap changer, exit cable.
	{"sub-69", "sub-low", "ABC", "", 15, 90},
	{"sub-low", "sub-bus", "ABC", "", 10, 90},
	{"sub-bus", "M01", "ABC", "exit-750", 350, 80},

	// Trunk, first part: Saltlick Road to the first regulator bank.
	{"M01", "M02", "ABC", "trunk-477", 520, 75},
	{"M02", "M03", "ABC", "trunk-477", 610, 75},
	{"M03", "M04", "ABC", "trunk-477", 580, 70},
	{"M04", "M05", "ABC", "trunk-477", 700, 70},
	{"M05", "M06", "ABC", "trunk-477", 620, 65},
	{"M06", "M07", "ABC", "trunk-477", 730, 65},
	{"M07", "M08", "ABC", "", 20, 65}, // regulator bank R1

	// Trunk, second part: the flat, to the second regulator bank.
	{"M08", "M09", "BCA", "trunk-336", 690, 60},
	{"M09", "M10", "BCA", "trunk-336", 800, 55},
	{"M10", "M11", "BCA", "trunk-336", 710, 50},
	{"M11", "M12", "BCA", "trunk-336", 820, 45},
	{"M12", "M13", "BCA", "trunk-336", 700, 45},
	{"M13", "M14", "ABC", "", 20, 45}, // regulator bank R2

	// Trunk, third part: up Tallgrass Creek.
	{"M14", "M15", "CAB", "three-4/0", 900, 40},
	{"M15", "M16", "CAB", "three-4/0", 880, 35},
	{"M16", "M17", "CAB", "three-4/0", 820, 30},
	{"M17", "M18", "CAB", "three-4/0", 910, 25},
	{"M18", "M19", "CAB", "three-4/0", 900, 30},
	{"M19", "M20", "CAB", "three-4/0", 790, 20},

	// Millrace Road: works along the old millrace.
	{"M04", "mill1", "ABC", "trunk-336", 360, 160},
	{"mill1", "mill2", "ABC", "trunk-336", 420, 165},
	{"mill2", "mill3", "ABC", "trunk-336", 480, 170},
	{"mill3", "mill4", "ABC", "trunk-336", 450, 160},
	{"mill4", "mill5", "ABC", "trunk-336", 510, 150},

	// Main Street: cable in ducts through the centre.
	{"M05", "main1", "ABC", "", 15, 340}, // the cable's riser switch
	{"main1", "main2", "ABC", "main-500", 260, 340},
	{"main2", "main3", "ABC", "main-500", 310, 345},
	{"main3", "main4", "ABC", "main-4/0", 290, 350},
	{"main4", "main5", "ABC", "main-4/0", 330, 10},
	{"main3", "main6", "ABC", "main-4/0", 280, 70},

	// Foundry Lane.
	{"M06", "foundry1", "ABC", "three-1/0", 380, 150},
	{"foundry1", "foundry2", "ABC", "three-1/0", 450, 140},

	// Orchard Flat: irrigated land, a long three-phase branch on light wire.
	{"M11", "orchard1", "ABC", "three-1/0", 520, 130},
	{"orchard1", "orchard2", "ABC", "three-1/0", 610, 125},
	{"orchard2", "orchard3", "ABC", "three-1/0", 580, 120},
	{"orchard3", "orchard4", "ABC", "three-1/0", 620, 110},
	{"orchard4", "orchard5", "ABC", "three-1/0", 560, 80},
	{"orchard5", "orchard6", "ABC", "three-1/0", 640, 70},
	{"orchard6", "orchard7", "ABC", "three-1/0", 600, 60},
	{"orchard7", "orchard8", "ABC", "three-1/0", 620, 30},

	// Bench Road and the Lark Bench subdivision, whose streets are cable.
	{"M15", "bench1", "ABC", "three-1/0", 550, 320},
	{"bench1", "bench2", "ABC", "three-1/0", 600, 325},
	{"bench2", "bench3", "ABC", "bench-1/0", 420, 330},
	{"bench3", "bench4", "ABC", "bench-1/0", 380, 0},
	{"bench3", "lark1", "A", "street-1/0", 340, 270},
	{"bench4", "lark2", "B", "street-1/0", 380, 280},
	{"bench4", "lark3", "C", "street-1/0", 410, 45},

	// The end of the trunk: Tallgrass Canyon.
	{"M20", "canyon1", "ABC", "three-1/0", 620, 350},
	{"canyon1", "canyon2", "ABC", "three-1/0", 700, 10},
	{"canyon2", "canyon3", "ABC", "three-1/0", 580, 30},

	// Two-phase laterals.
	{"M09", "juniper1", "BC", "two-1/0", 480, 340},
	{"juniper1", "juniper2", "BC", "two-1/0", 520, 345},
	{"juniper2", "juniper3", "BC", "two-1/0", 560, 330},
	{"M17", "sage1", "AB", "two-1/0", 500, 120},
	{"sage1", "sage2", "AB", "two-1/0", 620, 110},
	{"sage2", "sage3", "AB", "two-1/0", 680, 100},

	// Single-phase laterals.
	{"M03", "aspen1", "A", "one-2", 330, 350},
	{"aspen1", "aspen2", "A", "one-2", 380, 350},
	{"aspen2", "aspen3", "A", "one-2", 410, 340},
	{"M03", "birch1", "B", "one-2", 350, 165},
	{"birch1", "birch2", "B", "one-2", 420, 170},
	{"M07", "cotton1", "C", "one-2", 900, 330},
	{"cotton1", "cotton2", "C", "one-2", 950, 335},
	{"cotton2", "cotton3", "C", "one-2", 1000, 345},
	{"cotton3", "cotton4", "C", "one-4", 1100, 350},
	{"cotton4", "cotton5", "C", "one-4", 1150, 330},
	{"M12", "elk1", "B", "one-2", 620, 320},
	{"elk1", "elk2", "B", "one-2", 700, 330},
	{"M10", "fir1", "A", "one-2", 540, 150},
	{"fir1", "fir2", "A", "one-2", 610, 155},
	{"M18", "gulch1", "C", "one-4", 820, 300},
	{"gulch1", "gulch2", "C", "one-4", 900, 310},
	{"gulch2", "gulch3", "C", "one-4", 980, 325},
	{"canyon2", "hawk1", "A", "one-4", 850, 310},
}
