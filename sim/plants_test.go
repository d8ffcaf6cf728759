package sim_test

import (
	"context"
	"fmt"
	"math"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/devices"
	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// plantStudy is a stiff source, one line and a load, with tables of plants laid over.
func plantStudy(step string, days int, extra map[string]string) fstest.MapFS {
	f := fstest.MapFS{
		"study.toml":               text(fmt.Sprintf("title = \"Plants\"\n[period]\nstart = 2025-03-03\nend = 2025-03-%02d\nstep = %q\nzone = \"UTC\"\n[[profiles]]\nfiles = [\"profiles/*.csv\"]\nrepeat = \"day\"\n[run]\nstart = \"given\"\n", 3+days, step)),
		"feeder/source.csv":        text("node,nominal [kV]\nbus,12.47\n"),
		"feeder/constructions.csv": text("construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]\nline,sequence,0.35,0.4,0.6,1.2,0,0\n"),
		"feeder/sections.csv":      text("section,from,to,phases,length [km],construction\nL1,bus,end,ABC,4,line\n"),
		"feeder/loads.csv":         text("load,node,phases,real [kW],reactive [kvar],profile\nfarm,end,ABC,900,300,day\n"),
		"profiles/day.csv":         text(dayProfile()),
	}
	for name, s := range extra {
		f[name] = text(s)
	}
	return f
}

func ready(t testing.TB, f fstest.MapFS) *sim.Engine {
	t.Helper()
	st, err := feeder.Open(f, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// ledger keeps what a run's intervals say of plants.
type ledger struct {
	t         *testing.T
	meter     *results.Meter
	in, out   float64 // kWh of the first battery
	charged   float64 // kWh of all chargers
	peak      float64 // kW of the source
	intervals []int64
	storage   []float64 // kW, by interval
	charging  []float64
	flow      []float64 // kW of the source, by interval
	kvar      []float64 // of the first generator, by interval
}

func (l *ledger) Interval(iv *results.Interval) error {
	p, q, scale := l.meter.Balance(iv.State)
	if math.Abs(p)+math.Abs(q) > 1e-6*math.Max(scale, 1000) {
		l.t.Errorf("imbalance %g W, %g var of %g VA", p, q, scale)
	}
	h := float64(iv.End-iv.Start) / 3.6e12
	l.intervals = append(l.intervals, iv.Start)
	kw := 0.0
	for _, s := range iv.State.Storage {
		kw += real(s) / 1000
	}
	l.storage = append(l.storage, kw)
	l.in += math.Max(0, -kw) * h
	l.out += math.Max(0, kw) * h
	c := 0.0
	for _, s := range iv.State.Charging {
		c += real(s) / 1000
	}
	l.charging = append(l.charging, c)
	l.charged += c * h
	r := l.meter.NewReading()
	l.meter.Read(iv.State, r)
	l.flow = append(l.flow, real(r.Source)/1000)
	l.peak = math.Max(l.peak, real(r.Source)/1000)
	if len(iv.State.Generation) > 0 {
		l.kvar = append(l.kvar, imag(iv.State.Generation[0])/1000)
	}
	return nil
}
func (l *ledger) Action(*results.Action) error { return nil }
func (l *ledger) Step(s *results.Step) error {
	if s.Status != results.OK {
		l.t.Errorf("step is %s at %s", s.Status, s.Where)
	}
	return nil
}

func runPlants(t *testing.T, f fstest.MapFS) (*sim.Engine, *ledger, *results.Outcome) {
	t.Helper()
	e := ready(t, f)
	l := &ledger{t: t, meter: e.Meter()}
	o, err := e.Run(context.Background(), l)
	if err != nil {
		t.Fatal(err)
	}
	return e, l, o
}

// A battery of 100 kW and 300 kWh that charges from 01:00 and discharges from 18:00:
// half full with 150 kWh, η = 0.81, so √η = 0.9: 150/0.9 = 166.67 kWh fill it after
// 1 h 40 min; full, it gives 300·0.9 = 270 kWh in 2 h 42 min, down to nothing. Both
// ends fall inside a step.
func TestBatterySchedule(t *testing.T) {
	_, l, o := runPlants(t, plantStudy("1h", 1, map[string]string{
		"feeder/batteries.csv": "battery,node,phases,energy [kWh],power [kW],round-trip efficiency [%],dispatch,charge from,charge to,discharge from,discharge to\nb,end,ABC,300,100,81,schedule,1:00,6:00,18:00,23:00\n",
	}))
	if math.Abs(l.in-150/0.9) > 1e-6 || math.Abs(l.out-270) > 1e-6 {
		t.Errorf("in %.6f kWh, out %.6f kWh; want %.6f and 270", l.in, l.out, 150/0.9)
	}
	p := o.Plants[0]
	if d := p.Drawn - p.Delivered - p.Losses - p.Change; math.Abs(d) > 1e-9 || math.Abs(p.Change+150) > 1e-9 {
		t.Errorf("ledger %+v is open by %g kWh", p, d)
	}
	ends := map[int64]bool{}
	for _, s := range l.intervals {
		ends[(s-l.intervals[0])/1e9] = true
	}
	for _, want := range []int64{3600 + 6000, 18*3600 + 9720} {
		if !ends[want] {
			t.Errorf("no event %d s into the day", want)
		}
	}
}

// A peak-shaving battery at the section's far end holds the flow through it at its
// target as long as it can: 0.1 kW (design, section 8).
func TestPeakShaving(t *testing.T) {
	_, l, _ := runPlants(t, plantStudy("1h", 1, map[string]string{
		"feeder/batteries.csv": "battery,node,phases,energy [kWh],power [kW],dispatch,watched section,target [kW],recharge [kW],initial [%]\nb,end,ABC,2000,300,peak shaving,L1,700,500,100\n",
	}))
	for k, kw := range l.storage {
		hour := (l.intervals[k] - l.intervals[0]) / 3.6e12
		switch {
		case hour >= 17 && hour < 21:
			if math.Abs(l.flow[k]-700) > 0.1 || kw <= 0 {
				t.Errorf("hour %d: flow %.3f kW with %.3f kW of storage, want 700", hour, l.flow[k], kw)
			}
		case hour > 21 && kw > 0:
			t.Errorf("hour %d: delivers %.3f kW without need", hour, kw)
		}
	}
}

// Self-consumption keeps the flow at nothing with solar of 600 kW behind the section.
func TestSelfConsumption(t *testing.T) {
	_, l, _ := runPlants(t, plantStudy("1h", 1, map[string]string{
		"feeder/generators.csv": "generator,node,phases,kind,rating [kVA],real [kW]\ng,end,ABC,solar,700,600\n",
		"feeder/batteries.csv":  "battery,node,phases,energy [kWh],power [kW],dispatch,watched section\nb,end,ABC,5000,400,self-consumption,L1\n",
	}))
	for k := range l.flow {
		if math.Abs(l.flow[k]) > 0.1 {
			t.Errorf("interval %d: %.3f kW through the section", k, l.flow[k])
		}
	}
}

// Two chargers of 10 kW that share 12 kW: from 18:00 to 20:00 both want 10 and get 6
// each; at 20:00 the second has left with 12 of 15 kWh, the first goes on with 10 kW
// until its 20 kWh are in: 8 kWh in 48 minutes.
func TestChargersShare(t *testing.T) {
	_, l, o := runPlants(t, plantStudy("1h", 1, map[string]string{
		"feeder/chargers.csv": "charger,node,phases,power [kW],arrival,departure,energy [kWh],group,group limit [kW]\nc1,end,A,10,18:00,23:30,20,lot,12\nc2,end,A,10,18:00,20:00,15,lot,12\n",
	}))
	if math.Abs(l.charged-32) > 1e-6 {
		t.Errorf("charged %.6f kWh, want 32", l.charged)
	}
	for _, p := range o.Plants {
		want := map[string][2]float64{"c1": {20, 0}, "c2": {12, 3}}[p.Name]
		if math.Abs(p.Drawn-want[0]) > 1e-6 || math.Abs(p.Unserved-want[1]) > 1e-6 {
			t.Errorf("%s: drew %.6f, unserved %.6f; want %v", p.Name, p.Drawn, p.Unserved, want)
		}
	}
	done := int64(0)
	for k, c := range l.charging {
		if c > 0 {
			done = l.intervals[k]
		}
	}
	if at := (done - l.intervals[0]) / 1e9; at != 20*3600 {
		t.Errorf("the last charging interval begins %d s into the day, want 20:00", at)
	}
}

// The equilibrium of volt-var: the solved reactive power is the curve's at the solved
// voltage, within the capability; IEEE Std 1547-2018 category B defaults.
func TestVoltVarEquilibrium(t *testing.T) {
	e := ready(t, plantStudy("1h", 1, map[string]string{
		"feeder/generators.csv":         "generator,node,phases,kind,rating [kVA],real [kW],function\ng,end,ABC,solar,2000,1900,vv\n",
		"feeder/inverter-functions.csv": "function,category,reactive\nvv,B,voltage-reactive power\n",
		"feeder/source.csv":             "node,nominal [kV],voltage [pu]\nbus,12.47,1.03\n",
	}))
	in, err := e.Solve(0, sim.Positions{Given: true})
	if err != nil || in.Status != results.OK {
		t.Fatal(err, in)
	}
	mean := 0.0
	for _, v := range e.Voltages() {
		if v.Node == "end" {
			mean += v.PU / 3
		}
	}
	sheet := devices.Inverter{Rating: 2000, Function: devices.VoltageReactive, VoltVar: devices.CategoryB.VoltVar()}
	want := sheet.Power(1900, mean)
	got := in.State.Generation[0]
	if math.Abs(real(got)/1000-want.P) > 0.01 || math.Abs(imag(got)/1000-want.Q) > 0.01 || want.Q >= 0 {
		t.Errorf("at %.6f p.u.: %.3f kW, %.3f kvar; the curve says %.3f and %.3f", mean, real(got)/1000, imag(got)/1000, want.P, want.Q)
	}
}

// Short steps follow the lag: with an open loop response time of 90 s and steps of
// ten seconds the reactive power approaches the equilibrium of the hourly run without
// passing it, and 90 % of the way is done 90 s after the output has jumped.
func TestVoltVarLag(t *testing.T) {
	study := func(step string) fstest.MapFS {
		return plantStudy(step, 1, map[string]string{
			"feeder/generators.csv":         "generator,node,phases,kind,rating [kVA],profile,function\ng,end,ABC,solar,3000,jump,vv\n",
			"feeder/inverter-functions.csv": "function,category,reactive,open loop response time [s]\nvv,B,voltage-reactive power,90\n",
			"feeder/source.csv":             "node,nominal [kV],voltage [pu]\nbus,12.47,1.01\n",
			"feeder/loads.csv":              "load,node,phases,real [kW]\nfarm,end,ABC,100\n",
			"profiles/jump.csv":             "time,jump [pu]\n2025-03-03T00:00,0.3\n2025-03-03T12:00,0.9\n",
		})
	}
	_, hourly, _ := runPlants(t, study("1h"))
	before, after := hourly.kvar[0], hourly.kvar[len(hourly.kvar)-1]
	if math.Abs(after-before) < 50 {
		t.Fatalf("the jump moves the reactive power from %.1f to %.1f kvar only", before, after)
	}
	_, l, _ := runPlants(t, study("10s"))
	noon := l.intervals[0] + 12*3600*1e9
	at90 := math.NaN()
	for k, s := range l.intervals {
		share := (l.kvar[k] - before) / (after - before)
		switch {
		case s < noon && math.Abs(l.kvar[k]-before) > 0.5:
			t.Fatalf("before noon: %.3f kvar, want %.3f", l.kvar[k], before)
		case s >= noon && (share < -0.01 || share > 1.01):
			t.Fatalf("%d s after noon: share %.3f of the way", (s-noon)/1e9, share)
		}
		if s <= noon+90e9 {
			at90 = share
		}
	}
	// The target moves with the voltage, so that the closed loop is a little faster.
	if at90 < 0.85 || at90 > 0.99 {
		t.Errorf("after 90 s the lag has done %.3f of the way, want about 0.9", at90)
	}
	if end := l.kvar[len(l.kvar)-1]; math.Abs(end-after) > 1 {
		t.Errorf("at the end %.3f kvar, the equilibrium is %.3f", end, after)
	}
}

// Settings outside the standard's range are refused at the row.
func TestFunctionOutsideTheStandard(t *testing.T) {
	st, err := feeder.Open(plantStudy("1h", 1, map[string]string{
		"feeder/generators.csv":         "generator,node,phases,kind,rating [kVA],real [kW],function\ng,end,ABC,solar,2000,1900,vv\n",
		"feeder/inverter-functions.csv": "function,category,reactive,v2 [pu]\nvv,B,voltage-reactive power,0.5\n",
	}), "")
	if err != nil {
		t.Fatal(err)
	}
	if _, err = sim.Prepare(st, sim.Options{}); err == nil || !strings.Contains(err.Error(), "feeder/inverter-functions.csv:2") {
		t.Errorf("got %v, want a fault at feeder/inverter-functions.csv:2", err)
	}
}
