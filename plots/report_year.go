package plots

import (
	"math"
	"slices"
	"sort"
	"strconv"
)

// feederSection is the feeder at a glance.
func (r *runReport) feederSection() Section {
	rec := r.record
	facts := Facts{Rows: []Fact{
		{"Size", Say("{} nodes, {} node.phases, {} loads, {} customers, {} generators", rec.Value("counts", "nodes", "1"), rec.Value("counts", "node_phases", "1"),
			rec.Value("counts", "loads", "1"), r.sum("customers"), rec.Value("counts", "generators", "1"))},
		{"Nominal voltages", Plain(r.levels())},
	}}
	if v, ok := r.lineLength(); ok {
		facts.Rows = append(facts.Rows, Fact{"Line length", Text{v}})
	}
	if row := r.farthest(); row >= 0 {
		facts.Rows = append(facts.Rows, Fact{"Farthest node", Say("{} from the source along the feeder, {}", r.places.Value(row, "distance"), r.places.Name(row, "node"))})
	}
	facts.Rows = append(facts.Rows, Fact{"Elements", r.elements()})
	for _, x := range [...]struct{ name, quantity string }{{"Peak demand", "peak demand"}, {"Lowest demand", "lowest demand"}} {
		if r.has(x.quantity) {
			facts.Rows = append(facts.Rows, Fact{x.name, Say("{}, {}", r.sum(x.quantity), r.sum(x.quantity+" time"))})
		}
	}
	s := Section{Heading: "The feeder at a glance", Blocks: []Block{facts}}
	if r.plants != nil && len(r.plants.Rows) > 0 {
		s.Blocks = append(s.Blocks, r.plants.Table("Generators, batteries and chargers over the period", nil, nil, "kind"))
	}
	s.Blocks = append(s.Blocks, r.picture("map")...) // last: on paper it wants most of a page
	return s
}

// levels lists the nominal voltages of the feeder, highest first.
func (r *runReport) levels() string {
	var kv []float64
	for _, p := range r.Places {
		if !math.IsNaN(p.NominalKV) && !slices.Contains(kv, p.NominalKV) {
			kv = append(kv, p.NominalKV)
		}
	}
	sort.Sort(sort.Reverse(sort.Float64Slice(kv)))
	text := ""
	for i, v := range kv {
		if i > 0 {
			text += ", "
		}
		text += strconv.FormatFloat(v, 'g', 4, 64)
	}
	return text + " kV line-to-line"
}

// lineLength is the sum of the lengths of network.csv.
func (r *runReport) lineLength() (Value, bool) {
	sum := 0.0
	for _, b := range r.Branches {
		if !math.IsNaN(b.LengthKM) {
			sum += b.LengthKM
		}
	}
	return Number(strconv.FormatFloat(sum, 'f', 6, 64), "km", SourceOf("network.csv", "length [km]", "*")), sum > 0
}

func (r *runReport) farthest() int {
	row := -1
	for i, p := range r.Places {
		if !math.IsNaN(p.DistanceKM) && (row < 0 || p.DistanceKM > r.Places[row].DistanceKM) {
			row = i
		}
	}
	return row
}

// elements counts the rows of network.csv by kind, in the order they come.
func (r *runReport) elements() Text {
	var kinds []string
	number := map[string]int{}
	for _, b := range r.Branches {
		if number[b.Kind]++; number[b.Kind] == 1 {
			kinds = append(kinds, b.Kind)
		}
	}
	var t Text
	for i, k := range kinds {
		if i > 0 {
			t = append(t, Word(", "))
		}
		word := k
		if number[k] != 1 {
			word = plural(k)
		}
		t = append(t, Say("{} "+word, Number(strconv.Itoa(number[k]), "1", SourceOf("network.csv", "kind="+k, "*")))...)
	}
	if t == nil {
		return Plain("none")
	}
	return t
}

func plural(word string) string {
	if word == "switch" || word == "open switch" || word == "closed switch" {
		return word + "es"
	}
	return word + "s"
}

