package feeder

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"yearflow/sim/tables"
)

// functions reads the inverter functions. Their ranges are those of the standard and
// are checked where the functions are used, against the rating.
func (b *builder) functions() {
	for i := range b.t.functions {
		r := &b.t.functions[i]
		f := InverterFunction{Name: r.Name.Value, At: r.Row.At, CategoryA: r.Category.Value == "A", Reactive: r.Reactive.Value,
			PowerFactor: blank(r.PowerFactor), Constant: blank(r.Constant), Reference: blank(r.Reference),
			V:        [4]float64{blank(r.V1), blank(r.V2), blank(r.V3), blank(r.V4)},
			Q:        [4]float64{blank(r.Q1), blank(r.Q2), blank(r.Q3), blank(r.Q4)},
			P:        [3]float64{blank(r.P1), blank(r.P2), blank(r.P3)},
			VoltWatt: r.VoltWatt.Value, VoltWattV: [2]float64{blank(r.WattV1), blank(r.WattV2)}, VoltWattP2: blank(r.WattP2),
			Response: blank(r.Response), WattTime: blank(r.WattTime), Active: r.Priority.Value == "active", Limit: blank(r.Limit), AtNight: r.AtNight.Value}
		what := "function " + strconv.Quote(f.Name)
		unread := func(c tables.Number, name, of string) {
			if c.Given {
				b.faults.Add(c.At, "%s: %s belongs to %s; leave it blank, or name that function", what, name, of)
			}
		}
		if f.Reactive != "constant power factor" {
			unread(r.PowerFactor, "power factor", "constant power factor")
		}
		if x := f.PowerFactor; x == 0 || math.Abs(x) > 1 {
			b.faults.Add(r.PowerFactor.At, "%s: a power factor is between -1 and 1 and not 0, got %s", what, amount(x))
		}
		if f.Reactive != "constant reactive power" {
			unread(r.Constant, "reactive power", "constant reactive power")
		} else if !r.Constant.Given {
			b.faults.Add(r.Row.At, "%s: reactive power is blank; constant reactive power needs it", what)
		}
		if f.Reactive != "voltage-reactive power" {
			for k, c := range []tables.Number{r.V1, r.V2, r.V3, r.V4, r.Reference} {
				unread(c, []string{"v1", "v2", "v3", "v4", "reference voltage"}[k], "voltage-reactive power")
			}
		}
		if f.Reactive != "active power-reactive power" {
			for k, c := range []tables.Number{r.P1, r.P2, r.P3} {
				unread(c, []string{"p1", "p2", "p3"}[k], "active power-reactive power")
			}
		}
		b.assumeCurves(r, &f)
		if !f.VoltWatt {
			for k, c := range []tables.Number{r.WattV1, r.WattV2, r.WattP2, r.WattTime} {
				unread(c, []string{"active v1", "active v2", "active p2", "active response time"}[k], "voltage-active power, which is off")
			}
		}
		b.model.Functions = append(b.model.Functions, f)
	}
}

// assumeCurves tells which points and times are the defaults of the standard.
func (b *builder) assumeCurves(r *functionRow, f *InverterFunction) {
	missing := func(xs ...[]float64) bool {
		for _, x := range xs {
			for _, v := range x {
				if Unknown(v) {
					return true
				}
			}
		}
		return false
	}
	tell := func(what, table string) {
		b.assumeMany(r.Row.At, "inverter-functions: "+what, "those of category "+r.Category.Value+" (IEEE Std 1547-2018, "+table+")")
	}
	if f.Reactive == "voltage-reactive power" && missing(f.V[:], f.Q[:]) {
		tell("points of voltage-reactive power", "Table 8")
	}
	if f.Reactive == "active power-reactive power" && missing(f.P[:], f.Q[:3]) {
		tell("points of active power-reactive power", "Table 9")
	}
	if f.VoltWatt && missing(f.VoltWattV[:], []float64{f.VoltWattP2}) {
		tell("points of voltage-active power", "Table 10")
	}
	if !r.Response.Given && f.Reactive == "voltage-reactive power" {
		tell("open loop response time of voltage-reactive power", "Table 8: A 10 s, B 5 s")
	}
}

