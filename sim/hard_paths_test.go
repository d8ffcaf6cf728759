package sim_test

import (
	"context"
	"fmt"
	"io/fs"
	"math"
	"math/cmplx"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/devices"
	"yearflow/sim"
	"yearflow/sim/results"
)

// overloaded is a regulated line whose load goes far beyond what the line carries for some
// hours: steps are low, or have no solution, among good ones.
func overloaded(most float64, step string, profile string) fstest.MapFS {
	f := plantStudy(step, 1, map[string]string{
		"feeder/source.csv":             "node,nominal [kV],voltage [pu],short circuit 3ph [MVA],x/r 3ph\nbus,12.47,1.02,60,6\n",
		"feeder/sections.csv":           "section,from,to,phases,length [km],construction\nL1,bus,mid,ABC,4,line\nL2,far,end,ABC,4,line\n",
		"feeder/regulators.csv":         "regulator,from,to,phases,pt ratio,ct primary [A]\nR,mid,far,ABC,60,300\n",
		"feeder/regulator-settings.csv": "regulator,phase,set [V],bandwidth [V],delay [s],timer\nR,A,122,2,40,integrate\nR,B,122,2,30,restart\nR,C,122,2,50,restart\n",
		"feeder/capacitors.csv":         "capacitor,node,phases,size [kvar],state\nC,end,ABC,600,open\n",
		"feeder/capacitor-settings.csv": "capacitor,control,voltage on [V],voltage off [V],delay [s],lockout [s],daily limit\nC,voltage,117,126,90,300,4\n",
		"feeder/loads.csv":              fmt.Sprintf("load,node,phases,real [kW],reactive [kvar],zip,profile\nfarm,end,ABC,%g,%g,power,day\nlamp,end,A,40,5,mix,day\nnone,end,B,0,0,power,day\n", most, most/3),
		"feeder/zip.csv":                "zip,pz,pi,pp,qz,qi,qp\nmix,0.3,0.3,0.4,0.5,0.3,0.2\n",
		"profiles/day.csv":              profile,
	})
	return f
}

// peaky is a day with a peak of two hours in ten-minute values; interpolated where the study
// says so.
func peaky(at float64) string {
	var b strings.Builder
	b.WriteString("time,day [pu]\n")
	for k := range 144 {
		h := float64(k) / 6
		fmt.Fprintf(&b, "2025-03-03T%02d:%02d,%.5f\n", k/6, k%6*10, 0.05+0.95*math.Exp(-(h-at)*(h-at)/2)+0.002*math.Sin(h*7))
	}
	return b.String()
}

func TestOverloadedHoursBothWays(t *testing.T) {
	low, unsolved := 0, 0
	for _, most := range []float64{3000, 6000, 9000, 12000, 20000, 60000, 1e6, 1e8} {
		for _, step := range []string{"10s", "1min", "15min"} {
			for _, lines := range []bool{false, true} {
				for _, at := range []float64{0, 12} { // at 0 the start-up is among them
					t.Run(fmt.Sprintf("%g kW, %s, %v, %g", most, step, lines, at), func(t *testing.T) {
						if testing.Short() && step == "10s" {
							t.Skip()
						}
						f := overloaded(most, step, peaky(at))
						f["study.toml"] = text(strings.Replace(string(f["study.toml"].Data), "[run]", fmt.Sprintf("interpolate = %v\n[run]\nlog = \"1h\"", lines), 1))
						settled(f)
						sameRun(t, f, "")
						r := &trail{}
						e := prepare(t, f, "", sim.Options{})
						if _, err := e.Run(context.Background(), r); err != nil {
							t.Fatal(err)
						}
						for _, s := range r.status {
							switch s {
							case results.Low:
								low++
							case results.Unsolved:
								unsolved++
							}
						}
					})
				}
			}
		}
	}
	t.Logf("%d low, %d unsolved", low, unsolved)
	if low == 0 {
		t.Error("no step is low")
	}
}

// Inverters with the steepest curves on a weak feeder, with the longest of steps that have no
// lag and with shorter ones.
func TestSteepCurvesBothWays(t *testing.T) {
	for _, step := range []string{"1h", "15min", "5min"} {
		for _, f := range []string{unity, steepest, defaults} {
			t.Run(step+" "+f, func(t *testing.T) { sameRun(t, weakFeeder(step, f), "") })
		}
	}
}

