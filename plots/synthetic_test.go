package plots

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing/fstest"
	"time"
)

// invented is the recipe of a results folder that no engine made: numbers that look
// like those of a feeder, in the files and columns of the contract.
type invented struct {
	start, end   time.Time
	step         time.Duration
	trunk        int // trunk nodes; laterals and services grow with it
	coordinates  bool
	longlat      bool
	demo         bool
	voltages     bool
	zeroLoads    bool
	ungrounded   bool // the last lateral is a part that nothing grounds
	devices      bool
	unsolvedRows int
	shuffle      uint64 // 0: rows in order
	measured     int    // how many measurements the run had
}

func denver() *time.Location {
	l, err := time.LoadLocation("America/Denver")
	if err != nil {
		panic(err)
	}
	return l
}

func year() invented {
	z := denver()
	return invented{start: time.Date(2025, 1, 1, 0, 0, 0, 0, z), end: time.Date(2026, 1, 1, 0, 0, 0, 0, z), step: time.Hour,
		trunk: 24, coordinates: true, demo: true, voltages: true, devices: true, measured: 7}
}

type fakeNode struct {
	name, phases string
	x, y, d, kv  float64
	customers    float64
	weak         float64
}

type fakeBranch struct {
	element, kind, from, to, phases string
	length                          float64
}

func (g invented) feeder() (nodes []fakeNode, branches []fakeBranch) {
	r := rand.New(rand.NewPCG(7, 11))
	add := func(n fakeNode) { nodes = append(nodes, n) }
	add(fakeNode{name: "sub", phases: "ABC", kv: 115})
	add(fakeNode{name: "bus", phases: "ABC", kv: 12.47})
	add(fakeNode{name: "head", phases: "ABC", kv: 12.47})
	branches = append(branches, fakeBranch{"grid", "source", "sub", "", "ABC", 0},
		fakeBranch{"T1", "transformer", "sub", "bus", "ABC", 0}, fakeBranch{"LTC", "regulator", "bus", "head", "ABC", 0})
	from, x, y, d := "head", 0.0, 0.0, 0.0
	turn := 0.15
	for i := range g.trunk {
		length := 0.25 + 0.3*r.Float64()
		if g.devices && (i == 8 || i == 16) {
			name := fmt.Sprintf("n%02dr", i)
			add(fakeNode{name: name, phases: "ABC", x: x, y: y, d: d, kv: 12.47})
			branches = append(branches, fakeBranch{fmt.Sprintf("REG%d", i/8), "regulator", from, name, "ABC", 0})
			from = name
		}
		turn += 0.35 * (r.Float64() - 0.5)
		x, y, d = x+length*math.Cos(turn), y+length*math.Sin(turn), d+length
		name := fmt.Sprintf("n%02d", i)
		add(fakeNode{name: name, phases: "ABC", x: x, y: y, d: d, kv: 12.47})
		branches = append(branches, fakeBranch{fmt.Sprintf("s%02d", i), "section", from, name, "ABC", length})
		from = name
		if i%2 == 1 {
			continue
		}
		ph := [...]string{"A", "B", "C", "AB", "ABC"}[(i/2)%5]
		lx, ly, ld, lf := x, y, d, name
		side := turn + math.Pi/2
		if i%4 == 0 {
			side = turn - math.Pi/2
		}
		for k := range 3 {
			step := 0.2 + 0.25*r.Float64()
			lx, ly, ld = lx+step*math.Cos(side), ly+step*math.Sin(side), ld+step
			to := fmt.Sprintf("l%02d-%d", i, k)
			add(fakeNode{name: to, phases: ph, x: lx, y: ly, d: ld, kv: 12.47, weak: 0.004 * float64(k+1)})
			branches = append(branches, fakeBranch{fmt.Sprintf("lat%02d-%d", i, k), "section", lf, to, ph, step})
			lf = to
			sec := "h" + to[1:]
			add(fakeNode{name: sec, phases: ph, x: lx, y: ly, d: ld, kv: 0.48, customers: 3, weak: 0.004*float64(k+1) + 0.008})
			branches = append(branches, fakeBranch{"t" + to[1:], "transformer", to, sec, ph, 0})
		}
	}
	if g.devices {
		for i, at := range []int{3, 9, 14, 20} {
			if at < g.trunk {
				branches = append(branches, fakeBranch{fmt.Sprintf("CAP%d", i+1), "capacitor", fmt.Sprintf("n%02d", at), "", "ABC", 0})
			}
		}
		for i, at := range []string{"l00-2", "l08-1", "l16-2"} {
			branches = append(branches, fakeBranch{fmt.Sprintf("PV%d", i+1), "generator", at, "", "ABC", 0})
		}
	}
	return nodes, branches
}

