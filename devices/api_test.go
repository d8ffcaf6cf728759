package devices

import "testing"

// The words of operations.csv, as the design lists them.
func TestReasonWords(t *testing.T) {
	want := []string{"", "band low", "band high", "limit high", "limit low", "control", "override low", "override high", "time", "reverse"}
	for i, w := range want {
		if got := Reason(i).String(); got != w {
			t.Errorf("Reason %d is %q, want %q", i, got, w)
		}
	}
	if got := Reason(99).String(); got != "Reason(99)" {
		t.Errorf("an unknown reason is %q", got)
	}
	for k, w := range map[CapacitorKind]string{CapacitorHeld: "held", CapacitorVoltage: "voltage", CapacitorKVAR: "kvar", CapacitorCurrent: "current",
		CapacitorPowerFactor: "power factor", CapacitorTemperature: "temperature", CapacitorTime: "time", 99: "CapacitorKind(99)"} {
		if got := k.String(); got != w {
			t.Errorf("kind %d is %q, want %q", uint8(k), got, w)
		}
	}
}
