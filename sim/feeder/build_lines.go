package feeder

import (
	"errors"
	"math"
	"sort"
	"strconv"

	"yearflow/sim/conductor"
	"yearflow/sim/tables"
)

// spacing is where the conductors of a construction stand.
type spacing struct {
	phase   []conductor.Point
	neutral *conductor.Point
	at      tables.Pos
}

// library is the handbook with the study's own rows laid over it.
type library struct {
	conductors     map[string]conductor.Conductor
	cables         map[string]conductor.Cable
	conductorNames []string
	cableNames     []string
}

func (b *builder) library() library {
	l := library{conductors: map[string]conductor.Conductor{}, cables: map[string]conductor.Cable{}}
	cs, ks := conductor.Handbook()
	for _, c := range cs {
		l.conductors[c.Name] = c
	}
	for _, k := range ks {
		l.cables[k.Name] = k
	}
	for i := range b.t.conductors {
		r := &b.t.conductors[i]
		l.conductors[r.Name.Value] = conductor.Conductor{Name: r.Name.Value, R: r.Resistance.Value, GMR: r.GMR.Value, Diameter: r.Diameter.Value, Rating: r.Rating.Value, Source: r.Row.At.String()}
	}
	for i := range b.t.cables {
		r := &b.t.cables[i]
		zero := func(n tables.Number) float64 {
			if n.Given {
				return n.Value
			}
			return 0
		}
		l.cables[r.Name.Value] = conductor.Cable{Name: r.Name.Value, Conductor: r.Conductor.Value,
			OutsideDiameter: zero(r.Outside), Strands: r.Strands.Value, Strand: r.Strand.Value,
			ShieldDiameter: zero(r.Shield), ShieldThickness: zero(r.Thickness), ShieldResistivity: b.shield(r),
			Permittivity: r.Permittivity.Value, Rating: r.Rating.Value, Source: r.Row.At.String()}
	}
	for n := range l.conductors {
		l.conductorNames = append(l.conductorNames, n)
	}
	for n := range l.cables {
		l.cableNames = append(l.cableNames, n)
	}
	sort.Strings(l.conductorNames)
	sort.Strings(l.cableNames)
	return l
}

// shield returns the resistivity of a cable's tape shield.
func (b *builder) shield(r *cableRow) float64 {
	if r.Resistivity.Given || !r.Shield.Given {
		return r.Resistivity.Value
	}
	b.assume(r.Row.At, "cable "+r.Name.Value+": shield resistivity [ohm m]", amount(conductor.DefaultShieldResistivity))
	return conductor.DefaultShieldResistivity
}

// earth returns the resistivity of the earth below a construction.
func (b *builder) earth(r *constructionRow) float64 {
	if r.Earth.Given {
		return r.Earth.Value
	}
	b.assume(r.Row.At, "construction "+r.Name.Value+": earth resistivity [ohm m]", amount(conductor.DefaultEarthResistivity))
	return conductor.DefaultEarthResistivity
}

func (b *builder) spacings() {
	b.spacing = map[string]*spacing{}
	points := map[string]map[string]conductor.Point{}
	var order []string
	for i := range b.t.spacings {
		r := &b.t.spacings[i]
		name := r.Spacing.Value
		if b.spacing[name] == nil {
			b.spacing[name] = &spacing{at: r.Row.At}
			points[name] = map[string]conductor.Point{}
			order = append(order, name)
		}
		points[name][r.Position.Value] = conductor.Point{X: r.X.Value, Y: r.Y.Value}
	}
	for _, name := range order {
		s := b.spacing[name]
		for _, p := range []string{"1", "2", "3"} {
			at, has := points[name][p]
			if !has {
				break
			}
			s.phase = append(s.phase, at)
		}
		n, has := points[name]["N"]
		if has {
			s.neutral = &n
		}
		phases := len(points[name])
		if has {
			phases--
		}
		if len(s.phase) != phases || phases == 0 {
			if !b.t.dropped["spacings"] {
				b.faults.Add(s.at, "spacing %q: its positions must be 1, or 1 and 2, or 1, 2 and 3, with N where there is a neutral", name)
			}
			s.phase = nil
		}
	}
}