// write makes the folder.
func (g invented) write() fstest.MapFS {
	nodes, branches := g.feeder()
	files := map[string]*strings.Builder{}
	w := func(name, format string, args ...any) {
		b, ok := files[name]
		if !ok {
			b = &strings.Builder{}
			files[name] = b
		}
		fmt.Fprintf(b, format, args...)
	}
	stamp := func(t time.Time) string { return t.Format("2006-01-02T15:04:05-07:00") }
	w("run.json", `{"format":1,"version":"test","title":"Alder Bend 1203","case":"base","zone":"America/Denver","step_seconds":%d,"row_seconds":%[1]d,"start":"%[2]s","end":"%[3]s","demo":%[4]v,"limits":{"range":"ANSI C84.1","judge":"customers"},"results_sha256":{%[5]s}}`+"\n",
		int(g.step/time.Second), stamp(g.start), stamp(g.end), g.demo, g.measuredFiles())
	w("places.csv", "node,x,y,longlat,distance [km],nominal [kV],phases,judged\n")
	for _, n := range nodes {
		x, y, ll := "", "", ""
		switch {
		case g.longlat:
			x, y, ll = fmt.Sprintf("%.7f", -105+n.x/85), fmt.Sprintf("%.7f", 40+n.y/111), "yes"
		case g.coordinates:
			x, y = fmt.Sprintf("%.1f", n.x*1000), fmt.Sprintf("%.1f", n.y*1000)
		}
		judged := ""
		if n.customers > 0 {
			for _, ph := range n.phases {
				judged += " " + g.phaseName(n, ph)
			}
		}
		w("places.csv", "%s,%s,%s,%s,%.4f,%g,%s,%s\n", n.name, x, y, ll, n.d, n.kv, n.phases, strings.TrimSpace(judged))
	}
	w("network.csv", "element,kind,from,to,phases,length [km]\n")
	for _, b := range branches {
		w("network.csv", "%s,%s,%s,%s,%s,%.4f\n", b.element, b.kind, b.from, b.to, b.phases, b.length)
	}
	g.series(w, nodes, branches, stamp)
	g.measure(w, stamp)
	w("monthly.csv", "month\n")
	w("summary.csv", "quantity,value,unit\nsteps,1,1\n")
	fsys := fstest.MapFS{}
	for name, b := range files {
		text := b.String()
		if g.shuffle != 0 {
			switch name {
			case "losses.csv", "loading.csv", "network.csv", "places.csv", "nodes.csv":
				text = shuffleRows(text, g.shuffle)
			}
		}
		fsys[name] = &fstest.MapFile{Data: []byte(text)}
	}
	return fsys
}

func shuffleRows(text string, seed uint64) string {
	lines := strings.Split(strings.TrimSuffix(text, "\n"), "\n")
	r := rand.New(rand.NewPCG(seed, 1))
	rows := lines[1:]
	r.Shuffle(len(rows), func(i, j int) { rows[i], rows[j] = rows[j], rows[i] })
	return strings.Join(lines, "\n") + "\n"
}

// phaseName is how a node's phase is called: a pair where nothing grounds it.
func (g invented) phaseName(n fakeNode, ph rune) string {
	if g.ungrounded && strings.HasPrefix(n.name, "h") && n.phases == "ABC" {
		return map[rune]string{'A': "AB", 'B': "BC", 'C': "CA"}[ph]
	}
	return string(ph)
}

type fakePoint struct {
	node, at   int // into nodes; column
	name       string
	ph         int
	min, max   float64
	minT, maxT time.Time
	sum        float64
	n          int
	hb, ha     float64
}

const stepsHeader = "time,status,source real [kW],source reactive [kvar],load real [kW],load reactive [kvar],generation real [kW],generation reactive [kvar],losses real [kW],losses reactive [kvar],capacitors reactive [kvar],line losses [kW],transformer load losses [kW],transformer no-load losses [kW],regulator losses [kW],lowest [pu],lowest at,highest [pu],highest at,lowest in step [pu],highest in step [pu],unbalance [%],unbalance at,negative sequence [%],actions,source energy [kWh],load energy [kWh],generation energy [kWh],losses energy [kWh]\n"

