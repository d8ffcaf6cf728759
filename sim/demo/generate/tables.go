package main

import (
	"bytes"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// A sheet is a CSV table in the making.
type sheet struct {
	name string
	b    bytes.Buffer
}

// newSheet starts a table with comments and a header.
func newSheet(name, comment string, header ...string) *sheet {
	s := &sheet{name: name}
	for line := range strings.Lines(comment) {
		fmt.Fprintf(&s.b, "# %s\n", strings.TrimSuffix(line, "\n"))
	}
	s.row(header...)
	return s
}

// row adds a row; no cell of this study needs quotes.
func (s *sheet) row(cells ...string) {
	s.b.WriteString(strings.Join(cells, ","))
	s.b.WriteByte('\n')
}

func (s *sheet) file() file { return file{s.name, s.b.Bytes()} }

// number writes x with at most the given decimals and without trailing zeros.
func number(x float64, decimals int) string {
	s := strconv.FormatFloat(x, 'f', decimals, 64)
	if strings.Contains(s, ".") {
		s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
	}
	if s == "-0" {
		return "0"
	}
	return s
}

// point is a place on the map, m.
type point struct{ x, y float64 }

// towards is the point that lies some metres away at a bearing, degrees clockwise
// from north.
func (p point) towards(bearing, metres float64) point {
	sin, cos := math.Sincos(bearing * math.Pi / 180)
	return point{p.x + metres*sin, p.y + metres*cos}
}

// places walks the streets and returns every primary node's place, and their names
// in the order of the plan.
func places() (map[string]point, []string, error) {
	at := map[string]point{streets[0].from: {}}
	order := []string{streets[0].from}
	for _, l := range streets {
		p, ok := at[l.from]
		if !ok {
			return nil, nil, fmt.Errorf("street plan: node %q is not reached before it is left", l.from)
		}
		if _, twice := at[l.to]; twice {
			return nil, nil, fmt.Errorf("street plan: node %q is reached twice", l.to)
		}
		at[l.to] = p.towards(l.bearing, l.metres)
		order = append(order, l.to)
	}
	return at, order, nil
}

// areaOf returns the area of a node by the longest prefix that fits.
func areaOf(node string) string {
	best, name := 0, ""
	for _, a := range areas {
		for _, p := range a.prefixes {
			if strings.HasPrefix(node, p) && len(p) > best {
				best, name = len(p), a.name
			}
		}
	}
	return name
}

// lowNodes names the low-voltage node of each bank: the primary node's name and
// "-s", then "-s2".
func lowNodes() []string {
	names := make([]string, len(served))
	seen := map[string]int{}
	for i, s := range served {
		names[i] = s.at + "-s"
		if seen[s.at]++; seen[s.at] > 1 {
			names[i] += strconv.Itoa(seen[s.at])
		}
	}
	return names
}

// feederTables writes the tables that follow from the plan.
func feederTables() ([]file, error) {
	at, order, err := places()
	if err != nil {
		return nil, err
	}
	low := lowNodes()
	for i, s := range served {
		p, ok := at[s.at]
		if !ok {
			return nil, fmt.Errorf("banks: there is no node %q", s.at)
		}
		// The second bank at a pole is drawn on the other side.
		side := 40.0
		if strings.HasSuffix(low[i], "2") {
			side = -40
		}
		at[low[i]] = point{p.x + side, p.y - 30}
		order = append(order, low[i])
	}
	drops := serviceList(low)
	for _, s := range drops {
		at[s.meter] = at[s.from].towards(s.bearing, s.metres)
		order = append(order, s.meter)
	}
	nodes := newSheet("feeder/nodes.csv", "Places on the map. The streets are invented.\nWritten by sim/demo/generate.",
		"node", "x [m]", "y [m]", "area")
	for _, n := range order {
		p := at[n]
		nodes.row(n, number(p.x, 0), number(p.y, 0), areaOf(n))
	}
	return []file{nodes.file(), sectionTable(drops), transformerTable(low), loadTable(low, drops), generatorTable()}, nil
}

func sectionTable(drops []service) file {
	s := newSheet("feeder/sections.csv",
		"phases lists the phases in the order of the construction's positions. The last rows are the services,\non legs 1 and 2 of a centre-tapped secondary.\nWritten by sim/demo/generate.",
		"section", "from", "to", "phases", "length [m]", "construction")
	for _, l := range streets {
		if l.construction != "" {
			s.row(l.from+"-"+l.to, l.from, l.to, l.phases, number(l.metres, 0), l.construction)
		}
	}
	for _, d := range drops {
		s.row(d.from+"-"+d.meter, d.from, d.meter, "12", number(d.metres, 0), d.construction)
	}
	return s.file()
}

// unitData is a nameplate: no-load and load loss in W, impedance and exciting
// current in per cent.
type unitData struct{ kva, noLoad, loadLoss, impedance, exciting float64 }

// singles are modern liquid-filled single-phase units. No-load and load losses were
// chosen to meet the DOE minimum of 2016 (10 CFR 431.196), not measured;
// impedances and exciting currents are common practice.
var singles = []unitData{
	{25, 55, 300, 2.0, 0.8},
	{37.5, 76, 410, 2.1, 0.7},
	{50, 95, 510, 2.2, 0.7},
}

// threes are modern liquid-filled three-phase units, whose losses at half load make
// the efficiency of the DOE rule of 2016, 45 % of them in the core (a usual
// share); impedances follow IEEE C57.12.34 from 750 kVA, below it common practice.
var threes = []unitData{
	{150, 290, 1380, 3.0, 0.6},
	{225, 390, 1930, 3.3, 0.6},
	{300, 500, 2410, 3.8, 0.5},
	{500, 735, 3600, 4.3, 0.5},
}

// oldCore is the no-load loss of a unit of 1960 to 1990 over that of a modern one: 2
// to 3 in common practice.
const oldCore = 2.2

func transformerTable(low []string) file {
	s := newSheet("feeder/transformers.csv", `The first row is the substation's. A row of several units stands for the
transformers of a street in parallel: losses are those of all of them.
No-load and load losses of modern units meet the DOE minimum of 2016 (10 CFR 431.196);
units of 1960 to 1990 lose 2.2 times as much in the core (common practice: 2 to 3 times).
Where the card is missing, an old core is taken and the program assumes a typical impedance.
Written by sim/demo/generate.`,
		"transformer", "from", "to", "phases", "rating [kVA]", "high [kV]", "low [kV]", "connection",
		"impedance [%]", "x/r", "load loss [W]", "no-load loss [W]", "exciting current [%]", "note")
	s.row("T-sub", "sub-69", "sub-low", "ABC", "10000", "69", "12.47", "Dyn1",
		"8", "18", "", "11000", "0.5", "10 MVA self-cooled; load tap changer: see regulators.csv")
	for i, v := range served {
		high, lowKV, group, data := 7.2, 0.24, "center-tap", singles
		if len(v.phases) == 3 {
			high, lowKV, group, data = 12.47, v.low, v.group, threes
		}
		n := float64(v.units)
		cells := []string{"T-" + strings.TrimSuffix(low[i], "-s"), v.at, low[i], v.phases,
			number(n*v.kva, 1), number(high, 3), number(lowKV, 3), group}
		d := nameplate(data, v.kva)
		note := fmt.Sprintf("%d × %s kVA", v.units, number(v.kva, 1))
		if v.remark != "" {
			note += "; " + v.remark
		}
		switch v.age {
		case old:
			d.noLoad *= oldCore
			d.exciting *= 1.5
			note += "; 1960 to 1990"
		case unknown:
			s.row(append(cells, "", "", "", number(n*d.noLoad*oldCore, 0), "", note+"; card missing")...)
			continue
		}
		s.row(append(cells, number(d.impedance, 1), "", number(n*d.loadLoss, 0), number(n*d.noLoad, 0),
			number(d.exciting, 2), note)...)
	}
	return s.file()
}

// nameplate returns the row of the given size.
func nameplate(data []unitData, kva float64) unitData {
	for _, d := range data {
		if d.kva == kva {
			return d
		}
	}
	panic(fmt.Sprintf("generate: no nameplate of %g kVA", kva))
}

// profileName is the column of a class's variant.
func profileName(c class, variant int) string {
	return classes[c].name + strconv.Itoa(variant)
}

func loadTable(low []string, drops []service) file {
	s := newSheet("feeder/loads.csv", `real [kW] is at nominal voltage and at the height of the profile.
The works at mill4, mill5 and main5 are metered at 12.47 kV.
At a service the customers of a meter node take their 120 V loads from legs 1 and 2 and their 240 V loads across
both (12), where they are counted.
Written by sim/demo/generate.`,
		"load", "node", "phases", "connection", "real [kW]", "power factor", "zip", "profile", "customers")
	row := func(suffix, node, phases, connection string, kw float64, customers int, l load) {
		c := classes[l.class]
		s.row(node+"-"+profileName(l.class, l.variant)+suffix, node, phases, connection, number(kw, 2), number(c.powerFactor, 3),
			c.zip, profileName(l.class, l.variant), strconv.Itoa(customers))
	}
	for i := range drops {
		d := &drops[i]
		one, two, across := d.legKW()
		row("-1", d.meter, "1", "wye", one, 0, d.load)
		row("-2", d.meter, "2", "wye", two, 0, d.load)
		row("-12", d.meter, "12", "wye", across, d.load.customers, d.load)
	}
	for i, v := range served {
		if len(v.phases) == 1 {
			continue
		}
		connection := "wye"
		if strings.HasSuffix(v.group, "d0") {
			connection = "delta"
		}
		for _, l := range v.loads {
			row("", low[i], v.phases, connection, l.kw, l.customers, l)
		}
	}
	for _, d := range directs {
		row("", d.at, "ABC", "wye", d.kw, d.customers, d.load)
	}
	return s.file()
}

func generatorTable() file {
	s := newSheet("feeder/generators.csv", "Solar plants at unity power factor; their profiles are per unit of the rating.\nWritten by sim/demo/generate.",
		"generator", "node", "phases", "kind", "rating [kVA]", "power factor", "profile")
	for _, p := range plants {
		s.row(p.name, p.node, p.phases, "solar", number(p.kva, 0), "1", p.name)
	}
	return s.file()
}
