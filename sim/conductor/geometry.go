package conductor

import (
	"fmt"
	"math"
	"strings"
)

// Point is a place in the cross-section of a line in m: X to the side, Y above the
// earth.
type Point struct{ X, Y float64 }

func (p Point) distance(q Point) float64 { return math.Hypot(p.X-q.X, p.Y-q.Y) }

func (p Point) finite() bool { return finite(p.X) && finite(p.Y) }

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

// positive also keeps out infinity and not-a-number.
func positive(v float64) bool { return v > 0 && finite(v) }

// faults gathers everything wrong with a construction; all of it is reported at once.
type faults []string

func (fs *faults) add(format string, args ...any) {
	*fs = append(*fs, fmt.Sprintf(format, args...))
}

func (fs faults) err() error {
	if len(fs) == 0 {
		return nil
	}
	return fmt.Errorf("%s", strings.Join(fs, "; "))
}

// wire is one conductor, or one cable, in the cross-section: its place and the
// circle that nothing else may enter.
type wire struct {
	name   string // "position 1", "the neutral"
	at     Point
	radius float64 // m
}

// wires names the places of a line. neutral may be nil.
func wires(phase []Point, radius float64, neutral *Point, neutralRadius float64) []wire {
	ws := make([]wire, 0, len(phase)+1)
	for i, p := range phase {
		ws = append(ws, wire{fmt.Sprintf("position %d", i+1), p, radius})
	}
	if neutral != nil {
		ws = append(ws, wire{"the neutral", *neutral, neutralRadius})
	}
	return ws
}

// distances returns the distances between the centres of ws in m.
func distances(ws []wire) [][]float64 {
	d := square[float64](len(ws))
	for i := range ws {
		for j := range i {
			d[i][j] = ws[i].at.distance(ws[j].at)
			d[j][i] = d[i][j]
		}
	}
	return d
}

// checkEarth reports a frequency or an earth that Carson's equations cannot take.
func (fs *faults) checkEarth(f, resistivity float64) {
	if !positive(f) {
		fs.add("frequency %g Hz is not above zero", f)
	}
	if !positive(resistivity) {
		fs.add("earth resistivity %g ohm m is not above zero (%g is usual)", resistivity, DefaultEarthResistivity)
	}
}

// checkConductor reports values that no conductor has.
func (fs *faults) checkConductor(role string, c Conductor) {
	name := role
	if c.Name != "" {
		name = fmt.Sprintf("%s %q", role, c.Name)
	}
	ok := true
	for _, v := range []struct {
		name  string
		value float64
		unit  string
	}{{"resistance", c.R, "ohm/km"}, {"GMR", c.GMR, "m"}, {"diameter", c.Diameter, "m"}} {
		if !positive(v.value) {
			fs.add("%s: %s %g %s is not above zero", name, v.name, v.value, v.unit)
			ok = false
		}
	}
	// A thin tube has GMR = radius and everything else less.
	if ok && c.GMR > c.Diameter/2*(1+1e-9) {
		fs.add("%s: GMR %.5g ft is more than half the diameter %.4g in (a solid round wire has 0.39 times the diameter)",
			name, c.GMR/foot, c.Diameter/inch)
	}
}

// checkPlaces reports positions that are missing, not numbers, or inside one
// another. overhead asks for a height above the earth as well.
func (fs *faults) checkPlaces(ws []wire, phases int, overhead bool) {
	if phases < 1 || phases > 3 {
		fs.add("%d phase positions; 1, 2 or 3 are possible", phases)
	}
	for _, w := range ws {
		switch {
		case !w.at.finite():
			fs.add("%s has no place: x and y must be numbers", w.name)
		case overhead && !(w.at.Y > w.radius):
			fs.add("%s is at y = %.4g ft; an overhead conductor hangs above the earth (y > 0)", w.name, w.at.Y/foot)
		}
	}
	for i := range ws {
		for j := range i {
			fs.checkPair(ws[j], ws[i])
		}
	}
}

func (fs *faults) checkPair(a, b wire) {
	d, need := a.at.distance(b.at), a.radius+b.radius
	switch {
	case d == 0:
		fs.add("%s and %s are at the same place", a.name, b.name)
	case d < need*(1-1e-6): // conductors that just touch pass, whatever the rounding of inches
		fs.add("%s and %s overlap: their centres are %.4g in apart and their radii make %.4g in",
			a.name, b.name, d/inch, need/inch)
	}
}

// checkDepth reports the widest distance where the earth's return no longer lies
// below the line.
func (fs *faults) checkDepth(f, resistivity float64, ws []wire) {
	var a, b wire
	widest := 0.0
	for i := range ws {
		for j := range i {
			if d := ws[i].at.distance(ws[j].at); d > widest {
				a, b, widest = ws[j], ws[i], d
			}
		}
	}
	if depth := EarthDepth(f, resistivity); widest >= depth {
		fs.add("%s and %s are %.4g ft apart, beyond the depth of the earth's return, %.4g ft: check the places and the earth resistivity",
			a.name, b.name, widest/foot, depth/foot)
	}
}
