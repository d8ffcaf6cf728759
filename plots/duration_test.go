package plots

import "testing"

// Voltages from line to line are a family of their own beside those to ground, one where
// their lowest and highest run together; alone they need no name.
func TestDurationFamilies(t *testing.T) {
	flat := func(phase string, lo, hi float64) phaseVoltages {
		return phaseVoltages{phase, []float64{lo, nan, lo}, []float64{hi, hi, nan}}
	}
	for _, tt := range []struct {
		name   string
		curves []phaseVoltages
		want   []string
	}{
		{"to ground", []phaseVoltages{flat("A", 0.98, 1.02), flat("B", 0.97, 1.03)}, []string{"highest", "lowest"}},
		{"pairs that run together", []phaseVoltages{flat("A", 0.98, 1.02), flat("AB", 1.000, 1.005)}, []string{"highest", "lowest", "line to line"}},
		{"pairs apart", []phaseVoltages{flat("A", 0.98, 1.02), flat("AB", 1.00, 1.01)}, []string{"highest", "lowest", "line to line, highest", "line to line, lowest"}},
		{"pairs alone", []phaseVoltages{flat("AB", 0.98, 1.02)}, []string{"highest", "lowest"}},
		{"nothing solved", []phaseVoltages{{"A", []float64{nan}, []float64{nan}}}, nil},
	} {
		t.Run(tt.name, func(t *testing.T) {
			got := families(tt.curves)
			if len(got) != len(tt.want) {
				t.Fatalf("got %d families, want %q", len(got), tt.want)
			}
			for i, f := range got {
				if f.name != tt.want[i] {
					t.Errorf("family %d is %q, want %q", i, f.name, tt.want[i])
				}
			}
		})
	}
}
