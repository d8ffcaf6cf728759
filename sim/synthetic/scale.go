package synthetic

import (
	"fmt"
	"math"
	"math/cmplx"

	"yearflow/sim/feeder"
	"yearflow/sim/powerflow"
)

// What the loads are scaled to: the lowest voltage at a part of nominal load.
const (
	peakLevel  = 0.95
	peakLowest = 0.94
	tolerance  = 0.003
)

// scale sets the power of all loads, and with it the sizes of the service transformers,
// so that the lowest voltage at peak is as wanted. The voltage that the transformers
// take changes little with the power, since their sizes follow it: a few rounds meet
// both.
func (p *plan) scale(o Options) error {
	for range 6 {
		p.sizes()
		st, err := feeder.Open(p.files(o), "")
		if err != nil {
			return err
		}
		c, err := NewCircuit(st)
		if err != nil {
			return err
		}
		out := c.Solver.NewSolution()
		lowest := func(factor float64) float64 {
			if !c.Settle(c.Level(peakLevel*factor), out) {
				return 0
			}
			return c.Lowest(out.V)
		}
		at := lowest(1)
		if math.Abs(at-peakLowest) < tolerance {
			return p.switching(c, out)
		}
		// The lowest voltage falls with the load about in a straight line, but for a
		// tap's step: where the chord lands outside, or there is no solution, halves.
		low, high, factor := 0.0, 0.0, 1.0
		atLow, atHigh := 0.0, 0.0
		for range 12 {
			if at > peakLowest {
				low, atLow = factor, at
			} else {
				high, atHigh = factor, at
			}
			switch {
			case high == 0:
				factor = 2 * low
			case low == 0:
				factor = high / 2
			case atHigh == 0:
				factor = (low + high) / 2
			default:
				part := (atLow - peakLowest) / (atLow - atHigh)
				factor = low + (high-low)*max(0.1, min(0.9, part))
			}
			if at = lowest(factor); math.Abs(at-peakLowest) < tolerance/2 {
				break
			}
		}
		p.kW *= factor
	}
	return fmt.Errorf("no load brings the lowest voltage to %g p.u.: another seed would do", peakLowest)
}

// The capacitors that follow the voltage close where it stands at the first part of
// nominal load and open where it stands at the second.
const (
	closesAt = 0.75
	opensAt  = 0.5
	span     = 2.0 // V at least: more than 1.5 times the rise that a bank makes
)

// switching sets the voltages at which the capacitors switch, so that they have work to
// do on a feeder of any size.
func (p *plan) switching(c *Circuit, out *powerflow.Solution) error {
	for k, level := range [2]float64{closesAt, opensAt} {
		if !c.Settle(c.Level(level), out) {
			return fmt.Errorf("no solution at %g of nominal load", level)
		}
		for i := range c.Net.Model.Capacitors {
			x := &c.Net.Model.Capacitors[i]
			if x.Control.Control != feeder.CapacitorVoltage {
				continue
			}
			u := c.Net.At[x.Node][x.Control.Phase[0]]
			v := 120 * cmplx.Abs(out.V[u]) / c.Net.Unknowns[u].Nominal
			if k == 0 {
				p.on[i] = v
			} else {
				p.off[i] = max(v, p.on[i]+span)
			}
		}
	}
	return nil
}

// singleKVA and threeKVA are the preferred sizes of distribution transformers, of one
// phase and of three (IEEE C57.12.00; recalled from memory, the smallest left to
// small feeders).
var (
	singleKVA = []float64{5, 10, 15, 25, 37.5, 50, 75, 100, 167, 250, 333, 500}
	threeKVA  = []float64{15, 30, 45, 75, 112.5, 150, 225, 300, 500, 750, 1000, 1500, 2500}
)

// sizes gives every service transformer the size that carries its loads, with a fifth to
// spare.
func (p *plan) sizes() {
	behind := make([]float64, len(p.buses))
	for _, s := range p.spots {
		behind[s.bus] += s.weight * p.kW / s.factor
	}
	for i := range p.buses {
		b := &p.buses[i]
		if b.link != bank {
			continue
		}
		list := singleKVA
		if b.phases == "ABC" {
			list = threeKVA
		}
		k := 0
		for k < len(list)-1 && list[k] < 1.2*behind[i] {
			k++
		}
		b.kVA = list[k]
	}
}
