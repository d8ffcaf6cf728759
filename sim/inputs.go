package sim

import (
	"math"
	"math/cmplx"
	"sort"
	"time"

	"yearflow/profiles"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
	"yearflow/sim/tables"
)

// inputs turns the step's profile values into what the solver takes. The values
// of one step are a flat array, one per series in use.
type inputs struct {
	set     *profiles.Set
	axis    profiles.Axis
	sampler *profiles.Sampler
	values  []float64

	injections []powerflow.Injection
	share      []complex128 // VA of an injection per unit of its driver
	driver     []driver     // by injection
	loadOf     []int        // by injection: load, or −1
	generator  []int        // by injection: generator, or −1
	batteryOf  []int        // by injection: battery, or −1
	chargerOf  []int        // by injection: charger, or −1

	// Inverters with functions: their groups and laws, and which group each
	// generator and battery has (−1: none).
	groups           []powerflow.Group
	laws             []*inverterLaw
	groupOfGenerator []int
	groupOfBattery   []int
	branchesOf       [][]int // injections by generator
	batteryBranches  [][]int
	batterySeries    []int
	batteryScale     []float64
	chargerBranches  [][]int
	sunlit           *profiles.Series // of the generator being added, from weather
	meters           *metering

	shared allocated // loads that a measured total is shared over

	probeBranches [][]int // by Options.Probes

	energy  [][]float64 // by load with an energy: kW by month of the axis; nil else
	months  []string
	monthOf func(step int) int

	fixed   []fixedVoltage
	outside []int // by capacitor: series of the temperature, or −1

	comparison
	odd tables.Faults // possible, but hardly meant
}

// driver says how a step's values scale an injection: by one series, by two (real
// and reactive), or not at all.
type driver struct {
	real, reactive int // series, −1 none
	load           int // of an energy, −1 none
}

// fixedVoltage is a voltage that a source holds, V at 1 p.u. and 1 on its profile.
type fixedVoltage struct {
	volts   complex128
	series  int
	nominal float64 // V line-to-line where the profile is in volts; 0 else
	unit    complex128
}

// sqrt3 is √3.
const sqrt3 = 1.7320508075688772935

func newInputs(st *feeder.Study, net *network.Network, cache string) (*inputs, error) {
	var faults tables.Faults
	blocks := make([]profiles.Block, len(st.Settings.Profiles))
	for i, b := range st.Settings.Profiles {
		blocks[i] = profiles.Block{Pos: b.At, Files: b.Files, Stamped: b.Stamped, Interpolate: b.Interpolate, Repeat: b.Repeat, Zone: b.Zone}
	}
	set, err := profiles.Open(st.FS, blocks)
	if err != nil {
		return nil, err
	}
	p := st.Settings.Period
	in := &inputs{set: set, odd: unmatched(st.FS, blocks), axis: profiles.Axis{Start: p.Start, End: p.End, Step: p.Step, Zone: p.Zone}}
	index := map[*profiles.Series]int{}
	var series []*profiles.Series
	use := func(s *profiles.Series) int {
		if s == nil {
			return -1
		}
		k, ok := index[s]
		if !ok {
			k = len(series)
			index[s] = k
			series = append(series, s)
		}
		return k
	}
	names := naming{uses: st.ProfileUses(), told: map[int]bool{}, set: set, faults: &faults}
	find := names.find
	m := net.Model
	in.months, in.monthOf = months(in.axis)
	in.shared.begin(st, find, use, &faults)
	in.meters = newMetering(st, in.axis, cache, &faults, &in.odd)
	// In the order of names: what several draw at a node is added up in the order of the
	// injections, and that of the rows must not reach the last digit.
	for _, i := range byName(len(m.Loads), func(i int) string { return m.Loads[i].Name }) {
		in.load(i, &m.Loads[i], net, find, use, &faults, st.Settings.ScaleLoad)
	}
	sky := newSky(st, in.axis, &faults, &in.odd)
	for i := range m.Generators {
		in.sunlit = nil
		if m.Generators[i].Solar != nil && sky != nil {
			in.sunlit = sky.series(&m.Generators[i], &faults)
		}
		in.generate(i, &m.Generators[i], net, find, use, &faults, st.Settings.ScaleGeneration)
	}
	in.branchesOf = make([][]int, len(m.Generators))
	for k, g := range in.generator {
		if g >= 0 {
			in.branchesOf[g] = append(in.branchesOf[g], k)
		}
	}
	for i := range m.Batteries {
		in.battery(i, &m.Batteries[i], net, find, use)
	}
	for i := range m.Chargers {
		in.charge(i, &m.Chargers[i], net)
	}
	in.shared.close(st)
	in.outside = make([]int, len(m.Capacitors))
	for i := range m.Capacitors {
		in.outside[i] = -1
		if c := m.Capacitors[i].Control; c != nil && c.Profile != "" {
			in.outside[i] = use(find(c.Profile, c.At, "degC"))
		}
	}
	held := make([]*profiles.Series, len(m.Sources)) // asked for once, not by phase
	for i := range m.Sources {
		held[i] = find(m.Sources[i].Profile, m.Sources[i].At, "pu", "V")
	}
	in.findMeasured(m, find, &faults)
	names.prices(st.Settings.Prices.Currency)
	for _, f := range net.Fixed {
		s := &m.Sources[f.Source]
		fv := fixedVoltage{series: -1, unit: cmplx.Rect(1, (s.Angle-120*float64(f.Phase))*math.Pi/180)}
		fv.volts = complex(s.Voltage*s.Nominal*1000/sqrt3, 0) * fv.unit
		if ser := held[f.Source]; ser != nil {
			fv.series = use(ser)
			fv.nominal = s.Nominal * 1000
			if ser.Unit == "V" {
				fv.nominal = 1
			}
		}
		in.fixed = append(in.fixed, fv)
	}
	if len(faults) > 0 {
		return nil, faults.Err()
	}
	in.sampler, err = profiles.NewSampler(in.axis, series)
	if err != nil {
		return nil, err
	}
	in.values = make([]float64, len(series))
	if err := in.energies(m); err != nil {
		return nil, err
	}
	return in, nil
}

