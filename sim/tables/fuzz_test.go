package tables

import (
	"bytes"
	"math"
	"testing"
	"testing/fstest"
)

// FuzzRead reads any bytes as a table and as a case's table. Whatever they are, there
// is no panic, every fault stands inside the file, and every number is finite.
func FuzzRead(f *testing.F) {
	for _, s := range []string{
		head + "a,A,1.5,20,overhead,4,yes,2\n",
		"\xef\xbb\xbfline;phase;length [ft]\r\na;B;1,5\r\n",
		"line,phase,length [m],remove\na,A,-,yes\n",
		head + "\"a,\"\"b\",all,1e-300,,,,,\n",
		"# only\n", "", "\x89PNG", "line,phase,length [degF]\n\"",
	} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		fsys := fstest.MapFS{"t.csv": {Data: data}}
		var faults Faults
		s := Read[lineRow](fsys, "t.csv", &faults)
		s.Keys(&faults)
		p := ReadPatch[lineRow](fsys, "t.csv", &faults)
		p.Keys(&faults)
		s.Patch(p, &faults)
		lines := bytes.Count(data, []byte("\n")) + 1
		for _, r := range s.Rows(&faults) {
			for _, n := range []Number{r.Length, r.Heat, r.Factor} {
				if n.Given && (math.IsNaN(n.Value) || math.IsInf(n.Value, 0)) {
					t.Errorf("number %v at %v", n.Value, n.At)
				}
			}
			if r.Row.At.Line < 1 || r.Row.At.Line > lines {
				t.Errorf("row at %v of %d lines", r.Row.At, lines)
			}
		}
		for _, x := range faults {
			if x.Pos.File != "t.csv" || x.Pos.Line > lines || x.Text == "" {
				t.Errorf("fault %v of a file with %d lines", x, lines)
			}
		}
	})
}
