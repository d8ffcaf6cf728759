package main

// A bank is a row of distribution transformers with the loads behind it. The
// low-voltage node has the primary node's name with "-s" or "-s2" after it. Several
// units stand for the transformers of a street in parallel. Single-phase units are
// centre-tapped, 120/240 V, and their loads stand at the ends of services: see
// drops.go. Those of three-phase banks stand at the low-voltage node.
type bank struct {
	at     string // primary node
	phases string
	units  int
	kva    float64 // of one unit (three-phase: of the bank)
	age    age
	loads  []load
	low    float64 // kV, of a three-phase bank
	group  string  // connection of a three-phase bank
	remark string  // beside the nameplate
}

// A load is what one class of customers takes at the height of its own profile.
type load struct {
	class     class
	variant   int     // of the class's profiles
	kw        float64 // total
	customers int
}

// age tells how much a transformer's core loses.
type age int

const (
	modern  age = iota
	old         // built 1960 to 1990: 2 to 3 times the no-load loss (common practice)
	unknown     // the card is missing: an old core, and the program assumes a typical impedance
)

type class int

const (
	homes class = iota
	shops
	offices
	works
	pumps
)

// classes says how a class behaves: its power factor at nominal voltage and its
// row of zip.csv.
var classes = [...]struct {
	name        string
	powerFactor float64
	zip         string
}{
	homes:   {"homes", 0.95, "homes"},
	shops:   {"shops", 0.92, "shops"},
	offices: {"offices", 0.91, "offices"},
	works:   {"works", 0.87, "works"},
	pumps:   {"pumps", 0.86, "power"},
}