// blank is the value of a cell, NaN where it is blank.
func blank(c tables.Number) float64 {
	if !c.Given {
		return math.NaN()
	}
	return c.Value
}

// functionOf finds an inverter function; −1 where none is named.
func (b *builder) functionOf(c tables.Text, what string) (int, bool) {
	if !c.Given || c.Value == "" {
		return -1, true
	}
	var names []string
	for i := range b.model.Functions {
		if b.model.Functions[i].Name == c.Value {
			return i, true
		}
		names = append(names, b.model.Functions[i].Name)
	}
	b.faults.Add(c.At, "%s: there is no function %q in inverter-functions.csv%s", what, c.Value, tables.Hint(c.Value, names))
	return -1, false
}

// solar reads what makes a solar generator's output from weather.
func (b *builder) solar(r *generatorRow, what string) (*Solar, bool) {
	cells := []struct {
		name string
		cell tables.Number
	}{{"dc", r.DC}, {"tilt", r.Tilt}, {"azimuth", r.Azimuth}, {"losses", r.Losses}, {"temperature coefficient", r.Coefficient}, {"inverter efficiency", r.Efficiency}}
	given := false
	for _, c := range cells {
		given = given || c.cell.Given
	}
	if !given {
		return nil, true
	}
	if r.Kind.Value != "solar" {
		for _, c := range cells {
			if c.cell.Given {
				b.faults.Add(c.cell.At, "%s: %s belongs to kind solar, not to %s", what, c.name, r.Kind.Value)
			}
		}
		return nil, false
	}
	if r.Profile.Given || r.Real.Given {
		b.faults.Add(r.Row.At, "%s: its output is given twice, by dc and weather and by a profile or real [kW]; leave one of them", what)
		return nil, false
	}
	if !r.DC.Given || r.DC.Value <= 0 {
		b.faults.Add(r.Row.At, "%s: dc [kW] is blank or not above zero; output from weather needs it", what)
		return nil, false
	}
	s := &Solar{DC: r.DC.Value, Tilt: blank(r.Tilt), Azimuth: blank(r.Azimuth), Losses: blank(r.Losses), Coefficient: blank(r.Coefficient), Efficiency: blank(r.Efficiency)}
	return s, true
}

func (b *builder) batteries() {
	for i := range b.t.batteries {
		b.battery(&b.t.batteries[i])
	}
}

func (b *builder) battery(r *batteryRow) {
	what := "battery " + strconv.Quote(r.Name.Value)
	n, c, ps, pairs, ok := b.stand(r.Node, r.Phases, r.Connection, what)
	if r.Row.Bad {
		return
	}
	function, okFunction := b.functionOf(r.Function, what)
	s := Battery{Name: r.Name.Value, At: r.Row.At, Node: n, Connection: c, Phases: ps, Pairs: pairs, EnergyKWh: r.Energy.Value, KW: r.Power.Value,
		KVA: r.Rating.Value, RoundTrip: r.RoundTrip.Value, Reserve: r.Reserve.Value, Initial: r.Initial.Value, Dispatch: r.Dispatch.Value,
		Profile: r.Profile.Value, Target: blank(r.Target), Recharge: blank(r.Recharge), Weekdays: r.Days.Value == "weekdays", Function: function}
	if !r.Rating.Given {
		s.KVA = s.KW
	}
	if s.KVA < s.KW {
		b.faults.Add(r.Rating.At, "%s: rating %s kVA is below its power, %s kW", what, amount(s.KVA), amount(s.KW))
	}
	for _, share := range []struct {
		name string
		c    tables.Number
	}{{"reserve", r.Reserve}, {"initial", r.Initial}, {"round-trip efficiency", r.RoundTrip}} {
		if share.c.Value > 1 {
			b.faults.Add(share.c.At, "%s: %s is %s %%; it is at most 100 %%", what, share.name, amount(100*share.c.Value))
		}
	}
	b.unreadByDispatch(r, what)
	switch s.Dispatch {
	case "peak shaving":
		s.Watched = b.watched(r.Watched, r.Row.At, what, "peak shaving")
		if !r.Target.Given {
			b.faults.Add(r.Row.At, "%s: peak shaving needs target [kW]", what)
		} else if !r.Recharge.Given {
			s.Recharge = 0.75 * s.Target
			b.assume(r.Row.At, what+": recharge [kW]", amount(s.Recharge)+" (three quarters of its target)")
		} else if s.Recharge > s.Target {
			b.faults.Add(r.Recharge.At, "%s: recharge %s kW is above its target %s kW", what, amount(s.Recharge), amount(s.Target))
		}
	case "self-consumption":
		s.Watched = b.watched(r.Watched, r.Row.At, what, "self-consumption")
	case "profile":
		if !r.Profile.Given {
			b.faults.Add(r.Row.At, "%s: dispatch profile needs a profile, in kW or p.u. of power, positive delivered", what)
		} else {
			b.uses = append(b.uses, ProfileUse{r.Profile.Value, r.Profile.At, WantOutput})
		}
	case "schedule":
		s.Windows = b.windows(r, &s, what)
	}
	if ok && okFunction {
		b.model.Batteries = append(b.model.Batteries, s)
	}
}