// branches lists where a load or generator stands.
func branches(net *network.Network, node int, c feeder.Connection, phases []feeder.Phase, pairs []feeder.Pair) []powerflow.Injection {
	at := net.At[node]
	ll := net.Model.Nodes[node].Nominal * 1000
	var out []powerflow.Injection
	if c == feeder.Delta {
		for _, p := range pairs {
			out = append(out, powerflow.Injection{From: at[p[0]], To: at[p[1]], Nominal: ll})
		}
		return out
	}
	for _, p := range phases {
		out = append(out, powerflow.Injection{From: at[p], To: network.Ground, Nominal: net.Unknowns[at[p]].Nominal})
	}
	return out
}

// byName returns the positions of n rows in the order of their names.
func byName(n int, name func(int) string) []int {
	out := make([]int, n)
	for i := range out {
		out[i] = i
	}
	sort.SliceStable(out, func(a, b int) bool { return name(out[a]) < name(out[b]) })
	return out
}

func (in *inputs) add(j powerflow.Injection, d driver, share complex128, load, generator int) {
	in.batteryOf = append(in.batteryOf, -1)
	in.chargerOf = append(in.chargerOf, -1)
	in.injections = append(in.injections, j)
	in.driver = append(in.driver, d)
	in.share = append(in.share, share)
	in.loadOf = append(in.loadOf, load)
	in.generator = append(in.generator, generator)
}

func (in *inputs) load(i int, l *feeder.Load, net *network.Network, find finder, use func(*profiles.Series) int, faults *tables.Faults, scale float64) {
	js := branches(net, l.Node, l.Connection, l.Phases, l.Pairs)
	k := 1000 * scale / float64(len(js))
	d := driver{-1, -1, -1}
	s := find(l.Profile, l.At, "pu", "kW")
	kW := l.KW
	metered := in.meters.of(l, &in.odd)
	if metered != nil {
		s, kW = metered, math.NaN() // the meter counts, whatever the table says
	}
	share := complex(kW*k, l.KVAR*k)
	shares := metered == nil && in.shared.takes(i, s)
	switch {
	case shares:
		kW, byEnergy := in.shared.weight(i, l, s, faults)
		share = complex(kW*k, kW*k*in.shared.tangent(l))
		if byEnergy {
			d.load = i
		}
		if s != nil {
			d.real = use(s)
		}
	case s != nil && s.Unit == "kW":
		if !feeder.Unknown(kW) && kW != 0 {
			faults.Add(l.At, "load %q: its real power is given twice, %g kW here and by profile %q in [kW] (%s): leave one of them", l.Name, l.KW, l.Profile, s.Pos)
		}
		d.real = use(s)
		share = complex(k, k*l.KVARPerKW)
		if s.Kvar != nil {
			d.reactive = use(s.Kvar)
			share = complex(k, k)
		}
	case len(l.EnergyKWh) > 0:
		d.load = i
		share = complex(k, k*l.KVARPerKW)
		if s != nil {
			d.real = use(s)
		}
	case feeder.Unknown(l.KW):
		if l.ConnectedKVA > 0 {
			faults.Add(l.At, "%s", l.OnlyWeight(in.shared.spec))
		} else if s != nil || l.Profile == "" {
			faults.Add(l.At, "load %q: no amount: give real [kW], connected [kVA], energy [kWh] or a profile in [kW]", l.Name)
		}
	default:
		if s != nil {
			d.real = use(s)
		}
	}
	size := cmplx.Abs(share)
	if size != size {
		size = 0
	}
	for _, j := range js {
		z := l.ZIP
		j.PZ, j.PI, j.PC, j.QZ, j.QI, j.QC = z.PZ, z.PI, z.PP, z.QZ, z.QI, z.QP
		j.Size = size
		if shares {
			in.shared.injections = append(in.shared.injections, len(in.injections))
		}
		in.add(j, d, share, i, -1)
	}
}