func (b *builder) constructions() {
	lib := b.library()
	b.spacings()
	matrix := map[string][]*impedanceRow{}
	for i := range b.t.impedances {
		r := &b.t.impedances[i]
		matrix[r.Construction.Value] = append(matrix[r.Construction.Value], r)
	}
	used := map[string]bool{}
	for i := range b.t.constructions {
		r := &b.t.constructions[i]
		c := Construction{Name: r.Name.Value, Kind: r.Kind.Value, At: r.Row.At, Rating: r.Rating.Value}
		b.unread(r)
		if r.Row.Bad {
			used[r.Name.Value] = true
			b.model.Constructions = append(b.model.Constructions, c)
			continue
		}
		switch r.Kind.Value {
		case "overhead":
			b.overhead(r, &c, lib)
		case "concentric neutral", "tape shield":
			b.cable(r, &c, lib)
		case "triplex":
			b.triplex(r, &c, lib)
		case "matrix":
			c.Matrices = b.matrix(r, matrix[r.Name.Value])
			used[r.Name.Value] = true
		case "sequence":
			b.sequence(r, &c)
		}
		b.model.Constructions = append(b.model.Constructions, c)
	}
	for i := range b.t.impedances {
		r := &b.t.impedances[i]
		if !used[r.Construction.Value] {
			b.faults.Add(r.Construction.At, "construction %q is not one of kind matrix in constructions.csv%s", r.Construction.Value, tables.Hint(r.Construction.Value, b.constructionNames()))
			used[r.Construction.Value] = true
		}
	}
}

// unread reports cells that a construction of this kind does not read: they would be
// a second source of its impedances.
func (b *builder) unread(r *constructionRow) {
	geometry := r.Kind.Value == "overhead" || r.Kind.Value == "concentric neutral" || r.Kind.Value == "tape shield" || r.Kind.Value == "triplex"
	for _, c := range []struct {
		name  string
		given bool
		at    tables.Pos
		read  bool
	}{
		{"spacing", r.Spacing.Given, r.Spacing.At, geometry}, {"phase conductor", r.Phase.Given, r.Phase.At, geometry}, {"neutral conductor", r.Neutral.Given, r.Neutral.At, geometry},
		{"r1", r.R1.Given, r.R1.At, r.Kind.Value == "sequence"}, {"x1", r.X1.Given, r.X1.At, r.Kind.Value == "sequence"},
		{"r0", r.R0.Given, r.R0.At, r.Kind.Value == "sequence"}, {"x0", r.X0.Given, r.X0.At, r.Kind.Value == "sequence"},
		{"b1", r.B1.Given, r.B1.At, r.Kind.Value == "sequence"}, {"b0", r.B0.Given, r.B0.At, r.Kind.Value == "sequence"},
	} {
		if c.given && !c.read && r.Kind.Value != "" {
			b.faults.Add(c.at, "construction %q: kind %s does not read %s; leave it blank, or say the kind that is meant", r.Name.Value, r.Kind.Value, c.name)
		}
	}
}

func (b *builder) constructionNames() []string {
	var out []string
	for i := range b.t.constructions {
		out = append(out, b.t.constructions[i].Name.Value)
	}
	return out
}

// named finds a row of the library or the spacings by a cell that must be filled.
func named[T any](b *builder, c tables.Text, what, kind string, from map[string]T, names []string, row tables.Pos) (T, bool) {
	if c.Value == "" {
		b.faults.Add(row, "%s: %s is blank; this kind needs it", what, kind)
		var zero T
		return zero, false
	}
	v, ok := from[c.Value]
	if !ok && !b.t.dropped[kindTable(kind)] {
		b.faults.Add(c.At, "%s: unknown %s %q%s", what, kind, c.Value, tables.Hint(c.Value, names))
	}
	return v, ok
}

// kindTable is the table that holds what a cell of a construction names.
func kindTable(kind string) string {
	if kind == "spacing" {
		return "spacings"
	}
	return "conductors"
}

func (b *builder) spacingNames() []string {
	var out []string
	for n := range b.spacing {
		out = append(out, n)
	}
	sort.Strings(out)
	return out
}

// computed reports what package conductor finds impossible, at the row.
func (b *builder) computed(r *constructionRow, m conductor.Matrices, err error) conductor.Matrices {
	if err != nil {
		b.faults.Add(r.Row.At, "construction %q on spacing %q: %v", r.Name.Value, r.Spacing.Value, joined(err))
	}
	return m
}

// joined puts errors that stand on lines of their own on one line.
func joined(err error) string {
	var list interface{ Unwrap() []error }
	if errors.As(err, &list) {
		s := ""
		for i, e := range list.Unwrap() {
			if i > 0 {
				s += "; "
			}
			s += e.Error()
		}
		return s
	}
	return err.Error()
}

