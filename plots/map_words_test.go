package plots

import (
	"strings"
	"testing"
	"testing/fstest"
)

// TestMapCountsWhomTheStudyJudges: where every place is judged, the map does not say that they are those with customers.
func TestMapCountsWhomTheStudyJudges(t *testing.T) {
	for judge, want := range map[string]bool{"customers": true, "all": false} {
		m := small().write()
		m["run.json"] = &fstest.MapFile{Data: []byte(strings.Replace(string(m["run.json"].Data), `"judge":"customers"`, `"judge":"`+judge+`"`, 1))}
		figures, err := Draw(m, kept{}.out, Options{DPI: 40, Only: []string{"map"}})
		if err != nil {
			t.Fatal(err)
		}
		if got := strings.Contains(figures[0].Finding, "with customers"); got != want {
			t.Errorf("judge %s: %q", judge, figures[0].Finding)
		}
	}
}
