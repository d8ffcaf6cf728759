package feeder

import (
	"fmt"
	"math"
	"sort"
	"strconv"

	"yearflow/sim/tables"
)

// builder turns rows into a Model. It goes on past faults where it can, so that they
// are reported together.
type builder struct {
	t        *feederTables
	faults   *tables.Faults
	warnings tables.Faults
	uses     []ProfileUse
	model    *Model

	names []string       // of nodes, for hints
	index map[string]int // of nodes
	links []link         // what joins nodes, in the order of tables
	torn  bool           // a row that joins nodes was left out for its faults
	many  []*grouped     // assumptions of many rows

	spacing map[string]*spacing
}

func plural(n int, one, more string) string {
	if n == 1 {
		return one
	}
	return more
}

func itoa(n int) string { return strconv.Itoa(n) }

// amount is a value as messages print it.
func amount(x float64) string { return strconv.FormatFloat(x, 'g', 5, 64) }

func newBuilder(t *feederTables, frequency float64, faults *tables.Faults) *builder {
	return &builder{t: t, faults: faults, model: &Model{Frequency: frequency, index: map[string]int{}}, index: map[string]int{}}
}

func (b *builder) assume(at tables.Pos, what, value string) {
	b.model.Assumed = append(b.model.Assumed, Assumption{at, what, value})
}

// grouped is an assumption that is the same for many rows of a table.
type grouped struct {
	what, value string
	first       tables.Pos
	count       int
}

// assumeMany counts an assumption that is told once for its table.
func (b *builder) assumeMany(at tables.Pos, what, value string) {
	for _, g := range b.many {
		if g.what == what {
			g.count++
			return
		}
	}
	b.many = append(b.many, &grouped{what, value, at, 1})
}

// build makes the model. Where there were faults in it the model is not whole.
func (b *builder) build() *Model {
	before := len(*b.faults)
	b.model.Assumed = append(b.model.Assumed, b.t.assumed...)
	b.nodes()
	b.sources()
	b.constructions()
	b.sections()
	b.switches()
	b.transformers()
	b.regulators()
	b.phases()
	// What follows reads the phases and parts of nodes; faults in what joins them
	// would only be told twice.
	for _, name := range []string{"source", "sections", "switches", "transformers", "regulators"} {
		b.torn = b.torn || b.t.dropped[name]
	}
	if len(*b.faults) == before && !b.torn && b.connected() {
		b.parts()
		b.nominals()
		b.idealLoops()
		b.phaseShifts()
	}
	b.capacitors()
	b.loads()
	b.functions()
	b.generators()
	b.batteries()
	b.ties()
	b.chargers()
	b.measurements()
	if len(*b.faults) == before && !b.torn {
		b.floating()
	}
	for _, g := range b.many {
		b.assume(g.first, fmt.Sprintf("%s (blank in %d%s)", g.what, g.count, plural(g.count, " row", " rows")), g.value)
	}
	sort.SliceStable(b.model.Assumed, func(i, j int) bool { return earlier(b.model.Assumed[i].Pos, b.model.Assumed[j].Pos) })
	return b.model
}

func earlier(a, b tables.Pos) bool {
	if a.File != b.File {
		return a.File < b.File
	}
	return a.Line < b.Line
}

// nodes collects the places that anything joins or that are listed.
func (b *builder) nodes() {
	at := map[string]tables.Pos{}
	see := func(c tables.Text) {
		if _, known := at[c.Value]; !known && c.Value != "" {
			at[c.Value] = c.At
		}
	}
	for i := range b.t.sources {
		see(b.t.sources[i].Node)
	}
	for i := range b.t.sections {
		see(b.t.sections[i].From)
		see(b.t.sections[i].To)
	}
	for i := range b.t.switches {
		see(b.t.switches[i].From)
		see(b.t.switches[i].To)
	}
	for i := range b.t.transformers {
		see(b.t.transformers[i].From)
		see(b.t.transformers[i].To)
	}
	for i := range b.t.regulators {
		see(b.t.regulators[i].From)
		see(b.t.regulators[i].To)
	}
	joined := make([]string, 0, len(at))
	for n := range at {
		joined = append(joined, n)
	}
	sort.Strings(joined)
	b.names = joined
	for i, n := range joined {
		b.index[n] = i
		b.model.index[n] = i
		b.model.Nodes = append(b.model.Nodes, Node{Name: n, At: at[n], Nominal: math.NaN(), X: math.NaN(), Y: math.NaN()})
	}
	for i := range b.t.nodes {
		b.place(&b.t.nodes[i])
	}
}

