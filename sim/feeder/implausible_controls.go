package feeder

import (
	"fmt"
	"math"
)

func (c *checker) regulators() {
	for i := range c.m.Regulators {
		g := &c.m.Regulators[i]
		name := fmt.Sprintf("regulator %q", g.Name)
		volts := c.m.Nodes[g.To].Nominal * 1000 / g.PT
		if g.Connection == RegulatorWye {
			volts /= math.Sqrt(3)
		}
		if volts < 115 || volts > 125 {
			c.found.Add(g.At, "%s: pt ratio %s turns nominal voltage (%s kV line-to-line) into %s V; usual: 115 to 125 V", name, amount(g.PT), amount(c.m.Nodes[g.To].Nominal), amount(volts))
		}
		c.outside(g.At, 100*g.Range, 4, 16, name+": range", " %", "10 %")
		for k := range g.Units {
			u := &g.Units[k]
			if u.Settings == nil || k > 0 && g.Units[k-1].Settings != nil && g.Units[k-1].Settings.At == u.Settings.At {
				continue // a row for all phases is looked at once
			}
			c.tapSettings(g, u.Settings, name+" "+u.Name(g.Connection))
		}
	}
}

func (c *checker) tapSettings(g *Regulator, s *TapSettings, name string) {
	if s.Set < 110 || s.Set > 130 {
		c.found.Add(s.At, "%s: set is %s V; usual: 118 to 126 V on the secondary, not p.u. and not primary volts", name, amount(s.Set))
		return
	}
	step := s.Set * g.Range / float64(g.Steps)
	if s.Bandwidth > 8 {
		c.found.Add(s.At, "%s: bandwidth is %s V; usual: 1.5 to 3 V", name, amount(s.Bandwidth))
	} else if s.Bandwidth < 1.9*step {
		// Nominal voltage is 120 V, the set voltage some volts above: 1.9 for 2.
		c.found.Add(s.At, "%s: bandwidth %s V is below two taps of %s V each, so that it may hunt; usual: 1.5 to 3 V", name, amount(s.Bandwidth), amount(step))
	}
	c.outside(s.At, s.Delay, 5, 300, name+": delay", " s", "15 to 120 s")
	c.outside(s.At, s.TapTime, 1, 60, name+": tap time", " s", "2 to 10 s")
	c.outside(s.At, math.Abs(s.R), 0, 24, name+": ldc r", " V", "0 to 24 V at rated current, not ohm")
	c.outside(s.At, math.Abs(s.X), 0, 24, name+": ldc x", " V", "0 to 24 V at rated current, not ohm")
	if !Unknown(s.LimitHigh) {
		c.outside(s.At, s.LimitHigh, 120, 135, name+": limit high", " V", "124 to 128 V")
		if s.LimitHigh < s.Set+s.Bandwidth/2 {
			c.found.Add(s.At, "%s: limit high %s V is below the upper edge of the band, %s V; usual: above it", name, amount(s.LimitHigh), amount(s.Set+s.Bandwidth/2))
		}
	}
	if !Unknown(s.LimitLow) {
		c.outside(s.At, s.LimitLow, 100, 120, name+": limit low", " V", "112 to 117 V")
	}
	if s.Reverse != ReverseNone {
		c.reverse(s, name)
	}
}

func (c *checker) capacitors() {
	for i := range c.m.Capacitors {
		k := &c.m.Capacitors[i]
		name := fmt.Sprintf("capacitor %q", k.Name)
		nominal := c.m.Nodes[k.Node].Nominal
		if ratio := nominal / k.NominalKV; ratio > 1.1 || ratio < 0.8 {
			hint := ""
			if math.Abs(ratio/math.Sqrt(3)-1) < 0.1 {
				hint = "; is it the line-to-neutral one?"
			}
			c.found.Add(k.At, "%s: its nominal is %s kV at a node of %s kV; usual: within 110 %% of it (IEEE 18), line-to-line%s", name, amount(k.NominalKV), amount(nominal), hint)
		}
		if s := k.Control; s != nil {
			c.capacitorControl(k, s, "control of "+name)
		}
	}
}