// generate adds a generator: constant power, delivered, so drawn negative. Its power
// factor is positive when it delivers reactive power with real power.
func (in *inputs) generate(i int, g *feeder.Generator, net *network.Network, find finder, use func(*profiles.Series) int, faults *tables.Faults, scale float64) {
	js := branches(net, g.Node, g.Connection, g.Phases, g.Pairs)
	k := -1000 * scale / float64(len(js))
	tan := 0.0
	if g.PF != 0 {
		tan = math.Copysign(math.Sqrt(math.Max(0, 1/(g.PF*g.PF)-1)), g.PF)
	}
	d := driver{-1, -1, -1}
	s := find(g.Profile, g.At, "pu", "kW")
	real := g.KW
	switch {
	case g.Solar != nil:
		if in.sunlit != nil {
			d.real, real = use(in.sunlit), 1
		}
	case s != nil && s.Unit == "kW":
		d.real, real = use(s), 1
		if s.Kvar != nil {
			d.reactive, tan = use(s.Kvar), 1
		}
	case s != nil:
		d.real, real = use(s), g.KVA
	case feeder.Unknown(real):
		if g.Profile == "" {
			faults.Add(g.At, "generator %q: no output: give real [kW] or a profile", g.Name)
		}
	}
	share := complex(k*real, k*real*tan)
	group := -1
	if g.Function >= 0 { // the function says what reactive power goes with it
		group = in.group()
		share = complex(k*real, 0)
	}
	in.groupOfGenerator = append(in.groupOfGenerator, group)
	for _, j := range js {
		j.PC, j.QC, j.Generator = 1, 1, true
		j.Size = g.KVA * 1000 / float64(len(js))
		in.member(&j, group)
		in.add(j, d, share, -1, i)
	}
}

// months lists the months that the axis touches and tells that of each step.
func months(a profiles.Axis) ([]string, func(int) int) {
	var names []string
	var starts []int
	zone := a.Zone
	if zone == nil {
		zone = time.UTC
	}
	for t := a.Start; t < a.End; {
		names = append(names, profiles.Month(t, zone))
		starts = append(starts, int((t-a.Start+a.Step-1)/a.Step))
		local := time.Unix(0, t).In(zone)
		t = time.Date(local.Year(), local.Month()+1, 1, 0, 0, 0, 0, zone).UnixNano()
	}
	return names, func(step int) int { return sort.Search(len(starts), func(k int) bool { return starts[k] > step }) - 1 }
}

// monthHours is how long a month such as 2025-01 is on the clock of a zone.
func monthHours(name string, zone *time.Location) float64 {
	if zone == nil {
		zone = time.UTC
	}
	from, err := time.ParseInLocation("2006-01", name, zone)
	if err != nil {
		return 0
	}
	return time.Date(from.Year(), from.Month()+1, 1, 0, 0, 0, 0, zone).Sub(from).Hours()
}

