package results

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"sort"
	"strconv"
	"strings"
	"testing"
	"time"

	"yearflow/sim/network"
)

// oracle recomputes the files of a run from its script with the plainest code: no
// streaming, everything in memory, V and Y instead of the meter's lists.
type oracle struct {
	x *tiny
	s *script
}

// volts returns the p.u. voltages of all places of an instant, in order of places.
func (o oracle) volts(s *State) []float64 {
	var out []float64
	for i, n := range o.x.plan.Model.Nodes {
		at := o.x.net.At[i]
		if n.Grounded {
			for _, p := range n.Phases {
				out = append(out, cmplx.Abs(s.V[at[p]])/(n.Nominal*1000/math.Sqrt(3)))
			}
			continue
		}
		for _, q := range [][2]int{{0, 1}, {1, 2}, {2, 0}} {
			out = append(out, cmplx.Abs(s.V[at[q[0]]]-s.V[at[q[1]]])/(n.Nominal*1000))
		}
	}
	return out
}

// losses returns the losses, W, of one kind (and, if index is not negative, of one element).
func (o oracle) losses(s *State, index int, kinds ...network.Kind) float64 {
	sum := 0.0
	for e, el := range o.x.net.Elements {
		for _, k := range kinds {
			if el.Kind != k || (index >= 0 && el.Index != index) {
				continue
			}
			for a, u := range el.Terminals {
				sum += real(s.V[u] * cmplx.Conj(s.Flow[o.x.net.Offsets[e]+a]))
			}
		}
	}
	return sum
}

func (o oracle) sourceKW(s *State) float64 {
	sum := 0.0
	for p := range 3 {
		sum += real(s.V[o.x.net.At[5][p]] * cmplx.Conj(s.Source[0][p]))
	}
	return sum / 1000
}

// settled and settling list the intervals that count.
func (o oracle) intervals(settled bool) []*Interval {
	var out []*Interval
	for i := range o.s.steps {
		if o.s.steps[i].Status != OK {
			continue
		}
		for _, iv := range o.s.steps[i].intervals {
			if iv.Settled == settled {
				out = append(out, iv)
			}
		}
	}
	return out
}

func hoursOf(iv *Interval) float64 { return float64(iv.End-iv.Start) / 3.6e12 }

// percentile is the weighted inverse distribution by sorting everything.
func percentile(v, h []float64, p float64) float64 {
	at := make([]int, len(v))
	total := 0.0
	for i := range at {
		at[i] = i
		total += h[i]
	}
	sort.Slice(at, func(a, b int) bool { return v[at[a]] < v[at[b]] })
	sum := 0.0
	for _, i := range at {
		if sum += h[i]; sum >= p/100*total*(1-1e-12) {
			return v[i]
		}
	}
	return v[at[len(at)-1]]
}

func randomRun(t *testing.T, seed uint64) (*tiny, *script, string) {
	start := time.Date(2025, 2, 27, 0, 0, 0, 0, denver(t))
	x := newTiny(t, start, start.AddDate(0, 0, 20), time.Hour) // into daylight saving time
	x.plan.Settings.Run.Flows = []string{"line1", "tx", "reg"}
	s := chance(x, rand.New(rand.NewPCG(seed, 11)))
	return x, s, s.write(t, x)
}

