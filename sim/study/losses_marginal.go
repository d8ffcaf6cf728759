package study

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"runtime"
	"slices"

	"golang.org/x/sync/errgroup"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// Marginal is how much the feeder loses for a kW more at each place, and what a kW saved
// there is worth.
//
// It is worked out at samples of the year: every s-th step, s a number that has no common
// divisor with the steps of a week, so that every hour of the day and day of the week is
// met alike, and at the step of each month's charged peak. At each of them the positions
// of the devices are those that the run logged, and the step is solved again with
// probeKW more at one node after another (sim.Engine.Marginal). The mean over the year is
// the mean over the samples; Spread says how much it hangs on which were taken.
type Marginal struct {
	Places  []MarginalPlace
	Samples int     // of the year
	Peaks   int     // months whose peak was solved
	Spread  float64 // the largest difference of a place's mean over every other sample from that over the rest, in points of %
}

// MarginalPlace is one node.
type MarginalPlace struct {
	Node, Phases     string
	DistanceKM       float64
	FedFrom          string  // the next place of the table towards the source; blank at a source
	X, Y             float64 // as nodes.csv has them: m, or degrees; NaN where it does not say
	Mean, Low, High  float64 // kW of losses per kW more, over the samples
	Priced           float64 // mean of price·m over mean price; NaN without a price
	AtPeak           float64 // mean over the months' peaks
	SumAtPeaks       float64 // Σ over them
	Missing          int     // samples without a value
	first, second    float64 // sums of the two halves
	firstN, secondN  int
	sum, priced, all float64 // of m, price·m, price
}

// probeKW is the power that is added: small against any load, large against the
// tolerance of a solution.
const probeKW = 0.1

// mostPlaces is how many nodes are all taken; of more, those with a load.
const mostPlaces = 600

// solutions is about how many solutions are spent on the samples where nobody says.
const solutions = 60_000

// sampled is one step to solve.
type sampled struct {
	step   int
	peak   bool
	weight float64 // price at the step; 1 without one
}

func (m *Marginal) how() string {
	return fmt.Sprintf("%d steps of the period and the peaks of %d months, each solved again with %g kW more at one place after another, at the positions that the run logged; "+
		"the means of two halves of the samples differ by at most %.2f points", m.Samples, m.Peaks, probeKW, m.Spread)
}

// marginal works it out on the base.
func marginal(ctx context.Context, p Place, c *Case, s LossSettings) (*Marginal, error) {
	nodes := marginalNodes(c.Study.Model)
	samples := chooseSamples(c, s.Samples, len(nodes))
	positions, err := positionsOf(c)
	if err != nil {
		return nil, err
	}
	rows := make([][]float64, len(samples))
	workers := s.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	workers = max(1, min(workers, len(samples)))
	g, ctx := errgroup.WithContext(ctx)
	for w := range workers {
		g.Go(func() error {
			// An engine is one goroutine's; a study read anew shares nothing with others.
			st, err := feeder.Open(p.FS, c.Name)
			if err != nil {
				return err
			}
			e, err := sim.Prepare(st, sim.Options{Demo: p.Demo, Probes: nodes})
			if err != nil {
				return err
			}
			for k := w; k < len(samples); k += workers {
				if err := ctx.Err(); err != nil {
					return err
				}
				at, ok := positions(samples[k].step)
				if !ok {
					continue
				}
				row := make([]float64, len(nodes))
				if _, ok, err = e.Marginal(row, samples[k].step, at, probeKW); err != nil {
					return err
				}
				if ok {
					rows[k] = row
				}
			}
			return nil
		})
	}
	if err := g.Wait(); err != nil {
		return nil, fmt.Errorf("marginal losses: %w", err)
	}
	return gather(c, nodes, samples, rows), nil
}

// marginalNodes are the nodes asked about: all, or on a large feeder those with a load.
func marginalNodes(m *feeder.Model) (out []int) {
	for i := range m.Nodes {
		n := &m.Nodes[i]
		loaded := false
		for _, has := range n.HasLoad {
			loaded = loaded || has
		}
		if len(m.Nodes) <= mostPlaces || loaded {
			out = append(out, i)
		}
	}
	return out
}