func (g invented) series(w func(string, string, ...any), nodes []fakeNode, branches []fakeBranch, stamp func(time.Time) string) {
	r := rand.New(rand.NewPCG(3, 5))
	var pts []fakePoint
	for i, n := range nodes {
		for _, ph := range n.phases {
			name := g.phaseName(n, ph)
			pts = append(pts, fakePoint{node: i, name: n.name + "." + name, ph: int(ph - 'A'), min: math.Inf(1), max: math.Inf(-1)})
		}
	}
	if g.voltages {
		w("voltages.csv", "time")
		for _, p := range pts {
			w("voltages.csv", ",%s", p.name)
		}
		w("voltages.csv", "\n")
	}
	w("steps.csv", stepsHeader)
	w("operations.csv", "time,device,phase,from,to,reason,measured,set,waited [s]\n")
	w("duty.csv", "device,phase,operations,raises,lowers,reversals,busiest day,operations that day,lowest position,highest position,hours at a stop [h],hours out of band [h],hours reverse [h],hunting [h]\n")
	w("devices.csv", "time")
	regs := []string{"LTC", "REG1", "REG2"}
	type unit struct{ pos, ops, lo, hi int }
	units := make([]unit, 9)
	caps := make([]unit, 4)
	if g.devices {
		for _, k := range regs {
			for _, ph := range "ABC" {
				w("devices.csv", ",%s.%c", k, ph)
			}
		}
		w("devices.csv", ",CAP1,CAP2,CAP3,CAP4")
	}
	w("devices.csv", "\n")
	v := make([]float64, len(pts))
	rows := 0
	step := g.step.Hours()
	loadPeak, cloud := 0.0, 0.5
	for t := g.start; t.Before(g.end); t = t.Add(g.step) {
		lt := t.In(g.start.Location())
		h := float64(lt.Hour()) + float64(lt.Minute())/60
		doy := float64(lt.YearDay())
		season := math.Cos(2 * math.Pi * (doy - 15) / 365)
		load := 2600 + 1300*math.Max(season, 0)*(0.6+0.4*math.Sin(2*math.Pi*(h-1)/24)) + 1500*math.Max(-season, 0)*math.Max(0, math.Sin(math.Pi*(h-8)/14)) +
			900*math.Exp(-(h-19)*(h-19)/8) + 350*math.Exp(-(h-8)*(h-8)/4) + 120*r.NormFloat64()
		cloud += 0.2*(r.Float64()-0.5) - 0.05*(cloud-0.6)
		sun := math.Max(0, math.Sin(math.Pi*(h-6+1.2*season)/(12-2.4*season)))
		if h < 6-1.2*-season-2 || h > 20 {
			sun = 0
		}
		gen := 1500 * sun * (0.95 - 0.2*season) * math.Max(0.15, math.Min(1, cloud))
		if g.zeroLoads {
			load, gen = 0, 0
		}
		status := "ok"
		if rows < g.unsolvedRows {
			status = "unsolved"
		}
		lowest, highest := math.Inf(1), math.Inf(-1)
		lowAt, highAt := "", ""
		for i, p := range pts {
			n := nodes[p.node]
			phase := 1 + 0.07*float64(p.ph-1)
			reg := 0.0
			if n.d > 3.2 {
				reg = 0.014
			}
			if n.d > 6 {
				reg += 0.012
			}
			v[i] = 1.019 + reg - load/6000*phase*(n.d*0.0098+n.weak*2.2) + gen/1500*n.d*0.0070*phase + 0.0015*r.NormFloat64()
			if n.kv > 100 {
				v[i] = 1.01
			}
			q := &pts[i]
			if status == "ok" {
				q.sum += v[i]
				q.n++
				if v[i] < q.min {
					q.min, q.minT = v[i], lt
				}
				if v[i] > q.max {
					q.max, q.maxT = v[i], lt
				}
				if v[i] < 0.95 {
					q.hb += step
				}
				if v[i] > 1.05 {
					q.ha += step
				}
			}
			if n.customers > 0 {
				if v[i] < lowest {
					lowest, lowAt = v[i], p.name
				}
				if v[i] > highest {
					highest, highAt = v[i], p.name
				}
			}
		}
		if g.voltages {
			w("voltages.csv", "%s", stamp(lt))
			for _, x := range v {
				if status == "ok" {
					w("voltages.csv", ",%.6f", x)
				} else {
					w("voltages.csv", ",")
				}
			}
			w("voltages.csv", "\n")
		}
		if g.devices {
			w("devices.csv", "%s", stamp(lt))
			for k := range units {
				want := int(math.Round((load-gen)/700 - 2 + 1.5*float64(k/3) + 0.8*float64(k%3)))
				u := &units[k]
				for u.pos != want && rows > 0 {
					d := 1
					if want < u.pos {
						d = -1
					}
					w("operations.csv", "%s,%s,%c,%d,%d,band low,120.1,121,45\n", stamp(lt), regs[k/3], 'A'+k%3, u.pos, u.pos+d)
					u.pos += d
					u.ops++
				}
				if rows == 0 {
					u.pos = want
				}
				u.lo, u.hi = min(u.lo, u.pos), max(u.hi, u.pos)
				w("devices.csv", ",%d", u.pos)
			}
			for k := range caps {
				c := &caps[k]
				want := 1
				if k >= 2 && load-gen < 3400+300*float64(k) {
					want = 0
				}
				if want != c.pos && rows > 0 {
					w("operations.csv", "%s,CAP%d,,%d,%d,control,900,800,60\n", stamp(lt), k+1, c.pos, want)
					c.ops++
				}
				c.pos = want
				w("devices.csv", ",%d", c.pos)
			}
			w("devices.csv", "\n")
		}
		line := 0.018 * load * load / 6000
		tl, nl, rl := 0.006*load*load/6000, 16.0, 2.5
		losses := line + tl + nl + rl
		src := load + losses - gen
		loadPeak = math.Max(loadPeak, load)
		if status == "ok" {
			w("steps.csv", "%s,ok,%.4f,%.4f,%.4f,%.4f,%.4f,0,%.4f,%.4f,600,%.4f,%.4f,%.4f,%.4f,%.6f,%s,%.6f,%s,%.6f,%.6f,1.1,bus,0.8,0,%.4f,%.4f,%.4f,%.4f\n", stamp(lt), src, 0.3*load-500, load, 0.3*load, gen,
				losses, 2*losses, line, tl, nl, rl, lowest, lowAt, highest, highAt, lowest, highest, src*step, load*step, gen*step, losses*step)
		} else {
			w("steps.csv", "%s,unsolved,,,,,,,,,,,,,,,,,,,,,,,0,,,,\n", stamp(lt))
		}
		rows++
	}
	w("nodes.csv", "node,phase,nominal [kV],customers,min [pu],min time,max [pu],max time,mean [pu],p1 [pu],p5 [pu],p50 [pu],p95 [pu],p99 [pu],hours below A [h],hours above A [h],hours below B [h],hours above B [h],customer-hours below A [h],customer-hours above A [h],settling hours outside A [h],lowest settling [pu],highest settling [pu]\n")
	for _, p := range pts {
		n := nodes[p.node]
		_, ph := splitPlace(p.name)
		if p.n == 0 {
			w("nodes.csv", "%s,%s,%g,%g,,,,,,,,,,,0,0,0,0,0,0,0,,\n", n.name, ph, n.kv, n.customers)
			continue
		}
		m := p.sum / float64(p.n)
		w("nodes.csv", "%s,%s,%g,%g,%.6f,%s,%.6f,%s,%.6f,%.6f,%.6f,%.6f,%.6f,%.6f,%.4f,%.4f,0,0,0,0,0,%.6f,%.6f\n", n.name, ph, n.kv, n.customers,
			p.min, stamp(p.minT), p.max, stamp(p.maxT), m, p.min, p.min, m, p.max, p.max, p.hb, p.ha, p.min, p.max)
	}
	if g.devices {
		for k, u := range units {
			w("duty.csv", "%s,%c,%d,%d,%d,5,2025-02-03,14,%d,%d,0,10,0,0\n", regs[k/3], 'A'+k%3, u.ops, u.ops/2, u.ops-u.ops/2, u.lo, u.hi)
		}
		for k, c := range caps {
			w("duty.csv", "CAP%d,,%d,%d,%d,5,2025-02-03,2,0,1,0,0,0,0\n", k+1, c.ops, c.ops/2, c.ops-c.ops/2)
		}
	}
	w("losses.csv", "element,kind,energy [kWh],share [%%],peak [kW],peak time\n")
	w("loading.csv", "element,phase,peak [A],rating [A],loading [%%],peak time,hours above rating [h],hours above emergency [h]\n")
	for i, b := range branches {
		if b.to == "" {
			continue
		}
		w("losses.csv", "%s,%s,%d,1,2,%s\n", b.element, b.kind, 100+i, stamp(g.start))
		if i%9 == 8 {
			w("loading.csv", "%s,,%d,,,%s,,\n", b.element, 90+i, stamp(g.start.Add(18*time.Hour)))
			continue
		}
		load := 100 * math.Exp(-float64(i)/40) * (0.7 + 0.5*r.Float64())
		if g.zeroLoads {
			load = 0
		}
		w("loading.csv", "%s,%c,%.4f,%.4f,%.4f,%s,%.4f,0\n", b.element, b.phases[0], load*2.3, 230.0, load, stamp(g.start.Add(18*time.Hour)), math.Max(0, load-100)*8)
	}
}
