package sim_test

import (
	"context"
	"fmt"
	"log"
	"math/cmplx"
	"testing/fstest"

	"yearflow/devices"
	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// lane is a small study: a source, three kilometres of line, a regulator and a load
// that doubles in the evening.
var lane = fstest.MapFS{
	"study.toml": text(`title = "Lane"
[period]
start = 2025-03-03
end = 2025-03-10
step = "1h"
zone = "UTC"
[[profiles]]
files = ["profiles/*.csv"]
repeat = "day"
`),
	"feeder/source.csv": text("node,nominal [kV]\nbus,12.47\n"),
	"feeder/constructions.csv": text(`construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]
line,sequence,0.35,0.4,0.6,1.2,0,0
`),
	"feeder/sections.csv":           text("section,from,to,phases,length [km],construction\nL1,bus,mid,ABC,4,line\nL2,reg,end,ABC,3,line\n"),
	"feeder/regulators.csv":         text("regulator,from,to,phases,pt ratio,ct primary [A]\nR1,mid,reg,ABC,60,300\n"),
	"feeder/regulator-settings.csv": text("regulator,phase,set [V],bandwidth [V],delay [s]\nR1,all,122,2,30\n"),
	"feeder/loads.csv":              text("load,node,phases,real [kW],reactive [kvar],profile\nfarm,end,ABC,2400,800,day\n"),
	"profiles/day.csv":              text(dayProfile()),
}

func text(s string) *fstest.MapFile { return &fstest.MapFile{Data: []byte(s)} }

func dayProfile() string {
	s := "time,day [pu]\n"
	for h := range 24 {
		v := 0.5
		if h >= 17 && h < 21 {
			v = 1
		}
		s += fmt.Sprintf("2025-03-03T%02d:00,%g\n", h, v)
	}
	return s
}

// Example_read reads a study and says what it is.
func Example_read() {
	st, err := feeder.Open(lane, "")
	if err != nil {
		log.Fatal(err) // every fault with its file, line and column
	}
	d := st.Describe()
	fmt.Printf("%s: %d nodes, %.0f km, %.0f kW\n", st.Title, d.Nodes, d.LengthKM, d.LoadKW)
	// Output:
	// Lane: 4 nodes, 7 km, 2400 kW
}

// ExampleEngine_Solve solves one instant with the regulator at rest.
func ExampleEngine_Solve() {
	st, err := feeder.Open(lane, "")
	if err != nil {
		log.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		log.Fatal(err)
	}
	in, err := e.Solve(18, sim.Positions{}) // the nineteenth hour
	if err != nil {
		log.Fatal(err)
	}
	fmt.Println(in.Status, "taps", in.State.Taps)
	for _, v := range e.Voltages() {
		if v.Phase == "A" {
			fmt.Printf("%-4s %.4f p.u. %6.2f°\n", v.Node, v.PU, v.Angle)
		}
	}
	// Output:
	// ok taps [7 7 7]
	// bus  1.0000 p.u.   0.00°
	// end  0.9877 p.u.  -1.79°
	// mid  0.9681 p.u.  -1.04°
	// reg  1.0104 p.u.  -1.04°
}

// peak is a recorder of one's own: the highest current of the source's phase A.
type peak struct{ amperes float64 }

func (p *peak) Interval(iv *results.Interval) error {
	p.amperes = max(p.amperes, cmplx.Abs(iv.State.Source[0][0]))
	return nil
}
func (p *peak) Action(*results.Action) error { return nil }
func (p *peak) Step(*results.Step) error     { return nil }

// ExampleEngine_Run runs a week with a recorder of one's own.
func ExampleEngine_Run() {
	st, err := feeder.Open(lane, "")
	if err != nil {
		log.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		log.Fatal(err)
	}
	var p peak
	if _, err := e.Run(context.Background(), &p); err != nil {
		log.Fatal(err)
	}
	fmt.Printf("%d steps, peak %.1f A\n", e.Steps(), p.amperes)
	// Output:
	// 168 steps, peak 123.9 A
}

// follow is a control of one's own: it wants the tap nearest to the set voltage, one
// step a minute, without a band. It has no state but its position and its clock.
type follow struct {
	tap, ask int
	due      devices.Time
}

func (f *follow) Position() int { return f.tap }
func (f *follow) Observe(r sim.Reading, now devices.Time) {
	v := cmplx.Abs(r.Volts) / 60
	ask := 0
	switch {
	case v < 122-0.5 && f.tap < 16:
		ask = 1
	case v > 122+0.5 && f.tap > -16:
		ask = -1
	}
	if ask != f.ask {
		f.due = now + 60*devices.Second
	}
	f.ask = ask
}
func (f *follow) Due() devices.Time {
	if f.ask == 0 {
		return devices.Never
	}
	return f.due
}
func (f *follow) Act(now devices.Time) devices.Action {
	a := devices.Action{From: f.tap, To: f.tap + f.ask, Reason: devices.ByControl}
	f.tap += f.ask
	f.due = now + 60*devices.Second
	return a
}
func (f *follow) Drop()   { f.ask = 0 }
func (f *follow) Forget() { f.ask = 0 }
func (f *follow) State(sim.Reading) (results.DeviceState, bool) {
	return results.DeviceState{}, f.ask != 0
}

// ExampleOptions_controls puts a control of one's own in the place of a settings
// sheet.
func ExampleOptions_controls() {
	st, err := feeder.Open(lane, "")
	if err != nil {
		log.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{Controls: map[string]sim.Controller{"R1.A": &follow{}}})
	if err != nil {
		log.Fatal(err)
	}
	in, err := e.Solve(18, sim.Positions{})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Println("taps", in.State.Taps)
	// Output:
	// taps [8 7 7]
}
