package plots

import (
	"testing"

	"gonum.org/v1/plot/vg"
)

// Words of the chart of limits keep clear of the limit's line, which stands at 100 points
// here: they stay where they end before it or begin behind it, and else stand behind it.
func TestWordsKeepClearOfTheLimit(t *testing.T) {
	for _, x := range []struct{ at, wide, want float64 }{
		{10, 30, 10}, {60, 35, 60}, {70, 30, 104}, {98, 30, 104}, {101, 30, 104}, {105, 30, 105}, {300, 30, 300},
	} {
		if got := besideLimit(vg.Length(x.at), vg.Length(x.wide), 100); got != vg.Length(x.want) {
			t.Errorf("words of %g at %g stand at %g, want %g", x.wide, x.at, got, x.want)
		}
	}
}