func (b *builder) overhead(r *constructionRow, c *Construction, lib library) {
	what := "construction " + strconv.Quote(r.Name.Value)
	s, ok1 := named(b, r.Spacing, what, "spacing", b.spacing, b.spacingNames(), r.Row.At)
	phase, ok2 := named(b, r.Phase, what, "phase conductor", lib.conductors, lib.conductorNames, r.Row.At)
	if !ok1 || !ok2 || len(s.phase) == 0 {
		return
	}
	l := conductor.Line{Frequency: b.model.Frequency, EarthResistivity: b.earth(r), Phase: s.phase, PhaseConductor: phase, Neutral: s.neutral}
	if !b.neutral(r, s, lib, what, &l.NeutralConductor) {
		return
	}
	m, err := l.Overhead()
	c.Matrices = b.computed(r, m, err)
	b.constructionRating(c, phase.Rating, "that of conductor "+phase.Name)
}

// neutral finds the conductor of a spacing's neutral.
func (b *builder) neutral(r *constructionRow, s *spacing, lib library, what string, out *conductor.Conductor) bool {
	if s.neutral == nil {
		if r.Neutral.Value != "" {
			b.faults.Add(r.Neutral.At, "%s: it has a neutral conductor, but spacing %q has no position N", what, r.Spacing.Value)
			return false
		}
		return true
	}
	n, ok := named(b, r.Neutral, what, "neutral conductor", lib.conductors, lib.conductorNames, r.Row.At)
	*out = n
	return ok
}

func (b *builder) cable(r *constructionRow, c *Construction, lib library) {
	what := "construction " + strconv.Quote(r.Name.Value)
	s, ok1 := named(b, r.Spacing, what, "spacing", b.spacing, b.spacingNames(), r.Row.At)
	k, ok2 := named(b, r.Phase, what, "phase conductor", lib.cables, lib.cableNames, r.Row.At)
	if !ok1 || !ok2 || len(s.phase) == 0 {
		return
	}
	l := conductor.CableLine{Frequency: b.model.Frequency, EarthResistivity: b.earth(r), Phase: s.phase, Cable: k, Neutral: s.neutral}
	var ok bool
	if l.Core, ok = lib.conductors[k.Conductor]; !ok {
		b.faults.Add(r.Phase.At, "%s: cable %q has an unknown conductor %q%s", what, k.Name, k.Conductor, tables.Hint(k.Conductor, lib.conductorNames))
		return
	}
	if !b.neutral(r, s, lib, what, &l.NeutralConductor) {
		return
	}
	var m conductor.Matrices
	var err error
	if r.Kind.Value == "tape shield" {
		m, err = l.TapeShield()
	} else {
		if l.Strand, ok = lib.conductors[k.Strand]; !ok {
			b.faults.Add(r.Phase.At, "%s: cable %q has an unknown strand conductor %q%s", what, k.Name, k.Strand, tables.Hint(k.Strand, lib.conductorNames))
			return
		}
		m, err = l.ConcentricNeutral()
	}
	c.Matrices = b.computed(r, m, err)
	rating := k.Rating
	if Unknown(rating) {
		rating = l.Core.Rating
	}
	b.constructionRating(c, rating, "that of cable "+k.Name)
}

func (b *builder) constructionRating(c *Construction, rating float64, whose string) {
	if Unknown(c.Rating) && !Unknown(rating) && rating > 0 {
		c.Rating = rating
		b.assume(c.At, "construction "+c.Name+": rating [A]", amount(rating)+" ("+whose+")")
	}
}

func (b *builder) sequence(r *constructionRow, c *Construction) {
	for _, n := range []struct {
		name string
		cell tables.Number
	}{{"r1", r.R1}, {"x1", r.X1}, {"r0", r.R0}, {"x0", r.X0}} {
		if !n.cell.Given {
			b.faults.Add(r.Row.At, "construction %q: %s is blank; kind sequence needs r1, x1, r0 and x0", r.Name.Value, n.name)
			return
		}
	}
	b1, b0 := r.B1.Value, r.B0.Value
	if !r.B1.Given {
		b1 = 0
		b.assume(r.Row.At, "construction "+r.Name.Value+": b1 [uS/km]", "0")
	}
	if !r.B0.Given {
		b0 = b1
		b.assume(r.Row.At, "construction "+r.Name.Value+": b0 [uS/km]", amount(b1)+" (b1)")
	}
	c.Matrices = conductor.Sequence(complex(r.R1.Value, r.X1.Value), complex(r.R0.Value, r.X0.Value), b1*1e-6, b0*1e-6)
}