func TestNodesAgreeWithBruteForce(t *testing.T) {
	x, s, dir := randomRun(t, 1)
	o := oracle{x, s}
	rows := sheetRows(t, dir, "nodes.csv")
	points := Points(x.net)
	if len(rows) != len(points) {
		t.Fatalf("%d rows, want %d", len(rows), len(points))
	}
	settled, settling := o.intervals(true), o.intervals(false)
	met := map[string]bool{}
	if len(settling) < 50 {
		t.Fatalf("only %d settling intervals: the run shows nothing", len(settling))
	}
	for i, row := range rows {
		var v, h []float64
		var sum, span, below, above, belowB, aboveB float64
		lowest, highest := 0, 0
		low, high, lowB, highB := 0.975, 1.05, 0.95, 127.0/120
		if points[i].NomKV < 0.6 {
			low, lowB = 0.95, 110.0/120
		}
		for k, iv := range settled {
			u := o.volts(iv.State)[i]
			v, h = append(v, u), append(h, hoursOf(iv))
			sum, span = sum+u*hoursOf(iv), span+hoursOf(iv)
			if u < v[lowest] {
				lowest = k
			}
			if u > v[highest] {
				highest = k
			}
			for _, c := range []struct {
				is bool
				to *float64
			}{{u < low, &below}, {u > high, &above}, {u < lowB, &belowB}, {u > highB, &aboveB}} {
				if c.is {
					*c.to += hoursOf(iv)
				}
			}
		}
		cell(t, row, "min [pu]", v[lowest])
		cell(t, row, "max [pu]", v[highest])
		if want := iso(settled[lowest].Start, x.plan.Settings.Period.Zone); row["min time"] != want {
			t.Errorf("min time %s, want %s", row["min time"], want)
		}
		if want := iso(settled[highest].Start, x.plan.Settings.Period.Zone); row["max time"] != want {
			t.Errorf("max time %s, want %s", row["max time"], want)
		}
		cell(t, row, "mean [pu]", sum/span)
		for _, p := range []float64{1, 5, 50, 95, 99} {
			cell(t, row, "p"+strconv.Itoa(int(p))+" [pu]", percentile(v, h, p))
		}
		cell(t, row, "hours below A [h]", below)
		cell(t, row, "hours above A [h]", above)
		cell(t, row, "hours below B [h]", belowB)
		cell(t, row, "hours above B [h]", aboveB)
		for c := range row {
			if strings.Contains(c, "[h]") && num(t, row, c) > 0 {
				met[c] = true
			}
		}
		customers := num(t, row, "customers")
		cell(t, row, "customer-hours below A [h]", customers*below)
		cell(t, row, "customer-hours above A [h]", customers*above)
		var outside float64
		lows, highs := math.Inf(1), math.Inf(-1)
		for _, iv := range settling {
			u := o.volts(iv.State)[i]
			lows, highs = min(lows, u), max(highs, u)
			if u < low || u > high {
				outside += hoursOf(iv)
			}
		}
		cell(t, row, "settling hours outside A [h]", outside)
		cell(t, row, "lowest settling [pu]", lows)
		cell(t, row, "highest settling [pu]", highs)
	}
	if len(met) != 7 {
		t.Errorf("only the columns %v are ever above nothing: the run shows too little", met)
	}
}

func TestLossesAndLoadingAgreeWithBruteForce(t *testing.T) {
	x, s, dir := randomRun(t, 2)
	o := oracle{x, s}
	rows := sheetRows(t, dir, "losses.csv")
	all := append(o.intervals(true), o.intervals(false)...)
	total := 0.0
	for _, iv := range all {
		total += o.losses(iv.State, -1, network.Section, network.Transformer, network.TransformerNoLoad, network.RegulatorSeries, network.RegulatorNoLoad) * hoursOf(iv) / 1000
	}
	shares := 0.0
	for _, c := range []struct {
		row     int
		element string
		kind    string
		index   int
		kinds   []network.Kind
	}{
		{0, "line1", "line", 0, []network.Kind{network.Section}},
		{1, "lat", "line", 1, []network.Kind{network.Section}},
		{2, "tx", "transformer load", 0, []network.Kind{network.Transformer}},
		{3, "tx", "transformer no-load", 0, []network.Kind{network.TransformerNoLoad}},
		{4, "dd", "transformer load", 1, []network.Kind{network.Transformer}},
		{5, "dd", "transformer no-load", 1, []network.Kind{network.TransformerNoLoad}},
		{6, "reg", "regulator", 0, []network.Kind{network.RegulatorSeries, network.RegulatorNoLoad}},
	} {
		row := rows[c.row]
		if row["element"] != c.element || row["kind"] != c.kind {
			t.Fatalf("row %d is %v, want %s %s", c.row, row, c.element, c.kind)
		}
		energy, peak := 0.0, math.Inf(-1)
		var at int64
		for _, iv := range all {
			energy += o.losses(iv.State, c.index, c.kinds...) * hoursOf(iv) / 1000
		}
		for _, iv := range o.intervals(true) {
			if kw := o.losses(iv.State, c.index, c.kinds...) / 1000; kw > peak {
				peak, at = kw, iv.Start
			}
		}
		cell(t, row, "energy [kWh]", energy)
		cell(t, row, "share [%]", 100*energy/total)
		shares += num(t, row, "share [%]")
		cell(t, row, "peak [kW]", peak)
		if want := iso(at, x.plan.Settings.Period.Zone); peak != 0 && row["peak time"] != want {
			t.Errorf("%s: peak time %s, want %s", c.element, row["peak time"], want)
		}
	}
	near(t, "shares", shares, 100, 1e-6)

	line := x.net.Offsets[x.net.ElementsOf(network.Section, 1)[0]]
	peak, above := 0.0, 0.0
	for _, iv := range o.intervals(true) {
		a := max(cmplx.Abs(iv.State.Flow[line]), cmplx.Abs(iv.State.Flow[line+1]))
		peak = max(peak, a)
		if a > 90 {
			above += hoursOf(iv)
		}
	}
	if above == 0 {
		t.Fatal("lat is never above its rating: the run shows nothing")
	}
	row := find(t, sheetRows(t, dir, "loading.csv"), "element", "lat")
	cell(t, row, "peak [A]", peak)
	cell(t, row, "loading [%]", 100*peak/90)
	cell(t, row, "hours above rating [h]", above)
	if row["hours above emergency [h]"] != "" {
		t.Errorf("lat has no emergency rating, its hours read %q", row["hours above emergency [h]"])
	}
}

