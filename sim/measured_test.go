package sim_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// stiff is a source that holds 1 p.u. with two loads at its own node, so that every
// quantity there is known with a pencil.
func stiff(measurements, scada string) fstest.MapFS {
	return fstest.MapFS{
		"study.toml":              text("title = \"Stiff\"\n[period]\nstart = 2025-03-03\nend = 2025-03-03T04:00\nstep = \"1h\"\nzone = \"UTC\"\n[[profiles]]\nfiles = [\"profiles/*.csv\"]\n"),
		"feeder/source.csv":       text("node,nominal [kV]\nbus,12\n"),
		"feeder/loads.csv":        text("load,node,phases,real [kW],reactive [kvar],profile\na,bus,A,30,40,day\nb,bus,B,60,0,\n"),
		"feeder/measurements.csv": text("quantity,place,phase,profile\n" + measurements),
		"profiles/day.csv":        text("time,day [pu]\n2025-03-03T00:00,1\n2025-03-03T01:00,2\n2025-03-03T02:00,1\n2025-03-03T03:00,0\n"),
		"profiles/scada.csv":      text(scada),
	}
}

// held runs a study and returns how its model met the measurements.
func held(t *testing.T, fs fstest.MapFS) *sim.Measured {
	t.Helper()
	m, _ := heldLog(t, fs)
	return m
}

// logged is a row that Measured.Log was handed.
type logged struct {
	at                 int64
	measured, modelled []float64
}