// yearSection is what the period came to.
func (r *runReport) yearSection() Section {
	s := Section{Heading: "The period: demand, losses, voltage, operations, loading"}
	add := func(b ...Block) { s.Blocks = append(s.Blocks, b...) }
	add(Heading("Energy, demand and losses"),
		r.quantities("Totals, peaks and factors", "source energy", "load energy", "generation energy", "losses energy", "losses share of energy supplied",
			"line losses energy", "transformer load losses energy", "transformer no-load losses energy", "regulator losses energy",
			"peak demand", "lowest demand", "hours of power into the source", "peak losses", "load factor", "loss factor", "equivalent hours of loss"))
	add(r.picture("power", "losses")...)
	add(r.topLosses()...)
	add(Heading("Voltage"),
		r.quantities("Extremes and hours, settled intervals", "lowest judged voltage", "highest judged voltage", "lowest voltage", "highest voltage", "places judged", "places ever outside A", "place-hours outside A",
			"hours with a place below A", "hours with a place above A", "hours with a place below B", "hours with a place above B",
			"customers", "customers ever outside A", "customers outside A for more than 1 h", "customers outside A for more than 5 % of the time",
			"customer-hours below A", "customer-hours above A", "settling place-hours outside A", "highest unbalance", "hours with unbalance above 3 %", "highest negative sequence"))
	add(r.picture("voltage-envelope", "voltage-duration")...)
	add(Heading("Operations"))
	add(r.picture("taps")...)
	add(r.quantities("Counts of the period", "operations", "tap operations", "tap raises", "tap lowers", "capacitor operations", "capacitor closings", "capacitor openings", "device-hours at a stop", "device-hours hunting"))
	if len(r.duty.Rows) > 0 {
		t := r.duty.Table("Operations of each device", existing(r.duty, "device", "phase", "operations", "raises", "lowers", "reversals", "busiest day", "operations that day", "lowest position", "highest position", "hours at a stop", "hours out of band", "hours reverse", "hunting"), nil, "busiest day")
		t.Note = Plain("Start-up is not counted. Raises of a capacitor are closings.")
		add(t)
	}
	add(Heading("Loading"), r.quantities("The highest loading", "highest loading", "element phases above rating"))
	if t, ok := r.months(); ok {
		add(Heading("Month by month"), t)
	}
	return s
}

// existing keeps the columns that a table has.
func existing(l *Ledger, columns ...string) []string {
	return slices.DeleteFunc(columns, func(c string) bool { return l.Column(c) < 0 })
}

// quantities is a table of rows of summary.csv, with their places and times.
func (r *runReport) quantities(caption string, names ...string) Table {
	t := Table{Caption: caption, Columns: []Column{{Head: "Quantity", Words: true}, {Head: "Value"}, {Head: "Unit", Words: true}, {Head: "Place", Words: true}, {Head: "Time", Words: true}}}
	placed := false
	for _, q := range names {
		row := r.summary.Row(q)
		if row < 0 {
			continue
		}
		v := r.sum(q)
		cells := []Value{Word(q), bare(v), Word(v.Unit), {}, {}}
		for i, more := range [...]string{" place", " time"} {
			if r.has(q + more) {
				cells[3+i], placed = r.sum(q+more), true
			}
		}
		t.Rows = append(t.Rows, cells)
	}
	if !placed {
		t.Columns = t.Columns[:3]
		for i := range t.Rows {
			t.Rows[i] = t.Rows[i][:3]
		}
	}
	return t
}

// topLosses lists the elements that lose most.
func (r *runReport) topLosses() []Block {
	order := r.order(r.losses, func(i int) float64 { return r.Losses[i].EnergyKWh }, 10)
	if len(order) == 0 {
		return nil
	}
	t := r.losses.Table("Where most is lost", existing(r.losses, "element", "kind", "energy", "share", "peak", "peak time"), order, "kind")
	t.Note = Plain("The first " + count(len(order), "element", "elements") + " of " + number(float64(len(r.losses.Rows)), 0) + " in losses.csv. The share is of all losses.")
	return []Block{t}
}

// order returns the rows with the largest positive size, largest first; equal ones in
// the order of their names.
func (r *runReport) order(l *Ledger, size func(row int) float64, most int) []int {
	var rows []int
	for i := range l.Rows {
		if size(i) > 0 {
			rows = append(rows, i)
		}
	}
	sort.SliceStable(rows, func(a, b int) bool {
		x, y := rows[a], rows[b]
		if size(x) != size(y) {
			return size(x) > size(y)
		}
		return slices.Compare(l.Rows[x][:l.Keys], l.Rows[y][:l.Keys]) < 0
	})
	return rows[:min(len(rows), most)]
}

func (r *runReport) months() (Table, bool) {
	columns := existing(r.monthly, "month", "source energy", "losses energy", "peak", "peak time", "operations", "hours below A", "hours above A", "lowest", "highest", "low steps", "unsolved steps")
	if len(r.monthly.Rows) == 0 {
		return Table{}, false
	}
	t := r.monthly.Table("The months", columns, nil)
	t.Note = Plain("Hours with any judged place outside; energies by kind and the rest stand in monthly.csv.")
	return t, true
}