// unreadByDispatch reports cells that another dispatch would read.
func (b *builder) unreadByDispatch(r *batteryRow, what string) {
	tell := func(at tables.Pos, name string, of ...string) {
		for _, d := range of {
			if r.Dispatch.Value == d {
				return
			}
		}
		b.faults.Add(at, "%s: %s belongs to dispatch %s, not to %s; leave it blank", what, name, strings.Join(of, " and "), r.Dispatch.Value)
	}
	if r.Target.Given {
		tell(r.Target.At, "target", "peak shaving")
	}
	if r.Recharge.Given {
		tell(r.Recharge.At, "recharge", "peak shaving")
	}
	if r.Watched.Given {
		tell(r.Watched.At, "watched section", "peak shaving", "self-consumption")
	}
	if r.Profile.Given {
		tell(r.Profile.At, "profile", "profile")
	}
	for _, c := range []struct {
		name string
		cell tables.Text
	}{{"charge from", r.ChargeFrom}, {"charge to", r.ChargeTo}, {"discharge from", r.DischargeFrom}, {"discharge to", r.DischargeTo}, {"days", r.Days}} {
		if c.cell.Given {
			tell(c.cell.At, c.name, "schedule")
		}
	}
}

func (b *builder) windows(r *batteryRow, s *Battery, what string) (out []DayWindow) {
	for _, w := range []struct {
		name     string
		from, to tables.Text
		kW       float64
	}{{"charge", r.ChargeFrom, r.ChargeTo, -s.KW}, {"discharge", r.DischargeFrom, r.DischargeTo, s.KW}} {
		if !w.from.Given && !w.to.Given {
			continue
		}
		out = append(out, DayWindow{b.clock(w.from, r.Row.At, what, w.name+" from"), b.clock(w.to, r.Row.At, what, w.name+" to"), w.kW})
	}
	if len(out) == 0 {
		b.faults.Add(r.Row.At, "%s: dispatch schedule needs charge from, charge to, discharge from and discharge to, as hh:mm", what)
	}
	for _, w := range out {
		if math.IsNaN(w.From + w.To) { // told already
			return out
		}
		if w.From == w.To {
			b.faults.Add(r.Row.At, "%s: a window from %s to %s holds nothing", what, hhmm(w.From), hhmm(w.To))
			return out
		}
	}
	if len(out) == 2 && (within(out[0], out[1].From) || within(out[1], out[0].From)) {
		b.faults.Add(r.Row.At, "%s: its windows overlap: it charges from %s to %s and discharges from %s to %s", what, hhmm(out[0].From), hhmm(out[0].To), hhmm(out[1].From), hhmm(out[1].To))
	}
	return out
}