// place puts a row of nodes.csv on its node.
func (b *builder) place(r *nodeRow) {
	i, ok := b.index[r.Node.Value]
	if !ok && (b.t.removed["sections"] != nil || b.t.removed["transformers"] != nil || b.t.removed["switches"] != nil || b.t.removed["regulators"] != nil) {
		return // the case took away what met it
	}
	if !ok {
		b.faults.Add(r.Node.At, "node %q: no source, section, switch, transformer or regulator meets it%s", r.Node.Value, tables.Hint(r.Node.Value, b.names))
		return
	}
	n := &b.model.Nodes[i]
	n.Area = r.Area.Value
	if r.Row.Bad {
		return
	}
	plane, globe := r.X.Given || r.Y.Given, r.Longitude.Given || r.Latitude.Given
	switch {
	case plane && globe:
		b.faults.Add(r.X.At, "node %q: give x and y, or longitude and latitude, not both", r.Node.Value)
	case plane && !(r.X.Given && r.Y.Given), globe && !(r.Longitude.Given && r.Latitude.Given):
		b.faults.Add(r.Row.At, "node %q: one of two coordinates is blank", r.Node.Value)
	case plane:
		n.X, n.Y = r.X.Value, r.Y.Value
	case globe:
		n.X, n.Y, n.LonLat = r.Longitude.Value, r.Latitude.Value, true
		if math.Abs(n.X) > 180 || math.Abs(n.Y) > 90 {
			b.faults.Add(r.Longitude.At, "node %q: longitude %v, latitude %v is no place on earth", r.Node.Value, n.X, n.Y)
		}
	}
}

// node finds a node that something names.
func (b *builder) node(c tables.Text, what string) (int, bool) {
	if c.Value == "" {
		return 0, false // the blank cell is a fault already
	}
	i, ok := b.index[c.Value]
	if !ok {
		b.faults.Add(c.At, "%s: unknown node %q%s", what, c.Value, tables.Hint(c.Value, b.names))
	}
	return i, ok
}

// ends finds the two nodes of what joins them.
func (b *builder) ends(from, to tables.Text, what string) (i, j int, ok bool) {
	i, ok1 := b.node(from, what)
	j, ok2 := b.node(to, what)
	if ok1 && ok2 && i == j {
		b.faults.Add(to.At, "%s: from and to are the same node %q", what, to.Value)
		return 0, 0, false
	}
	return i, j, ok1 && ok2
}

func (b *builder) phasesOf(c tables.Text, what string) ([]Phase, bool) {
	if c.Value == "" {
		return nil, false
	}
	ps, err := parsePhases(c.Value)
	if err != nil {
		b.faults.Add(c.At, "%s: %v", what, err)
		return nil, false
	}
	return ps, true
}

// sources turns short-circuit powers into impedances:
//
//	|Z1| = V²/S3,   |2·Z1 + Z0| = 3·V²/S1 (S1 = √3·V·I of a line-to-ground fault)
//
// each with its own X/R (IEC 60909-0 has the same sequence circuits).
func (b *builder) sources() {
	if len(b.t.sources) == 0 && !b.t.dropped["source"] && len(*b.faults) == 0 {
		b.faults.Add(tables.Pos{File: b.t.folder + "/source.csv"}, "has no row; a feeder needs a source")
	}
	for i := range b.t.sources {
		r := &b.t.sources[i]
		n, ok := b.index[r.Node.Value]
		if !ok {
			continue
		}
		s := Source{At: r.Row.At, Node: n, Nominal: r.Nominal.Value, Voltage: r.Voltage.Value, Angle: r.Angle.Value,
			Profile: r.Profile.Value, AtBus: r.At.Value == "bus"}
		if r.Profile.Value != "" {
			b.uses = append(b.uses, ProfileUse{r.Profile.Value, r.Profile.At, WantVoltage})
		}
		b.shortCircuit(r, &s)
		b.model.Sources = append(b.model.Sources, s)
	}
}

func (b *builder) shortCircuit(r *sourceRow, s *Source) {
	what := "source " + strconv.Quote(r.Node.Value)
	if r.Row.Bad {
		return
	}
	if !r.MVA3.Given {
		if r.XR3.Given || r.MVA1.Given || r.XR1.Given {
			b.faults.Add(r.Row.At, "%s: short circuit 3ph [MVA] is blank; give it, or leave the whole impedance blank for a stiff source", what)
		}
		return
	}
	if !r.XR3.Given {
		b.faults.Add(r.Row.At, "%s: x/r 3ph is blank; short circuit 3ph needs it", what)
		return
	}
	z := r.Nominal.Value * r.Nominal.Value / r.MVA3.Value
	s.Z1 = polar(z, r.XR3.Value)
	if !r.MVA1.Given {
		s.Z0 = s.Z1
		b.assume(r.Row.At, what+": short circuit 1ph", "Z0 = Z1")
		if r.XR1.Given {
			b.faults.Add(r.XR1.At, "%s: x/r 1ph is given without short circuit 1ph [MVA]", what)
		}
		return
	}
	xr := r.XR1.Value
	if !r.XR1.Given {
		xr = r.XR3.Value
		b.assume(r.Row.At, what+": x/r 1ph", amount(xr)+" (that of the three-phase short circuit)")
	}
	s.Z0 = polar(3*r.Nominal.Value*r.Nominal.Value/r.MVA1.Value, xr) - 2*s.Z1
	if real(s.Z0) < 0 || imag(s.Z0) < 0 {
		b.faults.Add(r.MVA1.At, "%s: the short circuits give Z0 = %.4g%+.4gj ohm, which no source has; look at short circuit 1ph and x/r 1ph", what, real(s.Z0), imag(s.Z0))
	}
}

// polar is the impedance of that magnitude and ratio X/R.
func polar(z, xr float64) complex128 {
	r := z / math.Hypot(1, xr)
	return complex(r, r*xr)
}
