package results

// limitClass is a set of voltage limits and where it comes from.
type limitClass struct {
	Class  string  `json:"class"`
	Source string  `json:"source"`
	LowA   float64 `json:"low"`
	HighA  float64 `json:"high"`
	LowB   float64 `json:"outer_low"`
	HighB  float64 `json:"outer_high"`
}

// lowVoltageKV is the highest nominal voltage, kV line-to-line, of the lower class
// of ANSI C84.1.
const lowVoltageKV = 0.6

// The rows of ANSI C84.1 for service voltage, as p.u. of the 120 V base.
const ansiSource = "ANSI C84.1, range A and range B, service voltage"

func ansiLow() limitClass {
	return limitClass{"up to 600 V", ansiSource, 114. / 120, 126. / 120, 110. / 120, 127. / 120}
}

func ansiHigh() limitClass {
	return limitClass{"above 600 V", ansiSource, 117. / 120, 126. / 120, 114. / 120, 127. / 120}
}

// limitSlack is added to a limit before a voltage is held against it, p.u.: a
// voltage on the limit is inside, whatever rounding makes of it.
const limitSlack = 1e-9

// judge holds voltages against the limits of a study.
type judge struct {
	classes   []limitClass
	of        []int // by point
	judged    []bool
	all       bool
	allowance float64 // p.u., from primary to meter at a load's own peak
	services  []service
	drops     bool // some service has a drop
}

// service is a load as its customers see it: the points that feed it and the drop
// between them and the meter.
type service struct {
	load      int
	customers float64
	points    []int
	peak      float64 // W; 0: no drop

	outside int64 // settled ns outside range A
}

// newJudge chooses the limits of every point: own ones, or the row of ANSI C84.1
// for its nominal voltage. Where an allowance leads from a primary point to the
// meters of its loads, the meters are judged and the row is that of up to 600 V.
func newJudge(p *Plan, points []Point) *judge {
	set := &p.Settings.Limits
	j := &judge{of: make([]int, len(points)), judged: make([]bool, len(points)), all: set.All, allowance: set.Allowance / 120}
	if set.Own {
		own := limitClass{"all", "own limits of the study", set.Low, set.High, set.OuterLow, set.OuterHigh}
		// Without outer limits the inner ones are also the outer ones.
		if !(own.LowB > 0) {
			own.LowB = own.LowA
		}
		if !(own.HighB > 0) {
			own.HighB = own.HighA
		}
		j.classes = []limitClass{own}
	} else {
		j.classes = []limitClass{ansiLow(), ansiHigh()}
		if j.allowance > 0 {
			meter := ansiLow()
			meter.Class = "meters behind a point above 600 V"
			meter.Source += ", at the meter after the allowance"
			j.classes = append(j.classes, meter)
		}
	}
	for i := range points {
		pt := &points[i]
		j.judged[i] = pt.Judged(set.All)
		if set.Own {
			continue
		}
		switch {
		case pt.NomKV <= lowVoltageKV:
			j.of[i] = 0
		case j.allowance > 0 && pt.HasLoad:
			j.of[i] = 2
		default:
			j.of[i] = 1
		}
	}
	j.serve(p, points)
	return j
}

// serve lists the loads with the points that feed them.
func (j *judge) serve(p *Plan, points []Point) {
	byNode := map[int][]int{}
	for i := range points {
		byNode[points[i].Node] = append(byNode[points[i].Node], i)
	}
	for i := range p.Model.Loads {
		l := &p.Model.Loads[i]
		s := service{load: i, customers: l.Customers}
		for _, k := range byNode[l.Node] {
			if points[k].feeds(l) {
				s.points = append(s.points, k)
			}
		}
		if len(s.points) == 0 {
			continue
		}
		if j.allowance > 0 && points[s.points[0]].NomKV > lowVoltageKV && i < len(p.LoadPeak) && p.LoadPeak[i] > 0 {
			s.peak = p.LoadPeak[i] * 1000
			j.drops = true
		}
		j.services = append(j.services, s)
	}
}

// dropOf is the drop from the point to the meter, p.u., at the load of the moment.
func (j *judge) dropOf(s *service, load []complex128) float64 {
	if s.peak == 0 {
		return 0
	}
	return j.allowance * real(load[s.load]) / s.peak
}

// meterVoltages fills low and high, by point, with the lowest and the highest
// voltage at the meters behind it: of several loads each has its own drop.
func (j *judge) meterVoltages(pu []float64, load []complex128, drops, low, high []float64) {
	copy(low, pu)
	copy(high, pu)
	if !j.drops {
		return
	}
	for i := range j.services {
		drops[i] = j.dropOf(&j.services[i], load)
	}
	// The first load at a point sets its voltages, further ones widen them.
	for i := len(j.services) - 1; i >= 0; i-- {
		for _, k := range j.services[i].points {
			low[k], high[k] = pu[k]-drops[i], pu[k]-drops[i]
		}
	}
	for i := range j.services {
		for _, k := range j.services[i].points {
			low[k], high[k] = min(low[k], pu[k]-drops[i]), max(high[k], pu[k]-drops[i])
		}
	}
}

// outsideA tells whether a point is outside range A.
func (j *judge) outsideA(i int, low, high float64) bool {
	c := &j.classes[j.of[i]]
	return low < c.LowA-limitSlack || high > c.HighA+limitSlack
}