// within tells whether a time of day, s, lies in a window, which may wrap past midnight.
func within(w DayWindow, at float64) bool {
	if w.From < w.To {
		return w.From <= at && at < w.To
	}
	return w.From <= at || at < w.To
}

// hhmm writes a time of day, s.
func hhmm(s float64) string { return fmt.Sprintf("%d:%02d", int(s)/3600, int(s)/60%60) }

func (b *builder) chargers() {
	limited := map[string]bool{}
	for i := range b.t.chargers {
		b.charger(&b.t.chargers[i])
		if r := &b.t.chargers[i]; r.GroupLimit.Given {
			limited[r.Group.Value] = true
		}
	}
	for i := range b.t.chargers {
		if r := &b.t.chargers[i]; r.Group.Given && !limited[r.Group.Value] {
			limited[r.Group.Value] = true // told once
			b.faults.Add(r.Group.At, "charger %q: group %q has no limit to share; give group limit [kW], or leave group blank", r.Name.Value, r.Group.Value)
		}
	}
}

func (b *builder) charger(r *chargerRow) {
	what := "charger " + strconv.Quote(r.Name.Value)
	n, c, ps, pairs, ok := b.stand(r.Node, r.Phases, r.Connection, what)
	if r.Row.Bad {
		return
	}
	s := Charger{Name: r.Name.Value, At: r.Row.At, Node: n, Connection: c, Phases: ps, Pairs: pairs, KW: r.Power.Value, PF: r.Factor.Value,
		EnergyKWh: r.Energy.Value, Arrival: b.clock(r.Arrival, r.Row.At, what, "arrival"), Depart: b.clock(r.Departure, r.Row.At, what, "departure"),
		Weekdays: r.Days.Value == "weekdays", Delayed: r.Charging.Value == "delayed", From: math.NaN(), To: math.NaN(),
		Group: r.Group.Value, GroupLimit: blank(r.GroupLimit)}
	if f := s.PF; f == 0 || math.Abs(f) > 1 {
		b.faults.Add(r.Factor.At, "%s: a power factor is between -1 and 1 and not 0, got %s", what, amount(f))
		ok = false
	}
	switch {
	case r.From.Given && r.To.Given && s.Delayed:
		s.From, s.To = b.clock(r.From, r.Row.At, what, "from"), b.clock(r.To, r.Row.At, what, "to")
	case (r.From.Given || r.To.Given) && !s.Delayed:
		b.faults.Add(r.Row.At, "%s: from and to are the hours of delayed charging; it is unmanaged", what)
	case r.From.Given != r.To.Given:
		b.faults.Add(r.Row.At, "%s: one of from and to is blank", what)
	}
	if stay := math.Mod(s.Depart-s.Arrival+86400, 86400); ok && s.Arrival != s.Depart && s.EnergyKWh > s.KW*stay/3600*(1+1e-9) {
		b.warnings.Add(r.Energy.At, "%s: %s kWh do not go into a stay of %s h at %s kW, which takes %s kWh: the rest of each stay is left unserved", what, amount(s.EnergyKWh), amount(stay/3600), amount(s.KW), amount(s.KW*stay/3600))
	}
	if r.GroupLimit.Given && !r.Group.Given {
		b.faults.Add(r.GroupLimit.At, "%s: group limit is given without a group", what)
	}
	for i := range b.model.Chargers {
		o := &b.model.Chargers[i]
		if s.Group != "" && o.Group == s.Group && !Unknown(o.GroupLimit) && !Unknown(s.GroupLimit) && o.GroupLimit != s.GroupLimit {
			b.faults.Add(r.GroupLimit.At, "%s: group %q has a limit of %s kW here and of %s kW at charger %q (%s)", what, s.Group, amount(s.GroupLimit), amount(o.GroupLimit), o.Name, o.At)
			ok = false
			break
		}
	}
	if ok {
		b.model.Chargers = append(b.model.Chargers, s)
	}
}