// chooseSamples takes steps of the period and the step of each month's charged peak.
func chooseSamples(c *Case, wanted, places int) (out []sampled) {
	set := c.Study.Settings.Period
	n := set.Steps()
	if wanted == 0 {
		wanted = min(288, max(24, solutions/max(1, places)))
	}
	week := int(7 * 86400 * int64(1e9) / set.Step)
	stride := max(1, n/max(1, wanted))
	for stride > 1 && gcd(stride, week) != 1 {
		stride++
	}
	price := func(step int) float64 {
		if c.Price != nil {
			return c.Price[step]
		}
		return 1
	}
	for i := stride / 2; i < n; i += stride {
		out = append(out, sampled{step: i, weight: price(i)})
	}
	per := int(c.Results.Steps.RowLength / set.Step)
	for _, m := range peaksOf(c, c.Peak) {
		if m.row >= 0 {
			out = append(out, sampled{step: min(m.row*per, n-1), peak: true})
		}
	}
	return out
}

func gcd(a, b int) int {
	for b != 0 {
		a, b = b, a%b
	}
	return a
}

// positionsOf returns the positions that the run logged for a step.
func positionsOf(c *Case) (func(step int) (sim.Positions, bool), error) {
	d, m := &c.Results.Devices, c.Study.Model
	var taps, banks [][]float64
	for i := range m.Regulators {
		r := &m.Regulators[i]
		for u := range r.Units {
			name := r.Name + "." + r.Units[u].Name(r.Connection)
			col := d.Column(name)
			if col == nil && len(d.Time) > 0 {
				return nil, fmt.Errorf("devices.csv has no column %s: run again", name)
			}
			taps = append(taps, col)
		}
	}
	for i := range m.Capacitors {
		col := d.Column(m.Capacitors[i].Name)
		if col == nil && len(d.Time) > 0 {
			return nil, fmt.Errorf("devices.csv has no column %s: run again", m.Capacitors[i].Name)
		}
		banks = append(banks, col)
	}
	set, s := c.Study.Settings.Period, &c.Results.Steps
	return func(step int) (sim.Positions, bool) {
		row := rowAt(s, set.Start+int64(step)*set.Step)
		if row < 0 || row >= len(d.Time) || s.Status[row] != results.OK {
			return sim.Positions{}, false
		}
		p := sim.Positions{Taps: make([]int, len(taps)), Closed: make([]bool, len(banks))}
		for i, col := range taps {
			p.Taps[i] = int(math.Round(col[row]))
		}
		for i, col := range banks {
			p.Closed[i] = col[row] != 0
		}
		return p, true
	}, nil
}

// gather makes the places of the samples, in their order, whoever solved them.
func gather(c *Case, nodes []int, samples []sampled, rows [][]float64) *Marginal {
	m := &Marginal{}
	distance := map[string]float64{}
	for _, p := range c.Results.Places {
		distance[p.Node] = p.DistanceKM
	}
	fed := fedFrom(c.Study.Model, nodes)
	for _, n := range nodes {
		node := &c.Study.Model.Nodes[n]
		x := MarginalPlace{Node: node.Name, DistanceKM: math.NaN(), FedFrom: fed[n], X: node.X, Y: node.Y, Low: math.Inf(1), High: math.Inf(-1)}
		if d, ok := distance[node.Name]; ok {
			x.DistanceKM = d
		}
		for _, p := range node.Phases {
			x.Phases += p.String()
		}
		m.Places = append(m.Places, x)
	}
	for k, row := range rows {
		if row == nil {
			continue
		}
		if samples[k].peak {
			m.Peaks++
		} else {
			m.Samples++
		}
		for i, v := range row {
			m.Places[i].take(samples[k], v, m.Samples%2 == 0)
		}
	}
	for i := range m.Places {
		x := &m.Places[i]
		n := x.firstN + x.secondN
		x.Mean, x.Priced = x.sum/float64(n), x.priced/x.all
		x.AtPeak = x.SumAtPeaks / float64(m.Peaks)
		if x.firstN > 0 && x.secondN > 0 {
			m.Spread = math.Max(m.Spread, 100*math.Abs(x.first/float64(x.firstN)-x.second/float64(x.secondN)))
		}
		if n == 0 {
			x.Low, x.High = math.NaN(), math.NaN()
		}
	}
	slices.SortStableFunc(m.Places, func(a, b MarginalPlace) int { return cmp.Compare(b.Mean, a.Mean) })
	return m
}

