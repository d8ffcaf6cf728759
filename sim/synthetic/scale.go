package synthetic

import (
	"fmt"
	"math"

	"yearflow/sim/feeder"
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
			return nil
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