func (c *checker) capacitorControl(k *Capacitor, s *CapacitorSettings, name string) {
	rise := c.rise(k)
	span := math.Abs(s.Off - s.On)
	switch s.Control {
	case CapacitorVoltage:
		c.outside(s.At, s.On, 100, 140, name+": voltage on", " V", "114 to 122 V on the 120 V base")
		c.outside(s.At, s.Off, 100, 140, name+": voltage off", " V", "122 to 128 V on the 120 V base")
		if span < 1.5*rise {
			c.found.Add(s.At, "%s: its span, %s V, is %s times the rise that the bank makes, about %s V, so that it may pump; usual: 1.5 times and more", name, amount(span), amount(span/rise), amount(rise))
		}
	case CapacitorKVAR:
		size := k.KVAR
		if len(s.Phase) == 1 && len(k.Phases) > 0 {
			size /= float64(len(k.Phases))
		}
		if span < 1.25*size {
			c.found.Add(s.At, "%s: its span, %s kvar, is %s times the %s kvar that the bank shifts, so that it may pump; usual: 1.25 times and more", name, amount(span), amount(span/size), amount(size))
		}
	}
	if s.Control != CapacitorVoltage {
		for _, x := range []struct {
			v    float64
			what string
		}{{s.OverrideOn, "voltage on"}, {s.OverrideOff, "voltage off"}} {
			if !Unknown(x.v) {
				c.outside(s.At, x.v, 100, 140, name+": "+x.what+" (the override)", " V", "116 to 128 V on the 120 V base")
			}
		}
	}
	if k.KVAR > 0 && s.Control != CapacitorHeld && s.Lockout < 300 {
		c.found.Add(s.At, "%s: lockout is %s s; usual: 300 s, in which the units discharge (IEEE 18)", name, amount(s.Lockout))
	}
}

// rise is the voltage rise that a bank makes, on the 120 V base:
//
//	ΔV % = kvar·X/(10·kV²)
//
// with the kvar of a full three-phase bank and X to the source.
func (c *checker) rise(k *Capacitor) float64 {
	n := &c.m.Nodes[k.Node]
	kvar := k.KVAR
	if phases := len(k.Phases); phases > 0 {
		kvar *= 3 / float64(phases)
	}
	return 1.2 * kvar * c.r.x[k.Node] / (10 * n.Nominal * n.Nominal)
}

// equalDelays looks for controls in cascade that wait equally long: which acts first
// is then a matter of chance.
func (c *checker) equalDelays() {
	const usual = "usual: 10 to 15 s more for each device farther from the source, and capacitors unlike all regulators"
	for i := range c.m.Regulators {
		for j := range c.m.Regulators {
			a, b := &c.m.Regulators[i], &c.m.Regulators[j]
			if i == j || !c.r.above(a.To, b.From) {
				continue
			}
			if s, delay, ok := sameDelay(a, b.settings()); ok {
				c.found.Add(s.At, "regulator %q and regulator %q upstream of it both wait %s s; %s", b.Name, a.Name, amount(delay), usual)
			}
		}
		g := &c.m.Regulators[i]
		for j := range c.m.Capacitors {
			k := &c.m.Capacitors[j]
			if k.Control == nil || k.Control.Control == CapacitorHeld || k.Control.Control == CapacitorTime ||
				!c.r.above(g.To, k.Node) && !c.r.above(k.Node, g.From) {
				continue
			}
			for _, s := range g.settings() {
				if s.Delay == k.Control.Delay {
					c.found.Add(k.Control.At, "capacitor %q and regulator %q, which see each other's actions, both wait %s s; %s", k.Name, g.Name, amount(s.Delay), usual)
					break
				}
			}
		}
	}
}

// settings are those of the units whose control acts.
func (g *Regulator) settings() []*TapSettings {
	var out []*TapSettings
	for i := range g.Units {
		if s := g.Units[i].Settings; s != nil && !s.Held && (!g.Ganged || g.Units[i].Watched) {
			out = append(out, s)
		}
	}
	return out
}

// sameDelay finds settings that wait as long as some of a bank's.
func sameDelay(a *Regulator, settings []*TapSettings) (*TapSettings, float64, bool) {
	for _, s := range settings {
		for _, o := range a.settings() {
			if s.Delay == o.Delay {
				return s, s.Delay, true
			}
		}
	}
	return nil, 0, false
}
