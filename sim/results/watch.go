package results

import (
	"math"

	"yearflow/sim/network"
	"yearflow/sim/powerflow/vector"
)

// watch takes quiet steps into statistics, eight at once. Bounds are drawn so that
// nearly all that is read lies within them: only what may be a new extreme, or beyond a
// limit or a rating, is looked at one by one, and then by the code, or at least in the
// operations, that a single instant is looked at with.
type watch struct {
	block
	s *statistics

	rowOf  [lossKinds][]int // row of losses.csv of each part, −1: the part shares it
	shared []sharedLoss
	bare   []int // rows without a part: their loss is 0
	bareAt bool  // it has been booked

	sections  []sectionEnds
	ofPart    [][]int // sections of a line's part
	couplings vector.Squares
	coupleRow []int // into Meter.loading
	banks     vector.Banks
	bankRow   []int
	bankFlow  vector.Rows // sums of currents
	bankAmps  []float64

	// Settled intervals of the lanes at hand, in the order of time, how long all are, and
	// the positions that they stand at.
	spans     []span
	long      durations
	positions [vector.Lanes][]int

	apart *apart // of gathered intervals; nil before the first

	triples      vector.Triples
	triple       []float64
	far, ratioSq [vector.Lanes]float64

	// In histograms: the bin of each point, which stands in its row as a range, and since
	// when time spent there has not been entered. The clock counts quiet steps.
	binned bool
	bins   []int32 // by point and lane
	bin    []int32
	since  []int64
	clock  int64
	// Where most voltages leave their bins anyway they wait, and no point stands in one:
	// everyone moves until waiting has been entered.
	moving  bool
	waiting waiting

	step  int64 // ns, length of the steps whose sums stand in the rows of the lists
	calls int   // since the sums were taken
	stale bool  // the bounds: something was booked elsewhere
	taps  []int // that the bounds are drawn for
}

// sectionEnds is a phase of a section: its row of Meter.loading, and the currents of its
// two ends among the pairs of the lines' losses.
type sectionEnds struct{ row, from, to int }

// sharedLoss is a row of losses.csv of several parts.
type sharedLoss struct {
	row   int
	kind  LossKind
	parts []int
}

func newWatch(s *statistics) *watch {
	m := s.meter
	w := &watch{block: newBlock(m, s.judge), s: s, stale: true}
	w.nameParts()
	part, pair := w.linePairs()
	phases := 0
	for i := range m.loading {
		row := &m.loading[i]
		switch row.kind {
		case network.Section:
			p := part[row.from]
			w.ofPart[p] = append(w.ofPart[p], len(w.sections))
			w.sections = append(w.sections, sectionEnds{i, pair[row.from], pair[row.to]})
		case network.Transformer:
			w.bankRow = append(w.bankRow, i)
			for k := range row.flows.phases {
				f := row.flows.phases[k].flows
				w.bankFlow.Row(phases, f...)
				for range f {
					w.bankFlow.Coef = append(w.bankFlow.Coef, 1, 0)
				}
				phases++
			}
		default:
			w.coupleRow = append(w.coupleRow, i)
			w.couplings.Row(row.coupling, row.coupling)
		}
	}
	w.bankAmps = vector.Make(phases)
	w.triple = vector.Make(len(m.three))
	n := len(m.Points)
	w.bins, w.bin, w.since = make([]int32, n*vector.Lanes), make([]int32, n), make([]int64, n)
	return w
}

// linePairs finds the part and the pair of each current, by State.Flow, of a line.
func (w *watch) linePairs() (part, pair map[int]int) {
	part, pair = map[int]int{}, map[int]int{}
	for i := range w.meter.parts {
		p := &w.meter.parts[i]
		if p.kind != LineLoss {
			continue
		}
		for k, t := range p.terminals {
			if t >= 0 {
				part[p.flow+k], pair[p.flow+k] = len(w.ofPart), len(pair)
			}
		}
		w.ofPart = append(w.ofPart, nil)
	}
	return part, pair
}

// nameParts finds the rows that parts are summed into.
func (w *watch) nameParts() {
	m := w.meter
	of := make([][]int, len(m.losses)) // parts, by row
	kind := make([]LossKind, len(m.losses))
	for i := range m.parts {
		p := &m.parts[i]
		of[p.row], kind[p.row] = append(of[p.row], len(w.rowOf[p.kind])), p.kind
		w.rowOf[p.kind] = append(w.rowOf[p.kind], p.row)
	}
	for row, parts := range of {
		switch len(parts) {
		case 0:
			w.bare = append(w.bare, row)
		case 1:
		default:
			w.shared = append(w.shared, sharedLoss{row, kind[row], parts})
			for _, i := range parts {
				w.rowOf[kind[row]][i] = -1
			}
		}
	}
}

