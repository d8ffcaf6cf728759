package profiles

import (
	"math"
	"strings"
	"testing"
	"time"
)

// TestMeterShape: a gap of fifteen weeks has no like days in its middle; the class's
// shape fills that, the books still close, and what like days filled stays.
func TestMeterShape(t *testing.T) {
	const gapFrom, gapTo = 30 * 24, 135 * 24
	values := veeValues(200, hour, 4)
	for k := gapFrom; k < gapTo; k++ {
		values[k] = math.NaN()
	}
	set, m := veeMeter(t, values, hour, MeterRules{}, MeterBlock{})
	checkBooks(t, set, m, values, hour)
	likely, mean := 0, 0
	for _, one := range set.Mended {
		switch one.Rule {
		case "gap, like days":
			likely += one.Count
		case "gap, mean day of the meter":
			mean += one.Count
		default:
			t.Errorf("rule %q", one.Rule)
		}
	}
	// Four weeks from each side have like days, not always to the day.
	if likely+mean != gapTo-gapFrom || likely < 40*24 || mean < 40*24 {
		t.Fatalf("%d by like days, %d by the mean day", likely, mean)
	}
	shape := make([]float64, len(values))
	for k := range shape {
		shape[k] = 3 * demand(veeStart+int64(k)*hour, 9)
	}
	old := append([]float32(nil), m.values...)
	list, err := set.Shape("A", shapeSeries(veeStart, hour, time.UTC, shape))
	if err != nil || len(list) == 0 {
		t.Fatal(list, err)
	}
	checkBooks(t, set, m, values, hour)
	own, class := 0.0, 0.0
	for k, v := range values {
		if v == v {
			own, class = own+v, class+shape[k]
		}
	}
	changed := make([]bool, len(values))
	for _, one := range list {
		if one.Rule != "gap, class shape" {
			t.Errorf("rule %q", one.Rule)
		}
		for k := m.at(one.From); k < m.at(one.To); k++ {
			changed[k] = true
			if want := shape[k] * own / class; math.Abs(m.Value(k)-want) > 1e-6*want {
				t.Fatalf("hour %d: %v, want %v", k, m.Value(k), want)
			}
		}
	}
	for k, v := range old {
		if !changed[k] && m.values[k] != v {
			t.Fatalf("hour %d was %v and is %v", k, v, m.values[k])
		}
	}
	if again, err := set.Shape("A", shapeSeries(veeStart, hour, time.UTC, shape)); err != nil || len(again) > 0 {
		t.Errorf("a second time: %v, %v", again, err)
	}
	if _, err := set.Shape("B", nil); err == nil || !strings.Contains(err.Error(), `there is no meter "B"`) {
		t.Errorf("got %v", err)
	}
}