// Periods of so many steps as lanes, and some more or fewer.
func TestShortPeriodsBothWays(t *testing.T) {
	for _, start := range []string{"2025-03-03", "2025-03-02T23:59:00", "2025-03-02T23:51:30"} {
		for n := 1; n <= 18; n++ {
			begin, err := time.Parse("2006-01-02T15:04:05", start+"T00:00:00"[:max(0, 19-len(start))])
			if err != nil {
				t.Fatal(err)
			}
			end := begin.Add(time.Duration(n) * 30 * time.Second)
			for _, cut := range []time.Duration{0, 13 * time.Second} {
				f := overloaded(3000, "30s", peaky(0))
				s := strings.Replace(string(f["study.toml"].Data), "start = 2025-03-03\nend = 2025-03-04", fmt.Sprintf("start = %s\nend = %s", begin.Format("2006-01-02T15:04:05"), end.Add(-cut).Format("2006-01-02T15:04:05")), 1)
				f["study.toml"] = text(strings.Replace(s, "[run]", "[run]\nlog = \"1h\"", 1))
				sameRun(t, f, "")
				sameFiles(t, folderOf(t, f, sim.Options{Reference: true}), folderOf(t, f, sim.Options{}), true)
			}
		}
	}
}

// stubborn is a control of the user's own: it steps up at every whole quarter of an hour.
type stubborn struct {
	at   int
	next devices.Time
}

func (c *stubborn) Position() int { return c.at }
func (c *stubborn) Observe(r sim.Reading, now devices.Time) {
	const quarter = 900 * devices.Second
	if c.next == 0 || c.next == devices.Never && cmplx.Abs(r.Volts)/60 > 100 {
		c.next = now - now%quarter + quarter
	}
}
func (c *stubborn) Due() devices.Time { return max(c.next, 1) }
func (c *stubborn) Act(now devices.Time) devices.Action {
	a := devices.Action{From: c.at, To: (c.at + 1) % 5}
	c.at, c.next = a.To, devices.Never
	return a
}
func (c *stubborn) Drop()   { c.next = devices.Never }
func (c *stubborn) Forget() { c.next = devices.Never }
func (c *stubborn) State(r sim.Reading) (results.DeviceState, bool) {
	return results.DeviceState{}, c.next != devices.Never
}

// A control of the user's own makes no difference either.
func TestOwnControlsBothWays(t *testing.T) {
	f := overloaded(3000, "1min", peaky(12))
	want, got := &trail{}, &quietTrail{}
	for i, r := range []sim.Recorder{want, got} {
		e := prepare(t, f, "", sim.Options{Reference: i == 0, Controls: map[string]sim.Controller{"R.B": &stubborn{next: devices.Never}}})
		if _, err := e.Run(context.Background(), r); err != nil {
			t.Fatal(err)
		}
	}
	if len(want.actions) < 90 || len(want.actions) != len(got.actions) || len(want.v) != len(got.v) {
		t.Fatalf("%d actions, step by step %d", len(got.actions), len(want.actions))
	}
	for i := range want.actions {
		if a, b := want.actions[i], got.actions[i]; a.Time != b.Time || a.Device != b.Device || a.To != b.To {
			t.Fatalf("action %d is %+v, step by step %+v", i, b, a)
		}
	}
	for k := range want.v {
		for u := range want.v[k] {
			if cmplx.Abs(want.v[k][u]-got.v[k][u]) > 1e-7*7200 {
				t.Fatalf("step %d, unknown %d: %v, step by step %v", k, u, got.v[k][u], want.v[k][u])
			}
		}
	}
}

// What depends on the steps before, or on what was measured, is solved by itself and says so.
func TestWhySteps(t *testing.T) {
	battery := plantStudy("5min", 1, map[string]string{"feeder/batteries.csv": "battery,node,phases,energy [kWh],power [kW],dispatch,charge from,charge to,discharge from,discharge to\nbat,end,ABC,300,60,schedule,01:00,04:00,18:00,20:00\n"})
	charger := plantStudy("5min", 1, map[string]string{"feeder/chargers.csv": "charger,node,phases,power [kW],arrival,departure,energy [kWh]\ncar,end,A,7,18:00,07:00,20\n"})
	lag := plantStudy("1s", 1, map[string]string{
		"feeder/generators.csv":         "generator,node,phases,kind,rating [kVA],profile,function\npv,end,ABC,solar,350,day,f\n",
		"feeder/inverter-functions.csv": "function,category,reactive\nf,B,voltage-reactive power\n"})
	lag["study.toml"] = text(strings.Replace(string(lag["study.toml"].Data), "end = 2025-03-04", "end = 2025-03-03T01:00:00", 1))
	for name, f := range map[string]fs.FS{"batteries": battery, "chargers": charger, "lagging inverters": lag} {
		e := prepare(t, f, "", sim.Options{})
		out, err := e.Run(context.Background(), &quietTrail{})
		if err != nil {
			t.Fatal(err)
		}
		if out.Speed.StepByStep[name] != e.Steps() || out.Speed.LanesUsed != 0 {
			t.Errorf("%s: %+v", name, out.Speed)
		}
		sameRun(t, f, "")
		sameFiles(t, folderOf(t, f, sim.Options{Reference: true}), folderOf(t, f, sim.Options{}), true)
	}
}
