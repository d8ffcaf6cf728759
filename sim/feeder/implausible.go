package feeder

import (
	"fmt"
	"math"

	"yearflow/sim/tables"
)

// Implausible lists what is possible in this study and yet hardly meant: each with
// the value that was found and what is usual (common practice where nothing else is
// said). Loads count with their kW at profile 1 times [scale]; those given by energy
// or by a profile in kW are not counted.
func (s *Study) Implausible() []tables.Fault {
	c := &checker{m: s.Model, r: newRadial(s.Model, s.Settings.ScaleLoad)}
	c.values()
	c.lines()
	c.transformers()
	c.ampacities()
	c.regulators()
	c.capacitors()
	c.equalDelays()
	c.found.Sort()
	return c.found
}

// checker collects what is implausible.
type checker struct {
	m     *Model
	r     *radial
	found tables.Faults
}

// outside reports a value beyond what is usual.
func (c *checker) outside(at tables.Pos, x, low, high float64, what, unit, usual string) {
	if x < low || x > high {
		c.found.Add(at, "%s is %s%s; usual: %s", what, amount(x), unit, usual)
	}
}

// values looks for per-unit values and volts in each other's place, and for kilo and
// none.
func (c *checker) values() {
	for _, s := range c.m.Sources {
		name := fmt.Sprintf("source %q", c.m.Nodes[s.Node].Name)
		c.outside(s.At, s.Voltage, 0.85, 1.15, name+": voltage", " p.u.", "0.95 to 1.08 p.u.; volts do not belong here")
		c.outside(s.At, s.Nominal, 0.1, 800, name+": nominal", " kV", "0.2 to 500 kV; is it in volts?")
	}
	told := map[int]bool{}
	for i := range c.m.Nodes {
		n := &c.m.Nodes[i]
		if n.Nominal < 0.1 || n.Nominal > 800 {
			if !told[n.Part] {
				c.outside(n.At, n.Nominal, 0.1, 800, fmt.Sprintf("node %q: nominal", n.Name), " kV", "0.2 to 500 kV; is it in volts?")
			}
			told[n.Part] = true
		}
	}
	for i := range c.m.Loads {
		l := &c.m.Loads[i]
		if f := math.Cos(math.Atan(l.KVARPerKW)); l.KW > 0 && f < 0.6 {
			c.found.Add(l.At, "load %q: its power factor is %s; usual: 0.85 to 1", l.Name, amount(f))
		}
	}
	for i := range c.m.Generators {
		g := &c.m.Generators[i]
		if g.KW > g.KVA*1.0001 {
			c.found.Add(g.At, "generator %q: it gives %s kW, its rating is %s kVA; usual: no more than the rating", g.Name, amount(g.KW), amount(g.KVA))
		}
		if math.Abs(g.PF) < 0.6 {
			c.found.Add(g.At, "generator %q: its power factor is %s; usual: 0.9 to 1 either way", g.Name, amount(g.PF))
		}
	}
}

// lines looks at lengths, and at X/R of the constructions that sections use.
func (c *checker) lines() {
	used := make([]bool, len(c.m.Constructions))
	for i := range c.m.Sections {
		s := &c.m.Sections[i]
		used[s.Construction] = true
		switch {
		case s.LengthKM > 30:
			c.found.Add(s.At, "section %q is %s km (%s mi) long; usual: some 10 m to 10 km; look at the unit of length", s.Name, amount(s.LengthKM), amount(s.LengthKM/1.609344))
		case s.LengthKM < 0.0005:
			c.found.Add(s.At, "section %q is %s m long; usual: some 10 m to 10 km; look at the unit of length", s.Name, amount(s.LengthKM*1000))
		}
	}
	for i := range c.m.Constructions {
		k := &c.m.Constructions[i]
		if !used[i] {
			continue
		}
		z := positive(k)
		if xr := imag(z) / real(z); xr < 0.05 || xr > 15 {
			c.found.Add(k.At, "construction %q: its X/R is %s (%s + j%s ohm/km); usual: 0.1 for small cables to 8 for large overhead conductors", k.Name, amount(xr), amount(real(z)), amount(imag(z)))
		}
		if real(z) > 20 {
			c.found.Add(k.At, "construction %q: its resistance is %s ohm/km; usual: 0.03 to 5 ohm/km; look at the unit", k.Name, amount(real(z)))
		}
	}
}