func heldLog(t *testing.T, fs fstest.MapFS) (*sim.Measured, []logged) {
	t.Helper()
	st, err := feeder.Open(fs, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	m := e.Measured()
	if m == nil {
		t.Fatal("no measurements")
	}
	var log []logged
	m.Log = func(at int64, measured, modelled []float64) error {
		log = append(log, logged{at, append([]float64(nil), measured...), append([]float64(nil), modelled...)})
		return nil
	}
	if _, err := e.Run(context.Background(), m); err != nil {
		t.Fatal(err)
	}
	return m, log
}

// By hand. The source holds 12 kV, 6.9282 kV to ground. Load a draws 30+j40 kVA (50 kVA)
// times 1, 2, 1, 0; load b 60 kW.
//
//	voltage, p.u.:  model 1; measured 1.00 0.99 1.02 0.97: errors 0 .01 −.02 .03
//	                bias .02/4 = .005, mean size .06/4 = .015, p95 (4 of 4) .03, worst +.03 in the fourth hour
//	kW, all:        90 120 90 60; measured 90 118 93 60: 0 2 −3 0; bias −.25, size 1.25, worst −3 in the third
//	kvar, A:        40 80 40 0; measured 40 each: 0 40 0 −40; bias 0, size 20, worst +40, the first of equals
//	current, A:     50/6.9282 = 7.21688 A times 1 2 1 0; measured 0: bias = size = 7.21688
//	current, all:   the highest phase: 8.66025 (b) 14.43376 8.66025 8.66025; measured 8.66025: 0 5.77351 0 0
func TestMeasuredByHand(t *testing.T) {
	m := held(t, stiff("voltage,bus,A,v\nvoltage,bus,AB,vll\nkW,bus,,head\nkvar,bus,A,head\ncurrent,bus,A,i\ncurrent,bus,,ib\n",
		"time,v [pu],vll [kV],head [MW],head [kvar],i [A],ib [A]\n"+
			"2025-03-03T00:00,1,12,0.090,40,0,8.660254037844386\n"+
			"2025-03-03T01:00,0.99,11.88,0.118,40,0,8.660254037844386\n"+
			"2025-03-03T02:00,1.02,12.24,0.093,40,0,8.660254037844386\n"+
			"2025-03-03T03:00,0.97,11.64,0.060,40,0,8.660254037844386\n"))
	at := func(h int) time.Time { return time.Date(2025, 3, 3, h, 0, 0, 0, time.UTC) }
	i := 50 / (12 / math.Sqrt(3))
	want := []results.MeasuredRow{
		{Quantity: "voltage", Place: "bus", Phase: "A", Samples: 4, Bias: 0.005, MeanAbsolute: 0.015, P95: 0.03, Worst: 0.03, WorstTime: at(3)},
		{Quantity: "voltage", Place: "bus", Phase: "AB", Samples: 4, Bias: 0.005, MeanAbsolute: 0.015, P95: 0.03, Worst: 0.03, WorstTime: at(3)},
		{Quantity: "kW", Place: "bus", Samples: 4, Bias: -0.25, MeanAbsolute: 1.25, P95: 3, Worst: -3, WorstTime: at(2)},
		{Quantity: "kvar", Place: "bus", Phase: "A", Samples: 4, Bias: 0, MeanAbsolute: 20, P95: 40, Worst: 40, WorstTime: at(1)},
		{Quantity: "current", Place: "bus", Phase: "A", Samples: 4, Bias: i, MeanAbsolute: i, P95: 2 * i, Worst: 2 * i, WorstTime: at(1)},
		{Quantity: "current", Place: "bus", Samples: 4, Bias: 1.4433757, MeanAbsolute: 1.4433757, P95: 5.7735027, Worst: 5.7735027, WorstTime: at(1)},
	}
	got := m.Rows()
	if len(got) != len(want) {
		t.Fatalf("%d rows, want %d", len(got), len(want))
	}
	for k, w := range want {
		g := got[k]
		off := 0.0
		for _, d := range []float64{g.Bias - w.Bias, g.MeanAbsolute - w.MeanAbsolute, g.P95 - w.P95, g.Worst - w.Worst} {
			off = math.Max(off, math.Abs(d))
		}
		if g.Quantity != w.Quantity || g.Place != w.Place || g.Phase != w.Phase || g.Samples != w.Samples || !g.WorstTime.Equal(w.WorstTime) || !(off < 1e-6) {
			t.Errorf("row %d: %+v\nwant %+v", k, g, w)
		}
	}
}

// street is a line of three phases with loads that move each on its own, a single-phase
// lateral behind a centre-tapped transformer on phase C, and a regulator at the head.
func street(days int, step string, seed uint64) fstest.MapFS {
	r := rand.New(rand.NewPCG(seed, 1))
	loads := "time,pa [kW],pb [kW],pc [kW],home [kW]\n"
	for h := range days * 24 {
		at := time.Date(2025, 3, 3, 0, 0, 0, 0, time.UTC).Add(time.Duration(h) * time.Hour)
		day := 300 + 150*math.Sin(2*math.Pi*float64(h)/24)
		loads += at.Format("2006-01-02T15:04")
		for range 3 {
			loads += fmt.Sprintf(",%.3f", day+200*r.Float64())
		}
		loads += fmt.Sprintf(",%.3f\n", 3+4*r.Float64())
	}
	end := time.Date(2025, 3, 3+days, 0, 0, 0, 0, time.UTC).Format("2006-01-02")
	return fstest.MapFS{
		"study.toml":                    text("title = \"Street\"\n[period]\nstart = 2025-03-03\nend = " + end + "\nstep = \"" + step + "\"\nzone = \"UTC\"\n[[profiles]]\nfiles = [\"profiles/*.csv\"]\n"),
		"feeder/source.csv":             text("node,nominal [kV],short circuit 3ph [MVA],x/r 3ph\nbus,12.47,100,8\n"),
		"feeder/regulators.csv":         text("regulator,from,to,phases,pt ratio,ct primary [A]\nR1,bus,head,ABC,60,300\n"),
		"feeder/regulator-settings.csv": text("regulator,phase,set [V],bandwidth [V],delay [s]\nR1,all,122,2,30\n"),
		"feeder/constructions.csv":      text("construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km],phase conductor,insulation [in]\nline,sequence,0.35,0.4,0.6,1.2,0,0,,\ndrop,triplex,,,,,,,1/0 AA,0.08\n"),
		"feeder/sections.csv":           text("section,from,to,phases,length [km],construction\nL1,head,end,ABC,4,line\nL2,end,lat,C,1,line\nD,tank,meter,12,0.03,drop\n"),
		"feeder/transformers.csv":       text("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,resistance [%],reactance [%]\nT,lat,tank,C,50,7.2,0.24,center-tap,1.1,1.8\n"),
		"feeder/loads.csv":              text("load,node,phases,power factor,profile\na,end,A,0.9,pa\nb,end,B,0.9,pb\nc,end,C,0.9,pc\nh,meter,12,0.95,home\n"),
		"profiles/loads.csv":            text(loads),
	}
}

// streetPlaces is what is measured in the street.
const streetPlaces = "voltage,end,A,va\nvoltage,end,B,vb\nvoltage,end,C,vc\nvoltage,meter,1,vm\nvoltage,end,,vmean\ncurrent,L1,B,ib\nkW,R1,,p\nkvar,R1,,p\nkW,T,C,pt\ntap,R1,A,ta\noperations,R1,,ops\n"

var streetColumns = []string{"va [pu]", "vb [pu]", "vc [pu]", "vm [pu]", "vmean [pu]", "ib [A]", "p [kW]", "p [kvar]", "pt [kW]", "ta [pu]", "ops [pu]"}

// modelAsMeasured runs a study without its measurements being right and returns what
// the model says by row of the log and measurement.
func modelAsMeasured(t *testing.T, fs fstest.MapFS, days int) [][]float64 {
	t.Helper()
	zero := "time," + strings.Join(streetColumns, ",") + "\n"
	for h := range days * 24 {
		at := time.Date(2025, 3, 3, 0, 0, 0, 0, time.UTC).Add(time.Duration(h) * time.Hour)
		zero += at.Format("2006-01-02T15:04") + strings.Repeat(",1", len(streetColumns)) + "\n"
	}
	all := fstest.MapFS{"feeder/measurements.csv": text("quantity,place,phase,profile\n" + streetPlaces), "profiles/scada.csv": text(zero)}
	for n, f := range fs {
		all[n] = f
	}
	_, log := heldLog(t, all)
	var out [][]float64
	for _, l := range log {
		out = append(out, l.modelled)
	}
	return out
}

// scada writes values by hour as the measured profile: column c takes that of(c) of the
// model, shifted by so many hours, with noise in parts of the value.
func scada(model [][]float64, of func(int) int, shift int, noise float64) *fstest.MapFile {
	r := rand.New(rand.NewPCG(9, 9))
	s := "time," + strings.Join(streetColumns, ",") + "\n"
	for h := range model {
		at := time.Date(2025, 3, 3, 0, 0, 0, 0, time.UTC).Add(time.Duration(h) * time.Hour)
		s += at.Format("2006-01-02T15:04")
		from := model[(h-shift+len(model))%len(model)]
		for c := range streetColumns {
			s += fmt.Sprintf(",%.17g", from[of(c)]*(1+noise*r.NormFloat64()))
		}
		s += "\n"
	}
	return text(s)
}

func itself(c int) int { return c }

func measuredStreet(fs fstest.MapFS, file *fstest.MapFile) fstest.MapFS {
	out := fstest.MapFS{"feeder/measurements.csv": text("quantity,place,phase,profile\n" + streetPlaces), "profiles/scada.csv": file}
	for n, f := range fs {
		out[n] = f
	}
	return out
}

// A model that is held against its own output meets it exactly, device actions included.
func TestMeasuredExactAgreement(t *testing.T) {
	fs := street(4, "1h", 1)
	model := modelAsMeasured(t, fs, 4)
	moved := 0.0
	for _, row := range model {
		moved += row[10]
	}
	if moved == 0 {
		t.Fatal("nothing operates: the test compares nothing")
	}
	for _, r := range held(t, measuredStreet(fs, scada(model, itself, 0, 0))).Rows() {
		if r.Samples != 96 || math.Abs(r.Bias) > 1e-9 || r.MeanAbsolute > 1e-9 || r.P95 > 1e-9 || math.Abs(r.Worst) > 1e-9 {
			t.Errorf("%s: %+v, want nothing", r.Title(), r)
		}
	}
}

// Measurements that are an hour late differ by what the model changes in an hour.
func TestMeasuredAnHourLate(t *testing.T) {
	fs := street(4, "1h", 2)
	model := modelAsMeasured(t, fs, 4)
	rows := held(t, measuredStreet(fs, scada(model, itself, 1, 0))).Rows()
	for c := range rows {
		var size, worst float64
		for h := range model {
			d := math.Abs(model[h][c] - model[(h+len(model)-1)%len(model)][c])
			size += d / float64(len(model))
			worst = math.Max(worst, d)
		}
		if g := rows[c]; math.Abs(g.MeanAbsolute-size) > 1e-9*(1+size) || math.Abs(math.Abs(g.Worst)-worst) > 1e-9*(1+worst) || math.Abs(g.Bias) > 1e-9*(1+size) || size == 0 {
			t.Errorf("%s: %+v, want size %g, worst %g, no bias", g.Title(), g, size, worst)
		}
	}
}

// Measured by the hour, run in quarters: a sample is an hour, in which the model's mean
// is compared, and operations of the four quarters add up.
func TestMeasuredByTheHourRunInQuarters(t *testing.T) {
	hourly, quarters := street(2, "1h", 3), street(2, "15min", 3)
	// Quarters between: the profile of loads holds, so that the model of a quarter is that
	// of its hour but for the devices' delays, which fall into the first.
	model := modelAsMeasured(t, hourly, 2)
	m, log := heldLog(t, measuredStreet(quarters, scada(model, itself, 0, 0)))
	if len(log) != 192 {
		t.Errorf("%d rows of the log, want 192", len(log))
	}
	for _, r := range m.Rows() {
		if r.Samples != 48 || r.MeanAbsolute > 1e-6 { // solutions are good to 1e-8 p.u. of 12 kV and some 100 A
			t.Errorf("%s: %+v, want 48 samples that agree", r.Title(), r)
		}
	}
	// Half an hour later the first and the last hour are cut off and left out.
	cut := fstest.MapFS{}
	for n, f := range measuredStreet(quarters, scada(model, itself, 0, 0)) {
		cut[n] = f
	}
	cut["study.toml"] = text(strings.NewReplacer("start = 2025-03-03\n", "start = 2025-03-03T00:30\n", "end = 2025-03-05\n", "end = 2025-03-04T23:30\n").Replace(string(cut["study.toml"].Data)))
	for _, r := range held(t, cut).Rows() {
		if r.Samples != 46 {
			t.Errorf("%s: %d samples, want 46", r.Title(), r.Samples)
		}
	}
}

// Steps that are not ok enter nothing.
func TestMeasuredLeavesOutLowSteps(t *testing.T) {
	fs := street(2, "1h", 4)
	s := strings.Split(string(fs["profiles/loads.csv"].Data), "\n")
	cells := strings.Split(s[5], ",")
	cells[1] = "200000" // 200 MW over four kilometres of line: not served
	s[5] = strings.Join(cells, ",")
	fs["profiles/loads.csv"] = text(strings.Join(s, "\n"))
	m, log := heldLog(t, measuredStreet(fs, scada(modelAsMeasured(t, street(2, "1h", 4), 2), itself, 0, 0)))
	if v := log[4].modelled[0]; v == v {
		t.Errorf("the fifth hour is modelled as %g, want nothing", v)
	}
	for _, r := range m.Rows() {
		if r.Samples != 47 {
			t.Errorf("%s: %d samples, want 47", r.Title(), r.Samples)
		}
	}
}

// Meters on A and B are interchanged, and the service's, on C, sits in fact on A.
func TestPhaseSwaps(t *testing.T) {
	const days = 14
	fs := street(days, "1h", 5)
	model := modelAsMeasured(t, fs, days)
	swapped := func(c int) int { return [...]int{1, 0, 2, 0, 4, 5, 6, 7, 8, 9, 10}[c] }
	got := held(t, measuredStreet(fs, scada(model, swapped, 0, 0.0005))).PhaseSwaps()
	want := []string{"end.A is B at end", "end.B is A at end", "meter.1 is A at end"}
	if len(got) != len(want) {
		t.Fatalf("%+v, want %v", got, want)
	}
	for i, s := range got {
		if text := s.Place + "." + s.Phase + " is " + s.Likely + " at " + s.At; text != want[i] {
			t.Errorf("%s (%+v), want %s", text, s, want[i])
		}
		if s.WithLikely <= s.Correlation+0.1 || s.Samples != days*24-1 {
			t.Errorf("%+v", s)
		}
	}
	// The same with every meter in its place, and with as much noise as there is change.
	for _, noise := range []float64{0, 0.0005, 0.05} {
		if got := held(t, measuredStreet(fs, scada(model, itself, 0, noise))).PhaseSwaps(); len(got) > 0 {
			t.Errorf("noise %g, nothing interchanged: %+v", noise, got)
		}
	}
	// Eight days are 191 changes: too few to say anything.
	short := street(8, "1h", 5)
	if got := held(t, measuredStreet(short, scada(modelAsMeasured(t, short, 8), swapped, 0, 0))).PhaseSwaps(); len(got) > 0 {
		t.Errorf("191 changes: %+v", got)
	}
}

// Over many feeders of chance, none that is in order gets advice.
func TestPhaseSwapsStaysSilent(t *testing.T) {
	for seed := range uint64(6) {
		fs := street(9, "1h", 100+seed)
		model := modelAsMeasured(t, fs, 9)
		if got := held(t, measuredStreet(fs, scada(model, itself, 0, 0.003))).PhaseSwaps(); len(got) > 0 {
			t.Errorf("seed %d: %+v", seed, got)
		}
	}
}

func TestMeasuredPlausibility(t *testing.T) {
	for _, c := range []struct{ name, row, column, want string }{
		{"between phases", "voltage,bus,A,v\n", "v [V],12000", "√3 times as much: give a pair"},
		{"to ground", "voltage,bus,AB,v\n", "v [V],6928", "1/√3 of it: give one phase"},
		{"secondary", "voltage,bus,A,v\n", "v [V],121", "go in as [pu], V/120"},
		{"percent", "voltage,bus,A,v\n", "v [pu],100", "look at the unit"},
		{"right", "voltage,bus,A,v\n", "v [V],6950", ""},
	} {
		t.Run(c.name, func(t *testing.T) {
			head, value, _ := strings.Cut(c.column, ",")
			s := "time," + head + "\n"
			for h := range 4 {
				s += fmt.Sprintf("2025-03-03T%02d:00,%s\n", h, value)
			}
			st, err := feeder.Open(stiff(c.row, s), "")
			if err != nil {
				t.Fatal(err)
			}
			e, err := sim.Prepare(st, sim.Options{})
			if err != nil {
				t.Fatal(err)
			}
			var said []string
			for _, w := range e.Warnings {
				if w.Pos.File == "feeder/measurements.csv" {
					said = append(said, w.Text)
				}
			}
			if c.want == "" && len(said) > 0 || c.want != "" && (len(said) != 1 || !strings.Contains(said[0], c.want)) {
				t.Errorf("warnings %q, want %q", said, c.want)
			}
		})
	}
}

func TestUnused(t *testing.T) {
	fs := stiff("", "time,lost [kW],found [pu]\n2025-03-03T00:00,1,2\n2025-03-03T01:00,1,2\n2025-03-03T02:00,1,2\n2025-03-03T03:00,1,2\n")
	fs["feeder/generators.csv"] = text("generator,node,phases,kind,rating [kVA],real [kW]\ng,bus,A,hydro,9,7\n")
	fs["feeder/loads.csv"] = text("load,node,phases,real [kW],energy [kWh],power factor,profile\na,bus,A,30,,1,day\nb,bus,B,60,,1,\nc,bus,C,2.5,,1,\nd,bus,C,,40,1,\n")
	st, err := feeder.Open(fs, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	list := func(elsewhere ...feeder.ProfileUse) string {
		var s []string
		for _, f := range e.Unused(elsewhere...) {
			s = append(s, f.Error())
		}
		return strings.Join(s, "\n")
	}
	want := `feeder/loads.csv:3: 2 of 4 loads without a profile, assumed constant at 62.5 kW in all at every step: b, c
feeder/loads.csv:5: 1 of 4 loads without a profile, the energy of 40 kWh in all assumed spread evenly over its time: d
feeder/generators.csv:2: 1 of 1 generator without a profile, assumed constant at 7 kW in all at every step: g
profiles/scada.csv:1:2: 2 profiles of this file have no user: no table names lost, found, and they are not in the run`
	if got := list(); got != want {
		t.Errorf("%s\nwant\n%s", got, want)
	}
	if got := list(feeder.ProfileUse{Name: "lost"}); !strings.Contains(got, `profile "found" has no user`) || strings.Contains(got, "lost") {
		t.Errorf("a case names lost: %s", got)
	}
}
