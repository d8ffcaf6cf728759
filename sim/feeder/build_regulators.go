package feeder

import (
	"math"
	"strconv"
	"strings"

	"yearflow/sim/tables"
)

// regulatorPairs reads the connection of a regulator bank: the pairs of its units,
// or none for wye.
func regulatorPairs(s string) (RegulatorConnection, []Pair) {
	switch s {
	case "open-delta AB-CB":
		return RegulatorOpenDelta, []Pair{{A, B}, {C, B}}
	case "open-delta BC-AC":
		return RegulatorOpenDelta, []Pair{{B, C}, {A, C}}
	case "open-delta CA-BA":
		return RegulatorOpenDelta, []Pair{{C, A}, {B, A}}
	case "closed-delta":
		return RegulatorClosedDelta, []Pair{{A, B}, {B, C}, {C, A}}
	}
	return RegulatorWye, nil
}

func (b *builder) regulators() {
	rows := map[string][]*regulatorSettingsRow{}
	var banks []string
	for i := range b.t.regulators {
		banks = append(banks, b.t.regulators[i].Name.Value)
	}
	for i := range b.t.regulatorSettings {
		s := &b.t.regulatorSettings[i]
		rows[s.Regulator.Value] = append(rows[s.Regulator.Value], s)
		known := false
		for _, n := range banks {
			known = known || n == s.Regulator.Value
		}
		if !known && !b.t.removed["regulators"][s.Regulator.Value] {
			b.faults.Add(s.Regulator.At, "unknown regulator %q%s", s.Regulator.Value, tables.Hint(s.Regulator.Value, banks))
		}
	}
	for i := range b.t.regulators {
		b.regulator(&b.t.regulators[i], rows[b.t.regulators[i].Name.Value])
	}
}

func (b *builder) regulator(r *regulatorRow, rows []*regulatorSettingsRow) {
	what := "regulator " + strconv.Quote(r.Name.Value)
	from, to, ok := b.ends(r.From, r.To, what)
	ps, okPhases := b.phasesOf(r.Phases, what)
	if okPhases && ps[0].Leg() {
		b.faults.Add(r.Phases.At, "%s: a regulator stands on phases, not on the legs of a secondary", what)
		okPhases = false
	}
	if !ok || !okPhases {
		b.torn = true
		return
	}
	g := Regulator{Name: r.Name.Value, At: r.Row.At, From: from, To: to, Phases: ordered(ps), Ganged: r.Ganged.Value,
		PT: r.PT.Value, CT: r.CT.Value, Range: r.Range.Value, Steps: r.Steps.Value, TypeB: r.Type.Value == "B", Rating: r.Rating.Value,
		NoLoadLoss: r.NoLoad.Value, LoadLoss: r.LoadLoss.Value, Impedance: r.Impedance.Value}
	var pairs []Pair
	g.Connection, pairs = regulatorPairs(r.Connection.Value)
	if g.Connection != RegulatorWye {
		if len(ps) != 3 {
			b.faults.Add(r.Phases.At, "%s: a %s bank stands on phases ABC, got %s", what, r.Connection.Value, r.Phases.Value)
			b.torn = true
			return
		}
		for _, p := range pairs {
			g.Units = append(g.Units, RegulatorUnit{Phase: p[0], Pair: p})
		}
	} else {
		for _, p := range g.Phases {
			g.Units = append(g.Units, RegulatorUnit{Phase: p})
		}
	}
	if g.Range >= 0.5 {
		b.faults.Add(r.Range.At, "%s: range %s %% is none; a usual one is 10 %%", what, amount(100*g.Range))
	}
	if !r.Row.Bad && (g.LoadLoss > 0 || g.Impedance > 0) && Unknown(g.Rating) {
		b.faults.Add(r.Row.At, "%s: rating [A] is blank; load loss and impedance are given at the rating", what)
	}
	b.tapSettings(r, &g, rows, what)
	b.model.Regulators = append(b.model.Regulators, g)
	b.join(link{kind: "regulator", name: g.Name, at: g.At, from: from, to: to, fromPhases: g.Phases, toPhases: g.Phases, perPhase: true, galvanic: true})
}