// served lists the banks, street by street.
var served = []bank{
	{at: "aspen1", phases: "A", units: 3, kva: 50, age: old, loads: []load{{homes, 1, 88, 32}, {homes, 2, 57, 21}}},
	{at: "aspen2", phases: "A", units: 3, kva: 37.5, age: old, loads: []load{{homes, 2, 64, 23}, {homes, 4, 48, 17}}},
	{at: "aspen3", phases: "A", units: 3, kva: 37.5, loads: []load{{homes, 3, 68, 25}, {shops, 1, 16, 2}}},
	{at: "birch1", phases: "B", units: 3, kva: 50, age: old, loads: []load{{homes, 1, 82, 30}, {homes, 5, 62, 23}}},
	{at: "birch2", phases: "B", units: 4, kva: 37.5, age: old, loads: []load{{homes, 2, 78, 28}, {homes, 3, 60, 22}}},
	{at: "cotton1", phases: "C", units: 3, kva: 37.5, loads: []load{{homes, 3, 46, 17}, {homes, 5, 28, 10}}},
	{at: "cotton2", phases: "C", units: 3, kva: 37.5, age: old, loads: []load{{homes, 1, 36, 13}, {homes, 4, 30, 11}}},
	{at: "cotton3", phases: "C", units: 2, kva: 37.5, age: unknown, loads: []load{{homes, 2, 43, 16}, {works, 2, 12, 1}}},
	{at: "cotton4", phases: "C", units: 3, kva: 25, loads: []load{{homes, 5, 40, 15}, {homes, 3, 31, 11}}},
	{at: "cotton5", phases: "C", units: 3, kva: 25, age: old, loads: []load{{homes, 4, 46, 17}, {homes, 1, 28, 10}}},
	{at: "elk1", phases: "B", units: 3, kva: 37.5, loads: []load{{homes, 5, 65, 24}, {homes, 2, 43, 16}}},
	{at: "elk2", phases: "B", units: 3, kva: 37.5, age: old, loads: []load{{homes, 4, 71, 26}, {shops, 2, 18, 2}}},
	{at: "fir1", phases: "A", units: 3, kva: 50, loads: []load{{homes, 3, 74, 27}, {homes, 1, 47, 17}}},
	{at: "fir2", phases: "A", units: 3, kva: 37.5, age: old, loads: []load{{homes, 5, 70, 25}, {homes, 2, 40, 15}}},
	{at: "juniper1", phases: "B", units: 3, kva: 37.5, loads: []load{{homes, 1, 72, 26}, {homes, 4, 37, 13}}},
	{at: "juniper2", phases: "C", units: 3, kva: 50, age: old, loads: []load{{homes, 2, 68, 25}, {homes, 3, 43, 16}}},
	{at: "juniper3", phases: "B", units: 2, kva: 37.5, loads: []load{{homes, 5, 57, 21}}},
	{at: "juniper3", phases: "C", units: 3, kva: 37.5, loads: []load{{homes, 3, 62, 23}, {homes, 4, 38, 14}}},
	{at: "sage1", phases: "A", units: 3, kva: 37.5, age: unknown, loads: []load{{homes, 1, 54, 20}, {homes, 4, 28, 10}}},
	{at: "sage2", phases: "B", units: 2, kva: 37.5, loads: []load{{homes, 2, 60, 22}, {homes, 5, 26, 9}}},
	{at: "sage3", phases: "A", units: 2, kva: 37.5, age: old, loads: []load{{homes, 3, 62, 23}}},
	{at: "sage3", phases: "B", units: 2, kva: 25, age: old, loads: []load{{homes, 4, 37, 13}}},
	{at: "gulch1", phases: "C", units: 3, kva: 37.5, loads: []load{{homes, 5, 48, 17}, {homes, 1, 31, 11}}},
	{at: "gulch2", phases: "C", units: 2, kva: 37.5, age: old, loads: []load{{homes, 3, 45, 16}, {homes, 2, 28, 10}}},
	{at: "gulch3", phases: "C", units: 3, kva: 50, loads: []load{{homes, 4, 51, 19}}},
	{at: "hawk1", phases: "A", units: 2, kva: 25, age: old, loads: []load{{homes, 2, 43, 16}}},
	{at: "lark1", phases: "A", units: 3, kva: 50, loads: []load{{homes, 1, 94, 34}, {homes, 3, 57, 21}}},
	{at: "lark2", phases: "B", units: 3, kva: 50, loads: []load{{homes, 2, 88, 32}, {homes, 4, 62, 23}}},
	{at: "lark3", phases: "C", units: 3, kva: 50, loads: []load{{homes, 5, 97, 35}, {homes, 3, 54, 20}}},

	{at: "mill1", phases: "ABC", units: 1, kva: 300, low: 0.48, group: "YNyn0", loads: []load{{works, 1, 190, 1}, {offices, 2, 52, 1}}},
	{at: "mill2", phases: "ABC", units: 1, kva: 150, age: old, low: 0.208, group: "Dyn1", loads: []load{{works, 2, 94, 2}, {shops, 2, 39, 1}}},
	{at: "mill3", phases: "ABC", units: 1, kva: 500, low: 0.48, group: "YNyn0", loads: []load{{works, 3, 325, 1}, {offices, 1, 91, 1}}},
	{at: "main2", phases: "ABC", units: 1, kva: 500, low: 0.208, group: "YNyn0", loads: []load{{shops, 1, 245, 14}, {offices, 1, 180, 9}}},
	{at: "main3", phases: "ABC", units: 1, kva: 500, low: 0.48, group: "YNyn0", loads: []load{{shops, 2, 300, 1}, {shops, 1, 115, 6}}},
	{at: "main4", phases: "ABC", units: 1, kva: 300, low: 0.208, group: "YNyn0", loads: []load{{homes, 5, 213, 77}, {shops, 1, 52, 3}}},
	{at: "main5", phases: "ABC", units: 1, kva: 500, low: 0.48, group: "YNyn0", loads: []load{{offices, 2, 340, 3}, {shops, 2, 78, 2}}},
	{at: "main6", phases: "ABC", units: 1, kva: 300, age: old, low: 0.208, group: "YNyn0", loads: []load{{offices, 1, 155, 11}, {homes, 4, 114, 41}}},
	{at: "foundry1", phases: "ABC", units: 2, kva: 150, low: 0.208, group: "YNyn0", loads: []load{{homes, 1, 170, 62}, {homes, 2, 128, 47}}},
	{at: "foundry2", phases: "ABC", units: 1, kva: 300, age: old, low: 0.48, group: "Dyn1", loads: []load{{works, 1, 200, 1}, {works, 2, 50, 2}}},
	{at: "orchard2", phases: "ABC", units: 1, kva: 225, low: 0.208, group: "YNyn0", loads: []load{{homes, 4, 135, 49}, {shops, 1, 46, 3}}},
	{at: "orchard4", phases: "ABC", units: 1, kva: 225, age: old, low: 0.48, group: "Dd0", remark: "overloaded on purpose; check tells of it", loads: []load{{pumps, 1, 200, 3}}},
	{at: "orchard6", phases: "ABC", units: 1, kva: 225, low: 0.48, group: "Dyn1", loads: []load{{pumps, 2, 175, 2}, {works, 2, 50, 1}}},
	{at: "orchard8", phases: "ABC", units: 1, kva: 300, low: 0.48, group: "YNyn0", loads: []load{{pumps, 1, 120, 2}, {homes, 5, 85, 31}, {works, 3, 62, 1}}},
	{at: "bench2", phases: "ABC", units: 1, kva: 150, low: 0.208, group: "YNyn0", loads: []load{{shops, 2, 78, 4}, {homes, 2, 43, 16}}},
	{at: "bench4", phases: "ABC", units: 1, kva: 300, low: 0.48, group: "YNyn0", loads: []load{{offices, 2, 145, 1}, {homes, 1, 106, 39}}},
	{at: "M16", phases: "ABC", units: 1, kva: 225, age: old, low: 0.208, group: "YNyn0", loads: []load{{homes, 3, 128, 47}, {shops, 1, 46, 2}}},
	{at: "canyon2", phases: "ABC", units: 1, kva: 225, low: 0.48, group: "YNyn0", loads: []load{{pumps, 2, 130, 2}, {homes, 2, 57, 21}}},
}

// A direct load takes its power at 12.47 kV and owns its transformers.
type direct struct {
	at string
	load
}

var directs = []direct{
	{"mill5", load{works, 1, 525, 1}},
	{"mill4", load{works, 3, 225, 1}},
	{"main5", load{offices, 2, 210, 1}},
}

// A plant is a solar generator with a profile of its own.
type plant struct {
	name, node, phases string
	kva                float64
	tilt, azimuth      float64 // degrees; azimuth from north
	ratio              float64 // module kW per kW of inverter rating
	lag                float64 // h by which the clouds reach it after the weather station
}

// plants add up to 1500 kVA.
var plants = []plant{
	{"solar-canyon", "canyon3", "ABC", 500, 30, 180, 1.25, 0.15},
	{"solar-orchard", "orchard7", "ABC", 350, 25, 180, 1.20, 0.08},
	{"solar-mill", "mill3-s", "ABC", 250, 10, 170, 1.15, 0.02},
	{"solar-main", "main5-s", "ABC", 110, 10, 200, 1.10, 0},
	{"solar-bench", "bench4-s", "ABC", 150, 15, 190, 1.15, 0.12},
	{"solar-gulch", "gulch3-s", "12", 140, 30, 210, 1.20, 0.14},
}
