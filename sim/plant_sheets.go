package sim

import (
	"time"

	"yearflow/devices"
	"yearflow/sim/feeder"
)

// or returns x, or a default where it was left blank.
func or(x, blank float64) float64 {
	if feeder.Unknown(x) {
		return blank
	}
	return x
}

// InverterSheet is the sheet of a function for one inverter of a rating in kVA; blanks are
// the defaults of its category.
func InverterSheet(f *feeder.InverterFunction, rating float64) devices.Inverter {
	s := devices.Inverter{Rating: rating, AtNight: f.AtNight, VoltWattOn: f.VoltWatt, Limit: or(f.Limit, 0),
		PowerFactor: or(f.PowerFactor, 0), Reactive: or(f.Constant, 0)}
	if f.CategoryA {
		s.Category = devices.CategoryA
	}
	if f.Active {
		s.Priority = devices.ActivePriority
	}
	switch f.Reactive {
	case "voltage-reactive power":
		s.Function = devices.VoltageReactive
		s.VoltVar = s.Category.VoltVar()
		if !feeder.Unknown(f.Reference) {
			s.VoltVar = s.VoltVar.Around(f.Reference)
		}
		for k := range f.V {
			s.VoltVar.V[k], s.VoltVar.Q[k] = or(f.V[k], s.VoltVar.V[k]), or(f.Q[k], s.VoltVar.Q[k])
		}
	case "active power-reactive power":
		s.Function = devices.ActiveReactive
		s.WattVar = s.Category.WattVar(0)
		for k := range f.P {
			s.WattVar.P[k], s.WattVar.Q[k] = or(f.P[k], s.WattVar.P[k]), or(f.Q[k], s.WattVar.Q[k])
		}
	case "constant reactive power":
		s.Function = devices.ConstantReactive
	}
	if f.VoltWatt {
		s.VoltWatt = devices.DefaultVoltWatt(0)
		s.VoltWatt.V1, s.VoltWatt.V2 = or(f.VoltWattV[0], s.VoltWatt.V1), or(f.VoltWattV[1], s.VoltWatt.V2)
		s.VoltWatt.P2 = or(f.VoltWattP2, s.VoltWatt.P2)
		s.VoltWatt.Response = ns(or(f.WattTime, 0))
	}
	s.Response = ns(or(f.Response, 0))
	return s
}

func batterySheet(b *feeder.Battery, zone *time.Location) devices.Battery {
	s := devices.Battery{Energy: b.EnergyKWh, Power: b.KW, RoundTrip: b.RoundTrip, Reserve: b.Reserve, Initial: b.Initial,
		Zone: zone, Target: or(b.Target, 0), Recharge: or(b.Recharge, 0)}
	switch b.Dispatch {
	case "peak shaving":
		s.Dispatch = devices.PeakShaving
	case "self-consumption":
		s.Dispatch = devices.SelfConsumption
	case "profile":
		s.Dispatch = devices.ByProfile
	}
	for _, w := range b.Windows {
		s.Windows = append(s.Windows, devices.Window{From: ns(w.From), To: ns(w.To), Weekdays: b.Weekdays, Power: w.KW})
	}
	return s
}

// chargerSheet lists the stays of a charger's vehicle over the period.
func chargerSheet(c *feeder.Charger, s *feeder.Settings) devices.Charger {
	out := devices.Charger{Power: c.KW, Zone: s.Period.Zone}
	if c.Delayed {
		out.Charging = devices.ByDeparture
		if !feeder.Unknown(c.From) {
			out.Charging, out.From, out.To = devices.CheapHours, ns(c.From), ns(c.To)
		}
	}
	h := devices.Habit{Arrive: ns(c.Arrival), Depart: ns(c.Depart), Weekdays: c.Weekdays, Energy: c.EnergyKWh, Power: c.KW}
	out.Sessions = h.Sessions(nil, s.Period.Start-before, s.Period.End, s.Period.Zone)
	return out
}
