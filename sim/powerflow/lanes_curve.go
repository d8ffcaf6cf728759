package powerflow

import "yearflow/sim/powerflow/vector"

// Curve is a parabola through the voltages of three instants: what start vectors between
// them are taken from.
type Curve struct{ coef []float64 }

// NewCurve makes room for a curve.
func (l *Lanes) NewCurve() *Curve { return &Curve{make([]float64, 6*l.all)} }

// Fit lays c through three lanes in a row at w = 0, middle and 1.
//
//	V(w) = a + b·w + c·w²,  a = V₀,  c = (V₁ − V₀ − m·(V₂ − V₀))/(m² − m),  b = V₂ − V₀ − c
//
// m being the middle, which must lie between 0 and 1.
func (l *Lanes) Fit(c *Curve, first int, middle float64) {
	scale := 1 / (middle*middle - middle)
	for at := range l.all {
		v, into := l.v[at*vector.Width:], c.coef[6*at:6*at+6]
		for part := range 2 {
			at := part*vector.Lanes + first
			v0, v1, v2 := v[at], v[at+1], v[at+2]
			q := (v1 - v0 - middle*(v2-v0)) * scale
			into[part], into[2+part], into[4+part] = v0, v2-v0-q, q
		}
	}
}

// Predict starts all lanes on a curve, each at its own w.
func (l *Lanes) Predict(c *Curve, when *[vector.Lanes]float64) { vector.Predict(l.v, c.coef, when) }

// Keep makes c the voltages of a lane, whatever w.
func (b *Block) Keep(c *Curve, lane int) {
	for at := range b.l.all {
		z := vector.At(b.v, at, lane)
		c.coef[6*at], c.coef[6*at+1] = real(z), imag(z)
	}
}

// StartAt starts all lanes from what Keep kept, in a curve that Fit was never laid into.
func (l *Lanes) StartAt(c *Curve) { vector.Predict(l.v, c.coef, &[vector.Lanes]float64{}) }

// StartAll starts all lanes from the voltages start, by Network.Unknowns, or from the
// no-load voltages of their device state at the inputs in where start is nil.
func (l *Lanes) StartAll(start []complex128, in *Input) {
	if start == nil {
		start = l.s.unloaded(in)
	}
	for u, at := range l.slot {
		if int(at) < l.all {
			l.flat.coef[6*at], l.flat.coef[6*at+1] = real(start[u]), imag(start[u])
		}
	}
	l.StartAt(l.flat)
}

// NewDirections makes room for ways in which the voltages of lanes can be moved.
func (l *Lanes) NewDirections(n int) *vector.Directions { return vector.NewDirections(n, l.all) }

// Direct sets a direction to what it is from lane 0 to another lane, times so much.
func (l *Lanes) Direct(d *vector.Directions, direction, lane int, times float64) {
	for at := range l.all {
		d.Set(direction, at, (vector.At(l.v, at, lane)-vector.At(l.v, at, 0))*complex(times, 0))
	}
}

// Shift moves the voltages that lanes start from.
func (l *Lanes) Shift(d *vector.Directions) { d.Shift(l.v) }

// Slot is where an unknown's voltage stands among the values of a block.
func (l *Lanes) Slot(u int32) int { return int(l.slot[u]) }

// StartLanes starts lane k from the voltages of lane from[k] of the block at hand or, from
// vector.Lanes on, of lane from[k]−vector.Lanes of the block of other lanes of the solver.
func (l *Lanes) StartLanes(other *Lanes, from *[vector.Lanes]uint64) {
	n := l.all * vector.Width
	vector.Pick(l.v[:n], other.v[:n], from)
}
