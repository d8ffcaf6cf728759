package synthetic

import (
	"math"
	"math/rand/v2"
)

// link says what joins a bus to the one before it.
type link uint8

const (
	line link = iota
	regulator
	bank // a service transformer
)

// bus is one place of the feeder.
type bus struct {
	before int // the bus on the way to the source; −1 at the source
	depth  int
	phases string // letters, or legs "12"
	trunk  bool
	// Of the way to it:
	link         link
	km           float64
	construction string
	connection   string // of a bank
	high, low    float64
	kVA          float64
}

// spot is a load.
type spot struct {
	bus    int
	phases string
	delta  bool
	weight float64 // part of the whole load
	factor float64 // power factor
	zip    bool
	shape  int
}

// plan is a feeder before it is written down.
type plan struct {
	buses []bus
	spots []spot
	kW    float64 // of all loads together
	taken []bool  // buses that a service transformer already stands at
	// on and off are the voltages, on the 120 V base, at which the capacitors close and
	// open that follow it.
	on, off [len(capacitorsAt)]float64
}

// trunkKM is six miles.
const trunkKM = 9.656

// depthOf is how many links the longest way has: about 39, 109 and 331 for the three
// sizes of the measurements.
func depthOf(buses int) int { return int(math.Round(3.4 * math.Sqrt(float64(buses)))) }

// trunkOf is how many buses the trunk has.
func trunkOf(buses int) int { return int(math.Round(2.5 * math.Sqrt(float64(buses)))) }

// along is the trunk's bus that stands at a part of its length.
func along(trunk int, part float64) int { return int(part * float64(trunk-1)) }

// Where the devices stand, as parts of the trunk's length. The banks that follow the
// voltage stand ahead of a regulator, where it moves.
var (
	regulatorsAt = [3]float64{0.25, 0.5, 0.75}
	capacitorsAt = [4]float64{0.12, 0.22, 0.47, 0.88}
)

// newPlan draws a feeder.
func newPlan(o Options) *plan {
	r := rand.New(rand.NewPCG(o.Seed, 0x5eed))
	p := &plan{kW: 12000, taken: make([]bool, o.Buses),
		on: [4]float64{0, 118, 118, 0}, off: [4]float64{0, 124, 124, 0}}
	three := o.Buses - o.TwoPhase - o.SinglePhase
	low3, low2, low1 := three/10, o.TwoPhase/4, o.SinglePhase/5
	deepest, trunk := depthOf(o.Buses), trunkOf(o.Buses)
	p.trunk(trunk)
	p.laterals(r, "ABC", three-trunk-low3, deepest, trunk-1)
	p.laterals(r, "AB", o.TwoPhase-low2, deepest, -1)
	p.laterals(r, "A", o.SinglePhase-low1, deepest, -1)
	primary := len(p.buses)
	for k := range low3 {
		b := bus{phases: "ABC", connection: "Dyn1", high: 12.47, low: 0.48}
		if k%2 == 1 {
			b.connection, b.low = "YNyn0", 0.208
		}
		p.serve(r, b, primary)
	}
	for range low2 {
		p.serve(r, bus{phases: "12", connection: "center-tap", high: 7.2, low: 0.24}, primary)
	}
	for range low1 {
		p.serve(r, bus{phases: "A", connection: "1ph", high: 7.2, low: 0.24}, primary)
	}
	p.loads(r)
	return p
}

// trunk lays the trunk, with the regulators in line.
func (p *plan) trunk(n int) {
	for i := range n {
		b := bus{before: i - 1, depth: i, phases: "ABC", trunk: true, km: trunkKM / float64(n-1-len(regulatorsAt)), construction: "trunk"}
		for _, at := range regulatorsAt {
			if i == along(n, at)+1 {
				b.link = regulator
			}
		}
		p.buses = append(p.buses, b)
	}
}

