package synthetic

import (
	"bytes"
	"fmt"
	"strconv"
	"strings"
	"testing/fstest"
	"time"
)

// sheet is a CSV table in the making.
type sheet struct{ b bytes.Buffer }

func newSheet(header string) *sheet {
	s := &sheet{}
	s.b.WriteString("# Written by sim/synthetic; describes no real place.\n" + header + "\n")
	return s
}

func (s *sheet) row(cells ...string) {
	s.b.WriteString(strings.Join(cells, ","))
	s.b.WriteByte('\n')
}

func (s *sheet) file() *fstest.MapFile {
	return &fstest.MapFile{Data: s.b.Bytes(), Mode: 0o666}
}

// number writes x with at most the given decimals and without trailing zeros.
func number(x float64, decimals int) string {
	s := strconv.FormatFloat(x, 'f', decimals, 64)
	if strings.Contains(s, ".") {
		s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
	}
	return s
}

func busName(i int) string { return fmt.Sprintf("b%05d", i) }

// files writes the plan down: study.toml and every table, without the profiles.
func (p *plan) files(o Options) fstest.MapFS {
	out := fstest.MapFS{
		"study.toml":                    {Data: []byte(studyText(o, len(p.buses))), Mode: 0o666},
		"feeder/source.csv":             fixed("node,nominal [kV],voltage [pu],short circuit 3ph [MVA],x/r 3ph,short circuit 1ph [MVA],x/r 1ph\n" + busName(0) + ",12.47,1.03,250,8,200,6\n"),
		"feeder/constructions.csv":      fixed(constructions),
		"feeder/spacings.csv":           fixed(spacings),
		"feeder/zip.csv":                fixed("zip,pz,pi,pp,qz,qi,qp\nmixed,0.4,0.2,0.4,0.4,0.2,0.4\n"),
		"feeder/sections.csv":           p.sections(),
		"feeder/transformers.csv":       p.transformers(),
		"feeder/loads.csv":              p.loadTable(),
		"feeder/capacitor-settings.csv": p.capacitorSettings(),
		"feeder/regulator-settings.csv": fixed(regulatorSettings),
	}
	out["feeder/regulators.csv"], out["feeder/capacitors.csv"] = p.devices()
	return out
}

func fixed(text string) *fstest.MapFile {
	return &fstest.MapFile{Data: []byte("# Written by sim/synthetic; describes no real place.\n" + text), Mode: 0o666}
}

func studyText(o Options, buses int) string {
	repeat := "none"
	if o.ProfileDays < o.Days {
		repeat = "day"
		if o.ProfileDays%7 == 0 {
			repeat = "week"
		}
	}
	log := "step"
	if o.Step < time.Hour {
		log = "1h"
	}
	return fmt.Sprintf(`# Written by sim/synthetic; describes no real place.
title = "Synthetic feeder of %d buses, seed %d"

[period]
start = %s
end = %s
step = "%ds"
zone = "UTC"

[[profiles]]
files = ["profiles/*.csv"]
stamped = "start"
interpolate = %t
repeat = %q

[run]
voltages = "none"
log = %q
`, buses, o.Seed, o.Start.Format(time.DateOnly), o.Start.AddDate(0, 0, o.Days).Format(time.DateOnly),
		int(o.Step/time.Second), o.Inputs == Minutes, repeat, log)
}

// The conductors and cables are those of the built-in handbook.
const constructions = `construction,kind,spacing,phase conductor,neutral conductor
trunk,overhead,crossarm-3,556.5 26/7 ACSR,4/0 6/1 ACSR
three,overhead,crossarm-3,4/0 6/1 ACSR,1/0 6/1 ACSR
two,overhead,crossarm-2,1/0 6/1 ACSR,2 6/1 ACSR
one,overhead,pole-1,2 6/1 ACSR,2 6/1 ACSR
cable-3,concentric neutral,trench-3,4/0 AA CN 15kV 1/3,
cable-1,concentric neutral,trench-1,1/0 AA CN 15kV full,
`