// matrix puts the rows of impedances.csv into matrices. The triangle that is not
// given is the mirror of the other.
func (b *builder) matrix(r *constructionRow, rows []*impedanceRow) conductor.Matrices {
	var m conductor.Matrices
	var has [3][3]bool
	for _, e := range rows {
		i, j := e.I.Value-1, e.J.Value-1
		if i < 0 || i > 2 || j < 0 || j > 2 {
			b.faults.Add(e.I.At, "construction %q: row %d, column %d: the positions are 1, 2 and 3", r.Name.Value, i+1, j+1)
			return m
		}
		z, y := complex(e.R.Value, e.X.Value), e.B.Value*1e-6
		if has[i][j] && (m.Z[i][j] != z || m.B[i][j] != y) {
			b.faults.Add(e.I.At, "construction %q: row %d, column %d differs from row %d, column %d; the matrix is symmetrical: give the lower triangle only", r.Name.Value, i+1, j+1, j+1, i+1)
		}
		m.Z[i][j], m.Z[j][i], m.B[i][j], m.B[j][i] = z, z, y, y
		has[i][j], has[j][i] = true, true
		m.N = max(m.N, i+1, j+1)
	}
	if m.N == 0 {
		if !b.t.dropped["impedances"] {
			b.faults.Add(r.Row.At, "construction %q: there are no rows of it in impedances.csv", r.Name.Value)
		}
	}
	for i := range m.N {
		for j := range i + 1 {
			if !has[i][j] && !b.t.dropped["impedances"] {
				b.faults.Add(r.Row.At, "construction %q: row %d, column %d is missing in impedances.csv", r.Name.Value, i+1, j+1)
			}
		}
		if has[i][i] && !(real(m.Z[i][i]) > 0) {
			b.faults.Add(r.Row.At, "construction %q: r of position %d must be above 0, got %v", r.Name.Value, i+1, real(m.Z[i][i]))
		}
	}
	return m
}

func (b *builder) sections() {
	at := map[string]int{}
	for i := range b.model.Constructions {
		at[b.model.Constructions[i].Name] = i
	}
	for i := range b.t.sections {
		r := &b.t.sections[i]
		what := "section " + strconv.Quote(r.Name.Value)
		from, to, ok := b.ends(r.From, r.To, what)
		ps, okPhases := b.phasesOf(r.Phases, what)
		k, known := at[r.Construction.Value]
		if !known && r.Construction.Value != "" {
			b.faults.Add(r.Construction.At, "%s: unknown construction %q%s", what, r.Construction.Value, tables.Hint(r.Construction.Value, b.constructionNames()))
		}
		if !ok || !okPhases || !known {
			b.torn = true
			continue
		}
		c := &b.model.Constructions[k]
		if c.Matrices.N > 0 && len(ps) > c.Matrices.N {
			b.faults.Add(r.Phases.At, "%s has %d phases, its construction %q %d positions", what, len(ps), c.Name, c.Matrices.N)
		}
		s := Section{Name: r.Name.Value, At: r.Row.At, From: from, To: to, Phases: ps, LengthKM: r.Length.Value, Construction: k,
			Rating: r.Rating.Value, Emergency: r.Emergency.Value, Winter: r.Winter.Value}
		if math.IsNaN(s.Rating) && !math.IsNaN(c.Rating) {
			s.Rating = c.Rating
			b.assumeMany(s.At, "sections: rating [A]", "that of the construction")
		}
		b.model.Sections = append(b.model.Sections, s)
		b.join(link{kind: "section", name: s.Name, at: s.At, from: from, to: to, fromPhases: ps, toPhases: ps, perPhase: true, galvanic: true})
	}
}

func (b *builder) switches() {
	for i := range b.t.switches {
		r := &b.t.switches[i]
		what := "switch " + strconv.Quote(r.Name.Value)
		from, to, ok := b.ends(r.From, r.To, what)
		ps, okPhases := b.phasesOf(r.Phases, what)
		if !ok || !okPhases {
			b.torn = true
			continue
		}
		ps = ordered(ps)
		s := Switch{Name: r.Name.Value, At: r.Row.At, From: from, To: to, Phases: ps, Closed: r.State.Value == "closed", Rating: r.Rating.Value}
		b.model.Switches = append(b.model.Switches, s)
		b.join(link{kind: "switch", name: s.Name, at: s.At, from: from, to: to, fromPhases: ps, toPhases: ps, perPhase: true, galvanic: true, open: !s.Closed})
	}
}
