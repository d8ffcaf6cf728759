package feeder

import (
	"strconv"

	"yearflow/sim/conductor"
	"yearflow/sim/tables"
)

// triplex computes the matrices of a service drop: two insulated conductors and a
// bare neutral; its positions 1 and 2 are the legs.
func (b *builder) triplex(r *constructionRow, c *Construction, lib library) {
	what := "construction " + strconv.Quote(r.Name.Value)
	phase, ok := named(b, r.Phase, what, "phase conductor", lib.conductors, lib.conductorNames, r.Row.At)
	if !ok {
		return
	}
	if r.Spacing.Given {
		b.faults.Add(r.Spacing.At, "%s: a triplex is bundled; its spacing follows from the insulation: leave spacing blank", what)
		return
	}
	neutral := phase
	if r.Neutral.Given {
		if neutral, ok = lib.conductors[r.Neutral.Value]; !ok {
			b.faults.Add(r.Neutral.At, "%s: unknown neutral conductor %q%s", what, r.Neutral.Value, tables.Hint(r.Neutral.Value, lib.conductorNames))
			return
		}
	} else {
		b.assume(r.Row.At, what+": neutral conductor", "that of the phases, "+phase.Name)
	}
	if !r.Insulation.Given {
		b.faults.Add(r.Row.At, "%s: insulation [in] is blank; a triplex needs it", what)
		return
	}
	const inch = 0.0254
	l := conductor.TriplexLine{Frequency: b.model.Frequency, EarthResistivity: b.earth(r), PhaseConductor: phase, NeutralConductor: neutral, Insulation: r.Insulation.Value * inch}
	m, err := l.Triplex()
	c.Matrices = b.computed(r, m, err)
	b.constructionRating(c, phase.Rating, "that of conductor "+phase.Name)
}