// The crossarm is the four-wire spacing of Kersting, Distribution System Modeling and
// Analysis, example 4.1; the poles and trenches are common practice.
const spacings = `spacing,position,x [ft],y [ft]
crossarm-3,1,0,29
crossarm-3,2,2.5,29
crossarm-3,3,7,29
crossarm-3,N,4,25
crossarm-2,1,0,29
crossarm-2,2,7,29
crossarm-2,N,4,25
pole-1,1,0.5,29
pole-1,N,0.5,24
trench-3,1,0,-4
trench-3,2,0.625,-4
trench-3,3,1.25,-4
trench-1,1,0,-4
`

const regulatorSettings = `regulator,phase,set [V],bandwidth [V],delay [s],tap time [s]
R1,all,122,2,30,5
R2,all,122,2,45,5
R3,all,122,2,60,5
`

func (p *plan) capacitorSettings() *fstest.MapFile {
	s := newSheet("capacitor,control,phase,voltage on [V],voltage off [V],delay [s],lockout [s]")
	s.row("C1", "held", "", "", "", "", "")
	s.row("C2", "voltage", "B", number(p.on[1], 1), number(p.off[1], 1), "90", "300")
	s.row("C3", "voltage", "A", number(p.on[2], 1), number(p.off[2], 1), "120", "300")
	s.row("C4", "held", "", "", "", "", "")
	return s.file()
}

func (p *plan) sections() *fstest.MapFile {
	s := newSheet("section,from,to,phases,length [m],construction")
	for i, b := range p.buses {
		if i > 0 && b.link == line {
			s.row("s"+busName(i)[1:], busName(b.before), busName(i), b.phases, number(b.km*1000, 1), b.construction)
		}
	}
	return s.file()
}

// transformers writes the service transformers. Losses and exciting current are common
// practice for modern units: core 0.2 %, copper 1 %, exciting 0.5 % of the rating.
func (p *plan) transformers() *fstest.MapFile {
	s := newSheet("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],load loss [W],no-load loss [W],exciting current [%]")
	for i, b := range p.buses {
		if b.link != bank {
			continue
		}
		phases, z := b.phases, "2.2"
		switch b.connection {
		case "center-tap":
			phases = b.construction
		case "Dyn1", "YNyn0":
			z = "4"
		}
		s.row("t"+busName(i)[1:], busName(b.before), busName(i), phases, number(b.kVA, 1), number(b.high, 3), number(b.low, 3), b.connection,
			z, number(10*b.kVA, 1), number(2*b.kVA, 1), "0.5")
	}
	return s.file()
}

func (p *plan) loadTable() *fstest.MapFile {
	s := newSheet("load,node,phases,connection,real [kW],power factor,zip,profile")
	for i, l := range p.spots {
		connection, zip := "wye", "power"
		if l.delta {
			connection = "delta"
		}
		if l.zip {
			zip = "mixed"
		}
		s.row(fmt.Sprintf("l%05d", i+1), busName(l.bus), l.phases, connection, number(l.weight*p.kW, 3), number(l.factor, 3), zip, shapeName(l.shape))
	}
	return s.file()
}

// devices writes the regulators and the capacitors. The units are rated for the current
// of the feeder: 668 A is the highest usual rating, and the last bank sees less.
func (p *plan) devices() (regulators, capacitors *fstest.MapFile) {
	r := newSheet("regulator,from,to,phases,pt ratio,ct primary [A],range [%],steps each way,rating [A],type")
	k := 0
	for i, b := range p.buses {
		if b.link == regulator {
			r.row(fmt.Sprintf("R%d", k+1), busName(b.before), busName(i), "ABC", "60",
				[3]string{"700", "600", "400"}[k], "10", "16", [3]string{"668", "548", "328"}[k], "B")
			k++
		}
	}
	c := newSheet("capacitor,node,phases,size [kvar],state")
	for k, at := range capacitorsAt {
		c.row(fmt.Sprintf("C%d", k+1), busName(along(p.trunkBuses(), at)), "ABC", [4]string{"600", "600", "450", "300"}[k], "closed")
	}
	return r.file(), c.file()
}
