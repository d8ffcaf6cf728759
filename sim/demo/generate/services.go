package main

// A service is a bank of distribution transformers with the loads behind it. The
// low-voltage node has the primary node's name with "-s" or "-s2" after it. Several
// units stand for the transformers of a street in parallel.
type service struct {
	at     string // primary node
	phases string
	units  int
	kva    float64 // of one unit (three-phase: of the bank)
	age    age
	loads  []load
	low    float64 // kV; 0: 0.24
	group  string  // connection of a three-phase bank
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
	unknown     // the record is blank: the program assumes a typical unit
)

type class int

const (
	homes class = iota
	shops
	offices
	works
	pumps
)

// className and classes say how a class behaves: its power factor at nominal voltage and its
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

// services lists the banks, street by street.
var services = []service{
	{at: "aspen1", phases: "A", units: 3, kva: 50, age: old, loads: []load{{homes, 1, 62, 24}, {homes, 2, 40, 15}}},
	{at: "aspen2", phases: "A", units: 3, kva: 37.5, age: old, loads: []load{{homes, 2, 45, 17}, {homes, 4, 34, 13}}},
	{at: "aspen3", phases: "A", units: 3, kva: 37.5, loads: []load{{homes, 3, 48, 18}, {shops, 1, 12, 2}}},
	{at: "birch1", phases: "B", units: 3, kva: 50, age: old, loads: []load{{homes, 1, 58, 22}, {homes, 5, 44, 17}}},
	{at: "birch2", phases: "B", units: 4, kva: 37.5, age: old, loads: []load{{homes, 2, 55, 21}, {homes, 3, 42, 16}}},
	{at: "cotton1", phases: "C", units: 2, kva: 37.5, loads: []load{{homes, 3, 36, 12}, {homes, 5, 22, 8}}},
	{at: "cotton2", phases: "C", units: 3, kva: 25, age: old, loads: []load{{homes, 1, 30, 10}, {homes, 4, 26, 9}}},
	{at: "cotton3", phases: "C", units: 2, kva: 37.5, age: unknown, loads: []load{{homes, 2, 38, 13}, {works, 2, 10, 1}}},
	{at: "cotton4", phases: "C", units: 3, kva: 25, loads: []load{{homes, 5, 31, 11}, {homes, 3, 24, 8}}},
	{at: "cotton5", phases: "C", units: 3, kva: 25, age: old, loads: []load{{homes, 4, 36, 12}, {homes, 1, 22, 8}}},
	{at: "elk1", phases: "B", units: 3, kva: 37.5, loads: []load{{homes, 5, 46, 17}, {homes, 2, 30, 11}}},
	{at: "elk2", phases: "B", units: 3, kva: 37.5, age: old, loads: []load{{homes, 4, 50, 18}, {shops, 2, 14, 2}}},
	{at: "fir1", phases: "A", units: 3, kva: 37.5, loads: []load{{homes, 3, 52, 19}, {homes, 1, 33, 12}}},
	{at: "fir2", phases: "A", units: 3, kva: 37.5, age: old, loads: []load{{homes, 5, 49, 18}, {homes, 2, 28, 10}}},
	{at: "juniper1", phases: "B", units: 2, kva: 50, loads: []load{{homes, 1, 51, 18}, {homes, 4, 26, 9}}},
	{at: "juniper2", phases: "C", units: 2, kva: 50, age: old, loads: []load{{homes, 2, 48, 17}, {homes, 3, 30, 11}}},
	{at: "juniper3", phases: "B", units: 2, kva: 37.5, loads: []load{{homes, 5, 40, 14}}},
	{at: "juniper3", phases: "C", units: 3, kva: 37.5, loads: []load{{homes, 3, 44, 16}, {homes, 4, 27, 10}}},
	{at: "sage1", phases: "A", units: 2, kva: 37.5, age: unknown, loads: []load{{homes, 1, 38, 14}, {homes, 4, 20, 7}}},
	{at: "sage2", phases: "B", units: 2, kva: 37.5, loads: []load{{homes, 2, 42, 15}, {homes, 5, 18, 6}}},
	{at: "sage3", phases: "A", units: 2, kva: 37.5, age: old, loads: []load{{homes, 3, 44, 16}}},
	{at: "sage3", phases: "B", units: 2, kva: 25, age: old, loads: []load{{homes, 4, 26, 9}}},
	{at: "gulch1", phases: "C", units: 2, kva: 37.5, loads: []load{{homes, 5, 34, 12}, {homes, 1, 22, 8}}},
	{at: "gulch2", phases: "C", units: 2, kva: 37.5, age: old, loads: []load{{homes, 3, 32, 11}, {homes, 2, 20, 7}}},
	{at: "gulch3", phases: "C", units: 2, kva: 50, loads: []load{{homes, 4, 36, 13}}},
	{at: "hawk1", phases: "A", units: 2, kva: 25, age: old, loads: []load{{homes, 2, 30, 10}}},
	{at: "lark1", phases: "A", units: 3, kva: 50, loads: []load{{homes, 1, 66, 26}, {homes, 3, 40, 16}}},
	{at: "lark2", phases: "B", units: 3, kva: 50, loads: []load{{homes, 2, 62, 24}, {homes, 4, 44, 18}}},
	{at: "lark3", phases: "C", units: 3, kva: 50, loads: []load{{homes, 5, 68, 27}, {homes, 3, 38, 15}}},

	{at: "mill1", phases: "ABC", units: 1, kva: 300, low: 0.48, group: "YNyn0", loads: []load{{works, 1, 150, 1}, {offices, 2, 40, 1}}},
	{at: "mill2", phases: "ABC", units: 1, kva: 150, age: old, low: 0.208, group: "Dyn1", loads: []load{{works, 2, 75, 2}, {shops, 2, 30, 1}}},
	{at: "mill3", phases: "ABC", units: 1, kva: 500, low: 0.48, group: "YNyn0", loads: []load{{works, 3, 260, 1}, {offices, 1, 70, 1}}},
	{at: "main2", phases: "ABC", units: 1, kva: 500, low: 0.208, group: "YNyn0", loads: []load{{shops, 1, 190, 14}, {offices, 1, 140, 9}}},
	{at: "main3", phases: "ABC", units: 1, kva: 500, low: 0.48, group: "YNyn0", loads: []load{{shops, 2, 230, 1}, {shops, 1, 90, 6}}},
	{at: "main4", phases: "ABC", units: 1, kva: 300, low: 0.208, group: "YNyn0", loads: []load{{homes, 5, 150, 68}, {shops, 1, 40, 3}}},
	{at: "main5", phases: "ABC", units: 1, kva: 500, low: 0.48, group: "YNyn0", loads: []load{{offices, 2, 260, 3}, {shops, 2, 60, 2}}},
	{at: "main6", phases: "ABC", units: 1, kva: 300, age: old, low: 0.208, group: "YNyn0", loads: []load{{offices, 1, 120, 11}, {homes, 4, 80, 36}}},
	{at: "foundry1", phases: "ABC", units: 2, kva: 150, low: 0.208, group: "YNyn0", loads: []load{{homes, 1, 120, 45}, {homes, 2, 90, 34}}},
	{at: "foundry2", phases: "ABC", units: 1, kva: 300, age: old, low: 0.48, group: "Dyn1", loads: []load{{works, 1, 160, 1}, {works, 2, 40, 2}}},
	{at: "orchard2", phases: "ABC", units: 1, kva: 225, low: 0.208, group: "YNyn0", loads: []load{{homes, 4, 95, 33}, {shops, 1, 35, 3}}},
	{at: "orchard4", phases: "ABC", units: 1, kva: 225, age: old, low: 0.48, group: "Dd0", loads: []load{{pumps, 1, 150, 3}}},
	{at: "orchard6", phases: "ABC", units: 1, kva: 225, low: 0.48, group: "Dyn1", loads: []load{{pumps, 2, 130, 2}, {works, 2, 40, 1}}},
	{at: "orchard8", phases: "ABC", units: 1, kva: 300, low: 0.48, group: "YNyn0", loads: []load{{pumps, 1, 90, 2}, {homes, 5, 60, 20}, {works, 3, 50, 1}}},
	{at: "bench2", phases: "ABC", units: 1, kva: 150, low: 0.208, group: "YNyn0", loads: []load{{shops, 2, 60, 4}, {homes, 2, 30, 12}}},
	{at: "bench4", phases: "ABC", units: 1, kva: 300, low: 0.48, group: "YNyn0", loads: []load{{offices, 2, 110, 1}, {homes, 1, 75, 29}}},
	{at: "M16", phases: "ABC", units: 1, kva: 225, age: old, low: 0.208, group: "YNyn0", loads: []load{{homes, 3, 90, 33}, {shops, 1, 35, 2}}},
	{at: "canyon2", phases: "ABC", units: 1, kva: 225, low: 0.48, group: "YNyn0", loads: []load{{pumps, 2, 95, 2}, {homes, 2, 40, 13}}},
}

// A direct load takes its power at 12.47 kV and owns its transformers.
type direct struct {
	at string
	load
}

var directs = []direct{
	{"mill5", load{works, 1, 420, 1}},
	{"mill4", load{works, 3, 180, 1}},
	{"main5", load{offices, 2, 160, 1}},
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
	{"solar-main", "main5-s", "ABC", 150, 10, 200, 1.10, 0},
	{"solar-bench", "bench4-s", "ABC", 150, 15, 190, 1.15, 0.12},
	{"solar-gulch", "gulch3-s", "C", 100, 30, 210, 1.20, 0.14},
}