// energies finds the power at profile 1 of every load that is known by its energy:
// kW = kWh / Σ profile·h, over its month or over the period.
func (in *inputs) energies(m *feeder.Model) error {
	in.energy = make([][]float64, len(m.Loads))
	var faults tables.Faults
	any := false
	for i := range m.Loads {
		any = any || len(m.Loads[i].EnergyKWh) > 0
	}
	if !any {
		return nil
	}
	n := in.axis.Steps()
	hours := make([][]float64, len(in.months)) // by month and series; the last: plain hours
	for k := range hours {
		hours[k] = make([]float64, len(in.values)+1)
	}
	for step := range n {
		in.sampler.Step(in.values, step)
		h := hours[in.monthOf(step)]
		start := in.axis.Start + int64(step)*in.axis.Step
		dt := float64(min(start+in.axis.Step, in.axis.End)-start) / 3.6e12
		for k, v := range in.values {
			h[k] += v * dt
		}
		h[len(in.values)] += dt
	}
	driverOf := make([]int, len(m.Loads))
	for k, l := range in.loadOf {
		if l >= 0 {
			driverOf[l] = in.driver[k].real
		}
	}
	toldPart := make([]bool, len(in.months))
	for i := range m.Loads {
		l := &m.Loads[i]
		if len(l.EnergyKWh) == 0 {
			continue
		}
		s := driverOf[i]
		if s < 0 {
			s = len(in.values)
		}
		kw := make([]float64, len(in.months))
		total := 0.0
		for k := range hours {
			total += hours[k][s]
		}
		given := make([]bool, len(in.months))
		for _, e := range l.EnergyKWh {
			for k, name := range in.months { // a month outside the period is not used
				h := total
				if e.Month != "" {
					h = hours[k][s]
				}
				if e.Month != "" && e.Month != name {
					continue
				}
				given[k] = true
				if h <= 0 && e.KWh != 0 {
					faults.Add(l.At, "load %q: %g kWh cannot be spread over a profile that adds up to %g h", l.Name, e.KWh, h)
					continue
				}
				if e.KWh != 0 {
					kw[k] = e.KWh / h
				}
			}
		}
		for k, name := range in.months {
			held, whole := hours[k][len(in.values)], monthHours(name, in.axis.Zone)
			if l.EnergyKWh[0].Month != "" && given[k] && kw[k] > 0 && held < whole && !toldPart[k] {
				toldPart[k] = true // once: it is so for all loads
				in.odd.Add(l.At, "load %q: the period holds %g of the %g hours of %s, and its energy of energies.csv is spread over those alone", l.Name, held, whole, name)
			}
			if !given[k] {
				faults.Add(l.At, "load %q: energies.csv has no energy for %s, a month of the period; give it, 0 where nothing is taken", l.Name, name)
			}
		}
		in.energy[i] = kw
	}
	return faults.Err()
}

// at sets the solver's input to that of a step.
func (in *inputs) at(step int, out *powerflow.Input) {
	in.sampleAt(in.values, step)
	in.scale(in.values, step, out)
}

// sampleAt sets values to those of every series in a step.
func (in *inputs) sampleAt(values []float64, step int) { in.sampler.Step(values, step) }

// scale sets the solver's input to that of a step with the given values.
func (in *inputs) scale(values []float64, step int, out *powerflow.Input) {
	month := -1
	for k := range in.injections {
		d := &in.driver[k]
		p, q := 1.0, 1.0
		if d.real >= 0 {
			p = values[d.real]
			q = p
			if d.reactive >= 0 {
				q = values[d.reactive]
			}
		}
		if d.load >= 0 {
			if month < 0 {
				month = in.monthOf(step)
			}
			e := in.energy[d.load][month]
			p, q = p*e, q*e
		}
		s := in.share[k]
		out.Power[k] = complex(real(s)*p, imag(s)*q)
	}
	for f := range in.fixed {
		out.Source[f] = in.fixed[f].at(values)
	}
}

// at is the voltage for the values of all series in a step.
func (x *fixedVoltage) at(values []float64) complex128 {
	if x.series < 0 {
		return x.volts
	}
	return complex(values[x.series]*x.nominal/sqrt3, 0) * x.unit
}

// peaks returns each load's own highest real power over the axis, kW at 1 p.u.
func (e *Engine) peaks(loads int) []float64 {
	in := e.in
	power := powerflow.Input{Source: make([]complex128, len(in.fixed)), Power: make([]complex128, len(in.injections))}
	peak, now := make([]float64, loads), make([]float64, loads)
	for step := range in.axis.Steps() {
		e.inputOf(step, &power)
		clear(now)
		for k, l := range in.loadOf {
			if l >= 0 {
				now[l] += real(power.Power[k]) / 1000
			}
		}
		for l, kw := range now {
			peak[l] = math.Max(peak[l], kw)
		}
	}
	return peak
}
