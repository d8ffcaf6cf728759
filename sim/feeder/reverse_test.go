package feeder

import (
	"strings"
	"testing"
)

const reverseHead = "regulator,phase,set [V],bandwidth [V],delay [s],ldc r [V],ldc x [V],reverse,reverse threshold [%],reverse set [V],reverse bandwidth [V],reverse delay [min],reverse ldc r [V],reverse ldc x [V]\n"

func reverseRows(rows string) []string {
	return []string{"feeder/regulator-settings.csv", reverseHead + rows}
}

// The reverse settings have the units of the forward ones; blanks are those of the
// forward sheet, and every blank that a mode has a use for is listed.
func TestReverseSettings(t *testing.T) {
	s := opened(t, with(small(), reverseRows("reg,A,122,2,30,3,4,Follow,1.5,124,3,1,-5,-6\nreg,B,122,2,30,3,4,stay,,,,,,\nreg,C,122,2,30,3,4,idle,,,,,,\n")...), "")
	var got []TapSettings
	for _, u := range s.Model.Regulators[0].Units {
		got = append(got, *u.Settings)
	}
	for i, want := range []TapSettings{
		{Reverse: ReverseFollow, ReverseThreshold: 0.015, ReverseSet: 124, ReverseBandwidth: 3, ReverseDelay: 60, ReverseR: -5, ReverseX: -6},
		{Reverse: ReverseStay, ReverseThreshold: 0.02, ReverseSet: 122, ReverseBandwidth: 2, ReverseDelay: 30, ReverseR: 3, ReverseX: 4},
		{Reverse: ReverseIdle, ReverseThreshold: 0.02, ReverseSet: 122, ReverseBandwidth: 2, ReverseDelay: 30, ReverseR: 3, ReverseX: 4},
	} {
		g := got[i]
		if g.Reverse != want.Reverse || g.ReverseThreshold != want.ReverseThreshold || g.ReverseSet != want.ReverseSet || g.ReverseBandwidth != want.ReverseBandwidth ||
			g.ReverseDelay != want.ReverseDelay || g.ReverseR != want.ReverseR || g.ReverseX != want.ReverseX {
			t.Errorf("row %d: %+v, want %+v", i, g, want)
		}
	}
	listed := map[string]string{}
	for _, a := range s.Model.Assumed {
		if strings.Contains(a.What, "reverse") {
			listed[a.What] = a.Pos.String() + " " + a.Value
		}
	}
	for what, want := range map[string]string{
		"regulator-settings: reverse threshold [%] (blank in 2 rows)": "feeder/regulator-settings.csv:3 2",
		"regulator-settings: reverse set [V] (blank in 1 row)":        "feeder/regulator-settings.csv:3 that of the forward sheet",
		"regulator-settings: reverse bandwidth [V] (blank in 1 row)":  "feeder/regulator-settings.csv:3 that of the forward sheet",
		"regulator-settings: reverse delay [s] (blank in 1 row)":      "feeder/regulator-settings.csv:3 that of the forward sheet",
		"regulator-settings: reverse ldc r [V] (blank in 1 row)":      "feeder/regulator-settings.csv:3 that of the forward sheet",
		"regulator-settings: reverse ldc x [V] (blank in 1 row)":      "feeder/regulator-settings.csv:3 that of the forward sheet",
	} {
		if listed[what] != want {
			t.Errorf("%s: listed as %q, want %q", what, listed[what], want)
		}
	}
	if len(listed) != 6 {
		t.Errorf("listed: %v", listed)
	}
	// A row for all stands for three.
	s = opened(t, with(small(), reverseRows("reg,all,122,2,30,,,follow,2,124,2,1,,0\n")...), "")
	n := 0
	for _, a := range s.Model.Assumed {
		if strings.Contains(a.What, "reverse ldc") {
			n++
			if a.What != "regulator-settings: reverse ldc r [V] (blank in 3 rows)" {
				t.Errorf("assumed: %v", a)
			}
		}
	}
	if n != 1 {
		t.Errorf("%d assumptions, want 1", n)
	}
	// Without a mode nothing is assumed.
	for _, a := range opened(t, small(), "").Model.Assumed {
		if strings.Contains(a.What, "reverse set") || strings.Contains(a.What, "reverse threshold") {
			t.Errorf("assumed without a mode: %v", a)
		}
	}
}

// A reverse setting that the mode has no use for is odd, one without a mode is a fault.
func TestReverseSettingsWithoutUse(t *testing.T) {
	s := opened(t, with(small(), reverseRows("reg,A,122,2,30,,,none,1,,,,,\nreg,B,122,2,30,,,neutral,,124,,,,\nreg,C,122,2,30,,,forward only,1,,,,,\n")...), "")
	var odd []string
	for _, w := range s.Warnings {
		if strings.Contains(w.Text, "reverse") {
			odd = append(odd, w.Error())
		}
	}
	if len(odd) != 2 || odd[0] != `feeder/regulator-settings.csv:2:9: regulator "reg" A: reverse threshold is not used: reverse is none` ||
		odd[1] != `feeder/regulator-settings.csv:3:10: regulator "reg" B: reverse set is not used: reverse is neutral; reverse only, follow and stay have a use for it` {
		t.Errorf("warnings: %q", odd)
	}
	// A case that sets the mode to none leaves the sheet as it is.
	base := with(small(), reverseRows("reg,all,122,2,30,,,follow,,124,,,,\n")...)
	s = opened(t, with(base, "cases/c/regulator-settings.csv", "regulator,phase,reverse\nreg,all,none\n"), "c")
	if got := s.Model.Regulators[0].Units[1].Settings.Reverse; got != ReverseNone || len(s.Warnings) == 0 {
		t.Errorf("the case has %v, warnings %v", got, s.Warnings)
	}
	for _, tt := range []struct{ row, at, want string }{
		{"reg,all,122,2,30,,,,,124,,,,", "2:10", `reverse set is given, but no reverse mode`},
		{"reg,all,122,2,30,,,,2,,,,,", "2:9", `reverse threshold is given, but no reverse mode`},
		{"reg,all,122,2,30,,,follow,200,,,,,", "2:9", `reverse threshold 200 % is beyond the primary rating`},
		{"reg,all,122,2,30,,,stay,,,,0.01,,", "2:12", `reverse delay is at least 1 s, got 0.6 s`},
	} {
		wantFault(t, with(small(), reverseRows(tt.row+"\n")...), "feeder/regulator-settings.csv:"+tt.at, tt.want)
	}
	if got := ReverseMode(9).String(); got != "ReverseMode(9)" {
		t.Errorf("an unknown mode is %q", got)
	}
}

func TestImplausibleReverseSettings(t *testing.T) {
	for row, want := range map[string]string{
		"follow,20,,,,,":       "reverse threshold is 20 %; usual: 1 to 5 %",
		"stay,,1.02,,,,":       "reverse set is 1.02 V; usual: 118 to 126 V",
		"stay,,,20,,,":         "reverse bandwidth is 20 V",
		"reverse only,,,,30,,": "reverse delay is 1800 s",
		"follow,,,,,40,":       "reverse ldc r is 40 V",
		"follow,,,,,,-40":      "reverse ldc x is 40 V",
		"follow,2,121,2,1,3,4": "",
		"idle,2,,,,,":          "",
	} {
		got := opened(t, with(small(), reverseRows("reg,all,122,2,30,,,"+row+"\n")...), "").Implausible()
		if want == "" && len(got) > 0 || want != "" && (len(got) != 1 || !strings.Contains(got[0].Text, want)) {
			t.Errorf("%s: %v, want %q", row, got, want)
		}
	}
}