// place makes the lists that depend on where voltages stand.
func (w *watch) place(l *Lanes) {
	w.gather()
	w.block.place(l)
	w.binned = false
	m := w.meter
	w.banks, w.triples = vector.Banks{}, vector.Triples{}
	phases := 0
	for _, row := range w.bankRow {
		var pairs [][2]int
		for _, p := range m.loading[row].flows.phases {
			pairs = append(pairs, [2]int{int(l.Slot[p.unknown]), phases})
			phases++
		}
		w.banks.Row(pairs...)
	}
	for _, u := range m.three {
		w.triples.Row(int(l.Slot[u[0]]), int(l.Slot[u[1]]), int(l.Slot[u[2]]))
	}
	if w.apart != nil {
		w.apart.place(m, l.Slot)
	}
	w.stale = true
}

// gather takes the sums out of the lists.
func (w *watch) gather() {
	ns := float64(w.step)
	for i := range w.points.Rows {
		r := &w.points.Rows[i]
		w.s.points[i].sum += r.Sum * ns
		r.Sum = 0
	}
	for kind := range w.parts {
		for i := range w.parts[kind].Rows {
			r := &w.parts[kind].Rows[i]
			w.s.lossEnergy[w.rowOfPart(LossKind(kind), i)] += r.Sum * ns
			r.Sum = 0
		}
	}
	w.waiting.enter(w.s.dist)
	if w.moving { // no time stands elsewhere
		w.moving, w.binned = false, false
	}
	if w.binned {
		for i := range w.s.dist.bins {
			w.release(i)
		}
	}
	if w.apart != nil {
		w.apart.gather(w)
	}
	w.calls = 0
}

// release enters the time that a point has spent in its bin.
func (w *watch) release(i int) {
	if ns := w.clock - w.since[i]; ns > 0 {
		w.s.dist.bins[i].enter(int(w.bin[i]), ns)
	}
	w.since[i] = w.clock
}

func (w *watch) rowOfPart(kind LossKind, part int) int {
	if row := w.rowOf[kind][part]; row >= 0 {
		return row
	}
	for _, s := range w.shared {
		if s.kind != kind {
			continue
		}
		for _, i := range s.parts {
			if i == part {
				return s.row
			}
		}
	}
	return -1 // every part has a row
}

// bound draws the bounds anew.
func (w *watch) bound() {
	w.stale = false
	for i := range w.points.Rows {
		w.boundPoint(i)
	}
	if w.apart != nil {
		for i := range w.apart.points {
			w.boundSettling(i)
		}
	}
	for kind := range w.parts {
		for i, row := range w.rowOf[kind] {
			high := math.Inf(1)
			if row >= 0 {
				high = w.s.lossPeak[row].least()
			}
			w.parts[kind].Rows[i].High = high
		}
	}
	for i := range w.sections {
		w.boundSection(i)
	}
	for i := range w.coupleRow {
		w.boundCoupling(i)
	}
	for i := range w.bankRow {
		w.boundBank(i)
	}
}

// least is what a value must be above to be the peak.
func (p *peak) least() float64 {
	if !p.known {
		return math.Inf(-1)
	}
	return p.value
}

func (w *watch) boundPoint(i int) {
	c, p, r := &w.judge.classes[w.judge.of[i]], &w.s.points[i], &w.points.Rows[i]
	r.Low, r.High = max(p.min, c.LowA-limitSlack), min(p.max, c.HighA+limitSlack)
}

func (w *watch) boundSection(i int) {
	x, limit := &w.sections[i], w.parts[LineLoss].Limit
	limit[x.from] = w.boundSquare(x.row, 1, math.Sqrt)
	limit[x.to] = limit[x.from]
}

func (w *watch) boundBank(i int) {
	w.banks.High[i] = w.boundSquare(w.bankRow[i], 1000, func(s float64) float64 { return math.Sqrt(s) / 1000 })
}

func (w *watch) boundCoupling(i int) {
	r := &w.meter.loading[w.coupleRow[i]]
	if r.ratioOf < 0 {
		w.couplings.High[i] = w.boundSquare(w.coupleRow[i], 1, math.Sqrt)
		return
	}
	ratio := ratioOf(r.reg, w.taps[r.ratioOf])
	w.couplings.High[i] = w.boundSquare(w.coupleRow[i], min(1, ratio), func(s float64) float64 {
		a := math.Sqrt(s)
		return max(a, a/ratio)
	})
}

// boundSquare is the largest square of which a row's loading, about its root over scale,
// is no new peak and not above a rating: below zero where everything is.
func (w *watch) boundSquare(row int, scale float64, loading func(square float64) float64) float64 {
	r := &w.meter.loading[row]
	high := w.s.loadPeak[row].least()
	if r.rating < high { // an unknown one is no number
		high = r.rating
	}
	if r.emergency < high {
		high = r.emergency
	}
	if !(high >= 0) {
		return -1
	}
	s := high * scale * high * scale
	if math.IsInf(s, 1) {
		return s
	}
	// The last digits; a bound that is too low costs a look, no more.
	for range roundings {
		if loading(s) <= high {
			break
		}
		s = math.Nextafter(s, -1)
	}
	if loading(s) > high {
		return -1
	}
	for range roundings {
		next := math.Nextafter(s, math.Inf(1))
		if loading(next) > high {
			break
		}
		s = next
	}
	return s
}

// roundings is more than the units in the last place by which the square of a root may
// miss.
const roundings = 20
