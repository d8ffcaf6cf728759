package main

import (
	"strings"
	"testing"
)

// check warns of a reverse mode that runs away, in the study and in a case that brings
// it, once; a run of that case ends at the tap limit that check spoke of.
func TestCheckWarnsOfTheRunaway(t *testing.T) {
	smallStudy(t)
	write(t, "feeder/generators.csv", "generator,node,phases,kind,rating [kVA],real [kW]\nfield,mill,ABC,solar,1800,1500\n")
	write(t, "cases/tie/regulator-settings.csv", "regulator,phase,reverse\nR1,all,follow\n")
	const warning = `cases/tie/regulator-settings.csv:2:3: regulator "R1" A: reverse is follow, for a source at the other end, and none stands behind it; ` +
		`at 2025-07-01T00:00:00-05:00 generation behind it in its phase is 500 kW, load 180 kW (the least of the period: 180 kW)`
	out, _ := must(t, exitDone, "check", "--csv", "found.csv")
	contains(t, out, "tie: no errors\n    "+warning)
	if strings.Contains(out, "Odd, but possible") {
		t.Errorf("the study itself is odd:\n%s", out)
	}
	contains(t, read(t, "found.csv"), "warning,cases/tie/regulator-settings.csv,2,")
	out, _ = must(t, exitDone, "check", "--case", "tie")
	contains(t, out, "Odd, but possible (1)\n  "+warning)
	must(t, exitDone, "run", "--case", "tie")
	must(t, exitDone, "run")
	for line := range strings.Lines(read(t, "results/tie/duty.csv")) {
		if f := strings.Split(line, ","); f[0] == "R1" && f[8] != "-16" && f[9] != "16" {
			t.Errorf("the case runs to no limit: %s", line)
		}
	}
	for line := range strings.Lines(read(t, "results/base/duty.csv")) {
		if f := strings.Split(line, ","); f[0] == "R1" && (f[8] == "-16" || f[9] == "16") {
			t.Errorf("the study runs to a limit: %s", line)
		}
	}
}