// tapSettings puts the rows of the settings sheet on the units of a bank.
func (b *builder) tapSettings(r *regulatorRow, g *Regulator, rows []*regulatorSettingsRow, what string) {
	names := unitNames(r)
	written := map[tables.Pos]int{} // a row for all phases stands here once for each
	for _, s := range rows {
		written[s.Row.At]++
	}
	for _, s := range rows {
		u := -1
		for i := range g.Units {
			if g.Units[i].Name(g.Connection) == s.Phase.Value {
				u = i
			}
		}
		if u < 0 {
			b.faults.Add(s.Phase.At, "%s has no unit %q; its units are %s; all stands for each of them", what, s.Phase.Value, strings.Join(names, ", "))
			continue
		}
		whose := what
		if written[s.Row.At] == 1 {
			whose += " " + s.Phase.Value
		}
		if s.Row.Bad {
			g.Units[u].Settings = &TapSettings{At: s.Row.At}
			continue
		}
		g.Units[u].Settings = b.tapSetting(s, g, whose)
	}
	if len(rows) == 0 && !b.t.dropped["regulator-settings"] {
		b.warnings.Add(r.Row.At, "%s has no settings: it stays at tap 0", what)
		if g.Ganged {
			g.Units[0].Watched = true
		}
		return
	}
	watched := 0
	for i := range g.Units {
		if g.Ganged && g.Units[i].Settings != nil {
			g.Units[i].Watched = true
			watched++
		}
		if !g.Ganged && g.Units[i].Settings == nil {
			b.warnings.Add(r.Row.At, "%s %s has no settings: it stays at tap 0", what, names[i])
		}
	}
	if watched > 1 {
		b.faults.Add(rows[1].Phase.At, "%s is ganged and has one watched phase; %d rows of settings name one each", what, watched)
	}
}

func (b *builder) tapSetting(s *regulatorSettingsRow, g *Regulator, what string) *TapSettings {
	out := &TapSettings{At: s.Row.At, Set: s.Set.Value, Bandwidth: s.Bandwidth.Value, Delay: s.Delay.Value, TapTime: s.TapTime.Value,
		Integrate: s.Timer.Value == "integrate", R: s.R.Value, X: s.X.Value, Rotation: s.Rotation.Value,
		LimitHigh: s.High.Value, LimitLow: s.Low.Value, LimitMargin: s.Margin.Value,
		Held: s.Control.Value == "held", Tap: s.Tap.Value, HighestTap: g.Steps, LowestTap: -g.Steps}
	if s.Highest.Given {
		out.HighestTap = s.Highest.Value
	}
	if s.Lowest.Given {
		out.LowestTap = s.Lowest.Value
	}
	b.reverseSettings(s, out, what)
	b.assumeReverse(s, out.Reverse)
	if out.Delay < 1 {
		b.faults.Add(s.Delay.At, "%s: delay is at least 1 s, got %s s", what, amount(out.Delay))
	}
	if out.TapTime < 1 {
		b.faults.Add(s.TapTime.At, "%s: tap time is at least 1 s, got %s s", what, amount(out.TapTime))
	}
	for _, c := range []struct {
		name string
		cell tables.Integer
		tap  int
	}{{"highest tap", s.Highest, out.HighestTap}, {"lowest tap", s.Lowest, out.LowestTap}} {
		if c.tap > g.Steps || c.tap < -g.Steps {
			b.faults.Add(c.cell.At, "%s: %s %d is outside its %d steps each way", what, c.name, c.tap, g.Steps)
		}
	}
	if out.LowestTap > out.HighestTap {
		b.faults.Add(s.Lowest.At, "%s: lowest tap %d is above highest tap %d", what, out.LowestTap, out.HighestTap)
	} else if out.Tap < out.LowestTap || out.Tap > out.HighestTap {
		b.faults.Add(s.Tap.At, "%s: tap %d is outside %d to %d", what, out.Tap, out.LowestTap, out.HighestTap)
	}
	if out.LimitLow >= out.LimitHigh {
		b.faults.Add(s.Low.At, "%s: limit low %s V is not below limit high %s V", what, amount(out.LimitLow), amount(out.LimitHigh))
	}
	if !math.IsNaN(out.Rotation) && math.Abs(out.Rotation) > 360 {
		b.faults.Add(s.Rotation.At, "%s: ldc rotation %s is beyond a full turn", what, amount(out.Rotation))
	}
	return out
}