// positive returns the positive-sequence impedance of a construction in ohm/km: the
// mean of the self impedances less the mean of the mutual ones.
func positive(k *Construction) complex128 {
	m := &k.Matrices
	var self, mutual complex128
	for i := range m.N {
		self += m.Z[i][i]
		for j := range i {
			mutual += m.Z[i][j]
		}
	}
	n := float64(m.N)
	if m.N < 2 {
		return self
	}
	return self/complex(n, 0) - mutual/complex(n*(n-1)/2, 0)
}

func (c *checker) transformers() {
	for i := range c.m.Transformers {
		t := &c.m.Transformers[i]
		name := fmt.Sprintf("transformer %q", t.Name)
		c.outside(t.At, 100*math.Hypot(t.R, t.X), 0.5, 20, name+": impedance", " %", "1.5 to 10 %")
		if t.R > 0 {
			c.outside(t.At, t.X/t.R, 0.3, 60, name+": x/r", "", "1 to 40")
		}
		c.outside(t.At, t.NoLoadLoss/(t.KVA*10), 0, 1.5, name+": no-load loss", " % of its rating", "0.05 to 0.5 %")
		c.outside(t.At, 100*t.Exciting, 0, 8, name+": exciting current", " %", "0.2 to 2 %")
		c.outside(t.At, t.TapKV/t.HighKV, 0.85, 1.15, name+": tap over high", "", "0.9 to 1.1")
		if t.LowKV > t.HighKV*1.01 {
			c.found.Add(t.At, "%s: its low side, %s kV, is above its high side, %s kV; usual: from is the high side", name, amount(t.LowKV), amount(t.HighKV))
		}
		behind := c.r.behind[edge{"transformer", i}]
		if behind.largest > t.KVA {
			c.found.Add(t.At, "%s of %s kVA feeds load %q of %s kVA; usual: a load is smaller than its transformer", name, amount(t.KVA), behind.name, amount(behind.largest))
		} else if sum := behind.kVA(); sum > 1.5*t.KVA {
			c.found.Add(t.At, "%s of %s kVA feeds loads of %s kVA at profile 1; usual: up to 1.5 times the rating, because the loads' peaks do not meet", name, amount(t.KVA), amount(sum))
		}
	}
}

// ampacities compares ratings with the currents of what stands behind.
func (c *checker) ampacities() {
	look := func(e edge, at tables.Pos, name string, node int, phases []Phase, rating float64) {
		if Unknown(rating) {
			return
		}
		for _, p := range phases {
			behind := c.r.behind[e].power[p]
			perKV := math.Sqrt(3) / c.m.Nodes[node].Nominal
			if p.Leg() { // half of the full winding, which the nominal voltage is
				perKV = 2 / c.m.Nodes[node].Nominal
			}
			amps := math.Hypot(real(behind), imag(behind)) * perKV
			if amps > rating {
				c.found.Add(at, "%s %q: the loads behind its phase %s draw %s A at profile 1, its rating is %s A; usual: less than the rating", e.kind, name, p, amount(amps), amount(rating))
				return
			}
		}
	}
	for i := range c.m.Sections {
		s := &c.m.Sections[i]
		look(edge{"section", i}, s.At, s.Name, s.From, s.Phases, s.Rating)
	}
	for i := range c.m.Switches {
		s := &c.m.Switches[i]
		look(edge{"switch", i}, s.At, s.Name, s.From, s.Phases, s.Rating)
	}
	for i := range c.m.Regulators {
		g := &c.m.Regulators[i]
		look(edge{"regulator", i}, g.At, g.Name, g.From, g.Phases, g.Rating)
	}
}
