package feeder

import (
	"fmt"

	"yearflow/sim/tables"
)

// ReverseMode says what a tap changer's control does while power flows back.
type ReverseMode uint8

// The reverse modes, by their words in the settings sheet.
const (
	ReverseNone    ReverseMode = iota // none: direction is ignored
	ForwardOnly                       // forward only
	ReverseOnly                       // reverse only
	ReverseIdle                       // idle
	ReverseFollow                     // follow
	ReverseNeutral                    // neutral
	ReverseStay                       // stay
)

var reverseModes = [...]string{"none", "forward only", "reverse only", "idle", "follow", "neutral", "stay"}

// String returns the word of the settings sheet.
func (m ReverseMode) String() string {
	if int(m) < len(reverseModes) {
		return reverseModes[m]
	}
	return fmt.Sprintf("ReverseMode(%d)", uint8(m))
}

// usesSettings tells whether the mode has a use for the reverse settings.
func (m ReverseMode) usesSettings() bool {
	return m == ReverseOnly || m == ReverseFollow || m == ReverseStay
}

// reverseColumn is one of the reverse settings.
type reverseColumn struct {
	name    string
	cell    tables.Number
	forward float64
	out     *float64
}

// reverseSettings reads the reverse mode of a row of the settings sheet. What a mode
// has a use for and the row leaves blank is that of the forward sheet, the threshold
// 2 % (common practice: 1 to 5 %).
func (b *builder) reverseSettings(s *regulatorSettingsRow, out *TapSettings, what string) {
	for m, word := range reverseModes {
		if s.Reverse.Value == word {
			out.Reverse = ReverseMode(m)
		}
	}
	out.ReverseAt = s.Reverse.At
	columns := []reverseColumn{
		{"reverse set", s.ReverseSet, out.Set, &out.ReverseSet},
		{"reverse bandwidth", s.ReverseBandwidth, out.Bandwidth, &out.ReverseBandwidth},
		{"reverse delay", s.ReverseDelay, out.Delay, &out.ReverseDelay},
		{"reverse ldc r", s.ReverseR, out.R, &out.ReverseR},
		{"reverse ldc x", s.ReverseX, out.X, &out.ReverseX},
	}
	for _, c := range columns {
		b.reverseColumn(s, out, c, what)
	}
	out.ReverseThreshold = defaultReverseThreshold
	switch t := s.Threshold; {
	case t.Given && b.idle(s, t, "reverse threshold", what):
	case t.Given && t.Value > 1:
		b.faults.Add(t.At, "%s: reverse threshold %s %% is beyond the primary rating of the current transformer; give 0 to 100 %%, a usual one is 2 %%", what, amount(100*t.Value))
	case t.Given:
		out.ReverseThreshold = t.Value
		if out.Reverse == ReverseNone {
			b.warnings.Add(t.At, "%s: reverse threshold is not used: reverse is none", what)
		}
	}
	if out.Reverse.usesSettings() && out.ReverseDelay < 1 && s.ReverseDelay.Given {
		b.faults.Add(s.ReverseDelay.At, "%s: reverse delay is at least 1 s, got %s s", what, amount(out.ReverseDelay))
	}
}

// defaultReverseThreshold is the share of the primary rating of the current
// transformer beyond which current is flow.
const defaultReverseThreshold = 0.02

func (b *builder) reverseColumn(s *regulatorSettingsRow, out *TapSettings, c reverseColumn, what string) {
	*c.out = c.forward
	switch {
	case c.cell.Given && b.idle(s, c.cell, c.name, what):
	case c.cell.Given:
		*c.out = c.cell.Value
		if !out.Reverse.usesSettings() {
			b.warnings.Add(c.cell.At, "%s: %s is not used: reverse is %s; reverse only, follow and stay have a use for it", what, c.name, out.Reverse)
		}
	}
}

// assumeReverse lists what a mode has a use for and its row leaves blank.
func (b *builder) assumeReverse(s *regulatorSettingsRow, mode ReverseMode) {
	if mode != ReverseNone && !s.Threshold.Given {
		b.assumeMany(s.Row.At, "regulator-settings: reverse threshold [%]", amount(100*defaultReverseThreshold))
	}
	for _, c := range []struct {
		what string
		cell tables.Number
	}{{"reverse set [V]", s.ReverseSet}, {"reverse bandwidth [V]", s.ReverseBandwidth}, {"reverse delay [s]", s.ReverseDelay},
		{"reverse ldc r [V]", s.ReverseR}, {"reverse ldc x [V]", s.ReverseX}} {
		if mode.usesSettings() && !c.cell.Given {
			b.assumeMany(s.Row.At, "regulator-settings: "+c.what, "that of the forward sheet")
		}
	}
}

// idle tells of a reverse setting in a row that names no mode.
func (b *builder) idle(s *regulatorSettingsRow, cell tables.Number, name, what string) bool {
	if s.Reverse.Given {
		return false
	}
	b.faults.Add(cell.At, "%s: %s is given, but no reverse mode: write none, forward only, reverse only, idle, follow, neutral or stay in the column reverse", what, name)
	return true
}
