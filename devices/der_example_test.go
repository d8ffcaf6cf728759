package devices_test

import (
	"fmt"

	"yearflow/devices"
)

// An inverter of 10 kVA with the default curve of category B and the ceiling beside it, on
// a sunny noon: as the voltage rises it absorbs, and then gives less.
func ExampleInverter() {
	f := devices.Inverter{Rating: 10, Function: devices.VoltageReactive, VoltVar: devices.CategoryB.VoltVar(),
		VoltWattOn: true, VoltWatt: devices.DefaultVoltWatt(0)}
	for _, v := range []float64{1.00, 1.04, 1.06, 1.08, 1.10} {
		o := f.Power(9.5, v)
		fmt.Printf("%.2f p.u.: %.2f kW, %.2f kvar, %.2f kW curtailed\n", v, o.P, o.Q, o.Curtailed)
	}
	// Output:
	// 1.00 p.u.: 9.50 kW, 0.00 kvar, 0.00 kW curtailed
	// 1.04 p.u.: 9.50 kW, -1.47 kvar, 0.00 kW curtailed
	// 1.06 p.u.: 9.50 kW, -2.93 kvar, 0.00 kW curtailed
	// 1.08 p.u.: 5.00 kW, -4.40 kvar, 4.50 kW curtailed
	// 1.10 p.u.: 0.00 kW, -4.40 kvar, 9.50 kW curtailed
}

// A settings sheet beyond the allowed range is told where, and what would do.
func ExampleInverter_Check() {
	f := devices.Inverter{Rating: 10, Function: devices.VoltageReactive, VoltVar: devices.CategoryB.VoltVar()}
	f.VoltVar.V[1], f.VoltVar.Q[3] = 0.96, -0.6
	for _, err := range f.Check() {
		fmt.Println(err)
	}
	// Output:
	// V2 is 0.96, allowed is 0.97 to 1 (IEEE Std 1547-2018, 5.3.3, Table 8, category B)
	// Q4 is -0.6, allowed is -0.44 to 0 (IEEE Std 1547-2018, 5.3.3, Table 8, category B)
}

// With steps shorter than the response time the lag is followed, from interval to interval.
func ExampleInverter_Advance() {
	f := devices.Inverter{Rating: 10, Function: devices.VoltageReactive, VoltVar: devices.CategoryB.VoltVar()}
	s := f.Target(8, 1.00)
	now := devices.Time(0)
	for range 4 {
		o := f.Held(8, s)
		fmt.Printf("%.2f s: %.2f kvar\n", float64(now)/1e9, o.Q)
		goal := f.Target(8, 1.05) // what the voltage of this interval calls for
		end := f.NextMove(s, goal, now)
		s, now = f.Advance(s, goal, end-now), end
	}
	// Output:
	// 0.00 s: 0.00 kvar
	// 1.09 s: -0.87 kvar
	// 2.17 s: -1.39 kvar
	// 3.26 s: -1.71 kvar
}

// A battery shaves a peak of 230 kW down to 200 kW until it is at its reserve.
func ExampleBattery() {
	b := devices.Battery{Energy: 60, Power: 50, RoundTrip: 0.81, Reserve: 0.1, Initial: 0.7,
		Dispatch: devices.PeakShaving, Target: 200, Recharge: 150}
	s := b.Start()
	p := b.Request(s, devices.BatteryReading{Flow: 230}, 0)
	lasts := b.Until(s, p)
	s, x := b.Advance(s, p, lasts)
	fmt.Printf("%.0f kW for %.0f min: %.1f kWh delivered, %.1f lost, %.0f left\n", p, float64(lasts)/60e9, x.Out, x.Loss, s.Stored)
	fmt.Printf("then %.0f kW\n", b.Request(s, devices.BatteryReading{Flow: 230}, lasts))
	// Output:
	// 30 kW for 65 min: 32.4 kWh delivered, 3.6 lost, 6 left
	// then 0 kW
}

// Two chargers share 10 kW from event to event.
func ExampleShare() {
	const hour = 3600 * devices.Second
	chargers := []devices.Charger{
		{Power: 7.2, Sessions: []devices.Session{{Arrive: 0, Depart: 8 * hour, Energy: 10}}},
		{Power: 7.2, Sessions: []devices.Session{{Arrive: hour, Depart: 2 * hour, Energy: 9}}},
	}
	states, power := make([]devices.ChargerState, 2), make([]float64, 2)
	for now := devices.Time(0); now != devices.Never; {
		for i := range chargers {
			states[i] = chargers[i].Observe(states[i], now)
			power[i] = chargers[i].Wants(states[i], now)
		}
		devices.Share(power, power, 10)
		fmt.Printf("%.2f h: %.1f and %.1f kW\n", float64(now)/float64(hour), power[0], power[1])
		next := devices.Never
		for i := range chargers {
			next = min(next, chargers[i].NextEvent(states[i], power[i], now))
		}
		for i := range chargers {
			states[i], _ = chargers[i].Advance(states[i], power[i], next-now)
		}
		now = next
	}
	fmt.Printf("%.1f kWh missing\n", states[1].Unserved)
	// Output:
	// 0.00 h: 7.2 and 0.0 kW
	// 1.00 h: 5.0 and 5.0 kW
	// 1.56 h: 0.0 and 7.2 kW
	// 2.00 h: 0.0 and 0.0 kW
	// 8.00 h: 0.0 and 0.0 kW
	// 3.0 kWh missing
}