// fedFrom names for each node the next of the asked ones on the way to a source, the way
// of the fewest elements; of equally short ones the first of the tables.
func fedFrom(m *feeder.Model, asked []int) map[int]string {
	near := make([][]int, len(m.Nodes))
	join := func(a, b int) { near[a], near[b] = append(near[a], b), append(near[b], a) }
	for i := range m.Sections {
		join(m.Sections[i].From, m.Sections[i].To)
	}
	for i := range m.Transformers {
		join(m.Transformers[i].From, m.Transformers[i].To)
	}
	for i := range m.Regulators {
		join(m.Regulators[i].From, m.Regulators[i].To)
	}
	for i := range m.Switches {
		if m.Switches[i].Closed {
			join(m.Switches[i].From, m.Switches[i].To)
		}
	}
	taken, reached := make([]bool, len(m.Nodes)), make([]bool, len(m.Nodes))
	for _, n := range asked {
		taken[n] = true
	}
	out := make(map[int]string, len(asked))
	var queue []int
	for i := range m.Sources {
		if n := m.Sources[i].Node; !reached[n] {
			reached[n] = true
			queue = append(queue, n)
		}
	}
	for ; len(queue) > 0; queue = queue[1:] {
		from := queue[0]
		name := out[from] // an asked node is named by itself, another by who feeds it
		if taken[from] {
			name = m.Nodes[from].Name
		}
		for _, to := range near[from] {
			if !reached[to] {
				reached[to] = true
				out[to] = name
				queue = append(queue, to)
			}
		}
	}
	return out
}

// marginalNoise is a marginal loss below which it is one of the solver's tolerance: 0.
const marginalNoise = 1e-8

func (x *MarginalPlace) take(s sampled, v float64, second bool) {
	if math.Abs(v) < marginalNoise {
		v = 0
	}
	switch {
	case math.IsNaN(v):
		x.Missing++
	case s.peak:
		x.SumAtPeaks += v
	default:
		x.sum += v
		x.priced += v * s.weight
		x.all += s.weight
		x.Low, x.High = math.Min(x.Low, v), math.Max(x.High, v)
		if second {
			x.second += v
			x.secondN++
		} else {
			x.first += v
			x.firstN++
		}
	}
}

// marginalTable is marginal.csv: per cent of a kW more that is lost on the way, and what
// a kW that is saved there all year is worth at the source, with the losses that it
// saves.
func (l *LossEstimate) marginalTable() NamedTable {
	head := []string{"node", "phases", "distance [km]", "fed from"}
	// Where a place stands on the map, so that the figure is drawn from this table alone.
	x, y := l.coordinates()
	if x != "" {
		head = append(head, x, y)
	}
	head = append(head, "marginal losses [%]", "lowest [%]", "highest [%]", "at monthly peaks [%]", "losses saved by 1 kW all year [kWh]")
	per := " [" + l.Currency + "/kW a year]"
	if l.priced() {
		head = append(head, "energy of 1 kW saved"+per, "of it losses"+per)
	}
	if l.demands() {
		head = append(head, "demand of 1 kW saved"+per)
	}
	if l.priced() || l.demands() {
		head = append(head, "value of 1 kW saved"+per)
	}
	worth := !feeder.Unknown(l.prices.Rate) && (l.priced() || l.demands())
	if worth {
		head = append(head, "present worth of 1 kW saved ["+l.Currency+"/kW]")
	}
	t := NamedTable{Name: "marginal.csv", Rows: [][]string{head}}
	hours := l.meters[0].hours * l.scale
	price := l.prices.Energy
	if c := l.Cases[0]; c.Price != nil {
		price = mean(c.Price)
	}
	months := float64(len(l.meters[0].months))
	for _, x := range l.Marginal.Places {
		row := []string{x.Node, x.Phases, results.FigureText(x.DistanceKM), x.FedFrom}
		if y != "" {
			row = append(row, results.FigureText(x.X), results.FigureText(x.Y))
		}
		row = append(row, results.FigureText(100*x.Mean), results.FigureText(100*x.Low), results.FigureText(100*x.High),
			results.FigureText(100*x.AtPeak), results.FigureText(hours*x.Mean))
		yearly := 0.0
		if l.priced() {
			row = append(row, money(hours*price*(1+x.Priced)), money(hours*price*x.Priced))
			yearly += hours * price * (1 + x.Priced)
		}
		if l.demands() {
			d := l.prices.Demand * l.scale * months * (1 + x.AtPeak)
			row = append(row, money(d))
			yearly += d
		}
		if l.priced() || l.demands() {
			row = append(row, money(yearly))
		}
		if worth {
			row = append(row, money(yearly*PresentWorthFactor(l.prices.Rate, l.prices.Years)))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// coordinates heads the columns of the places' coordinates; blank where no place has any.
func (l *LossEstimate) coordinates() (x, y string) {
	m := l.Cases[0].Study.Model
	for i := range m.Nodes {
		switch n := &m.Nodes[i]; {
		case math.IsNaN(n.X + n.Y):
		case n.LonLat:
			return "longitude [deg]", "latitude [deg]"
		default:
			return "x [m]", "y [m]"
		}
	}
	return "", ""
}