func TestStepsAgreeWithTheirStates(t *testing.T) {
	x, s, dir := randomRun(t, 3)
	o := oracle{x, s}
	zone := x.plan.Settings.Period.Zone
	rows, volts, flows := sheetRows(t, dir, "steps.csv"), sheetRows(t, dir, "voltages.csv"), sheetRows(t, dir, "flows.csv")
	if len(rows) != len(s.steps) || len(volts) != len(rows) || len(flows) != len(rows) {
		t.Fatalf("rows: steps %d, voltages %d, flows %d, want %d", len(rows), len(volts), len(flows), len(s.steps))
	}
	points := Points(x.net)
	var solved, low int
	for k, row := range rows {
		st := &s.steps[k]
		if row["time"] != iso(st.Start, zone) || row["status"] != st.Status.String() || row["actions"] != strconv.Itoa(st.Actions) {
			t.Fatalf("step %d reads %s %s %s", k, row["time"], row["status"], row["actions"])
		}
		if st.Status == Unsolved {
			for _, r := range []map[string]string{row, volts[k], flows[k]} {
				for name, c := range r {
					if c != "" && name != "time" && name != "status" && name != "actions" {
						t.Fatalf("unsolved step %d has a figure: %s = %s", k, name, c)
					}
				}
			}
			continue
		}
		solved++
		if st.Status == Low {
			low++
		}
		cell(t, row, "source real [kW]", o.sourceKW(st.Last))
		left := num(t, row, "source real [kW]") + num(t, row, "generation real [kW]") - num(t, row, "load real [kW]") - num(t, row, "losses real [kW]")
		leftQ := num(t, row, "source reactive [kvar]") + num(t, row, "generation reactive [kvar]") + num(t, row, "capacitors reactive [kvar]") -
			num(t, row, "load reactive [kvar]") - num(t, row, "losses reactive [kvar]")
		if math.Abs(left) > 3e-4 || math.Abs(leftQ) > 3e-4 { // a few roundings of 5e-5
			t.Fatalf("step %d: printed powers are off by %g kW, %g kvar", k, left, leftQ)
		}
		sum := num(t, row, "line losses [kW]") + num(t, row, "transformer load losses [kW]") + num(t, row, "transformer no-load losses [kW]") + num(t, row, "regulator losses [kW]")
		near(t, "loss columns", sum, num(t, row, "losses real [kW]"), 1e-5)
		v := o.volts(st.Last)
		lowest, highest := 0, 0
		for i := range v {
			cell(t, volts[k], points[i].Name, v[i])
			if v[i] < v[lowest] {
				lowest = i
			}
			if v[i] > v[highest] {
				highest = i
			}
		}
		cell(t, row, "lowest [pu]", v[lowest])
		cell(t, row, "highest [pu]", v[highest])
		if row["lowest at"] != points[lowest].Name || row["highest at"] != points[highest].Name {
			t.Fatalf("step %d: lowest at %s, want %s; highest at %s, want %s", k, row["lowest at"], points[lowest].Name, row["highest at"], points[highest].Name)
		}
		inLow, inHigh, energy := math.Inf(1), math.Inf(-1), 0.0
		for _, iv := range st.intervals {
			for _, u := range o.volts(iv.State) {
				inLow, inHigh = min(inLow, u), max(inHigh, u)
			}
			energy += o.sourceKW(iv.State) * hoursOf(iv)
		}
		cell(t, row, "lowest in step [pu]", inLow)
		cell(t, row, "highest in step [pu]", inHigh)
		cell(t, row, "source energy [kWh]", energy)
		e := x.net.Offsets[x.net.ElementsOf(network.Section, 0)[0]]
		cell(t, flows[k], "line1.B [A]", cmplx.Abs(st.Last.Flow[e]))
		cell(t, flows[k], "line1.A [A]", cmplx.Abs(st.Last.Flow[e+1]))
		cell(t, flows[k], "line1 [kW]", num(t, row, "source real [kW]"))
	}
	if low == 0 || solved == len(rows) {
		t.Fatalf("%d low of %d solved of %d steps: the run shows nothing", low, solved, len(rows))
	}
}
