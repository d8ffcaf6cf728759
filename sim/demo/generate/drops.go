package main

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
)

// A service leads from the secondary of a centre-tapped bank to the meters of one to
// two dozen customers of a class, who stand close together: a triplex to the far one's
// place, with the power of them all at its end. Its node is named for the primary
// node, with "-m1", "-m2" and so on after it.
type service struct {
	from, meter  string
	construction string
	metres       float64
	bearing      float64 // degrees, clockwise from north
	load         load
	shift        float64 // of the load's share from leg 2 to leg 1
}

// kwPerService is about what one service carries; a load of more has several.
const kwPerService = 38

// onLegs is the share of a class's load at 120 V, on the two legs together (common
// practice: lights, outlets, refrigerators and furnace fans at 120 V; ranges, dryers, water
// heaters and air conditioners at 240 V). The rest stands across both.
var onLegs = [...]float64{homes: 0.40, shops: 0.50, offices: 0.60, works: 0.30}

// The services are 20 to 60 m long, by seeded chance, and built for less than about
// 1.9 V of drop on 120 V at their peak: the kW·m that 1/0 AA and 4/0 AA carry so. A heavier
// one is shorter.
const (
	shortest, longest = 20, 60
	lightKWm, mostKWm = 700, 1400
)

// serviceList lists the services of all single-phase banks in the order of the plan.
func serviceList(low []string) []service {
	chance := rand.New(rand.NewPCG(2025, 120))
	var all []service
	numbers := map[string]int{} // at a primary node
	for i, b := range served {
		if len(b.phases) > 1 {
			continue
		}
		var here []service
		for _, l := range b.loads {
			here = append(here, split(l)...)
		}
		for k := range here {
			s := &here[k]
			numbers[b.at]++
			s.from, s.meter = low[i], fmt.Sprintf("%s-m%d", b.at, numbers[b.at])
			s.metres = math.Round(shortest + (longest-shortest)*chance.Float64())
			s.metres = max(shortest, min(s.metres, math.Floor(mostKWm/s.load.kw)))
			s.construction = "drop-1/0"
			if s.load.kw*s.metres > lightKWm {
				s.construction = "drop-4/0"
			}
			// They leave the bank on its own side of the line.
			s.bearing = 100 + 160*(float64(k)+0.5)/float64(len(here))
			if strings.HasSuffix(low[i], "2") {
				s.bearing += 180
			}
			s.shift = 0.06 * (chance.Float64() - 0.5)
		}
		all = append(all, here...)
	}
	return all
}

// split shares the customers of a load over services as evenly as whole customers go.
func split(l load) []service {
	n := max(1, min(l.customers, int(math.Round(l.kw/kwPerService))))
	all := make([]service, n)
	for k := range all {
		part := l
		part.customers = l.customers*(k+1)/n - l.customers*k/n
		part.kw = l.kw * float64(part.customers) / float64(l.customers)
		all[k].load = part
	}
	return all
}

// legKW are the powers on leg 1, on leg 2 and across both, rounded to 10 W.
func (s *service) legKW() (one, two, across float64) {
	round := func(x float64) float64 { return math.Round(x*100) / 100 }
	half := onLegs[s.load.class] / 2
	one, two = round(s.load.kw*(half+s.shift/2)), round(s.load.kw*(half-s.shift/2))
	return one, two, round(s.load.kw - one - two)
}