// laterals adds n buses in strings that begin at buses of more phases. The first one
// begins at the bus first, where that is not negative, and goes as deep as any may.
func (p *plan) laterals(r *rand.Rand, phases string, n, deepest, first int) {
	bases := len(p.buses)
	longest := max(2, deepest/4)
	trunk := trunkKM / float64(p.trunkBuses()-1)
	for n > 0 {
		at := r.IntN(bases-1) + 1
		count := 1 + r.IntN(longest)
		if first >= 0 {
			at, count, first = first, deepest, -1
		}
		b := p.buses[at]
		if len(b.phases) < len(phases) || len(phases) == 3 && !b.trunk {
			continue
		}
		own := phasesOf(r, b.phases, len(phases))
		cable := r.Float64() < 0.25
		for range count {
			if n == 0 || p.buses[at].depth >= deepest {
				break
			}
			p.buses = append(p.buses, bus{before: at, depth: p.buses[at].depth + 1, phases: own,
				km: trunk * (0.4 + 0.6*r.Float64()), construction: constructionOf(len(own), cable)})
			at = len(p.buses) - 1
			n--
		}
	}
}

func (p *plan) trunkBuses() (n int) {
	for _, b := range p.buses {
		if b.trunk {
			n++
		}
	}
	return n
}

// phasesOf picks n of the phases of a bus, in the order of the alphabet.
func phasesOf(r *rand.Rand, of string, n int) string {
	switch {
	case n == len(of):
		return of
	case n == 1:
		k := r.IntN(len(of))
		return of[k : k+1]
	}
	return [3]string{"AB", "BC", "AC"}[r.IntN(3)]
}

// serve adds a service transformer and its low bus at a bus that has none yet.
func (p *plan) serve(r *rand.Rand, b bus, primary int) {
	for tries := 0; ; tries++ {
		at := r.IntN(primary-1) + 1
		if (!p.taken[at] || tries > 100) && (len(b.phases) < 3 || b.connection == "center-tap" || len(p.buses[at].phases) == 3) {
			p.taken[at] = true
			if b.connection == "1ph" {
				b.phases = phasesOf(r, p.buses[at].phases, 1)
			}
			if b.connection == "center-tap" {
				b.construction = phasesOf(r, p.buses[at].phases, 1) // the phase of its high side
			}
			b.before, b.depth, b.link = at, p.buses[at].depth+1, bank
			p.buses = append(p.buses, b)
			return
		}
	}
}

// loads spreads the loads over the node.phases.
func (p *plan) loads(r *rand.Rand) {
	sum := 0.0
	for i := range p.buses {
		b := &p.buses[i]
		delta := i > 0 && len(b.phases) > 1 && r.Float64() < 0.12
		for k := range b.phases {
			if i == 0 || r.Float64() >= 0.7 {
				continue
			}
			s := spot{bus: i, phases: b.phases[k : k+1], delta: delta, weight: 0.3 + 1.4*r.Float64(),
				factor: 0.90 + 0.08*r.Float64(), zip: r.Float64() < 0.3, shape: r.IntN(Shapes)}
			if delta {
				s.phases = pair(b.phases, k)
				s.delta = b.phases != "12" // across both legs the table says it by the phases
			}
			sum += s.weight
			p.spots = append(p.spots, s)
		}
	}
	for i := range p.spots {
		p.spots[i].weight /= sum
	}
}

// pair is the k-th of the pairs AB, BC, CA that a bus has; two phases have one.
func pair(phases string, k int) string {
	switch phases {
	case "ABC":
		return [3]string{"AB", "BC", "CA"}[k]
	case "AC":
		return "CA"
	}
	return phases
}

func constructionOf(phases int, cable bool) string {
	switch {
	case phases == 1 && cable:
		return "cable-1"
	case phases == 1:
		return "one"
	case phases == 2:
		return "two" // two-phase cable is rare
	case cable:
		return "cable-3"
	}
	return "three"
}
