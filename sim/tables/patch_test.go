package tables

import (
	"strings"
	"testing"
	"testing/fstest"
)

// patched reads a table and lays another over it.
func patched(t *testing.T, base, patch string) ([]lineRow, *Sheet[lineRow], Faults) {
	t.Helper()
	fsys := fstest.MapFS{"case/t.csv": {Data: []byte(patch)}}
	if base != "" {
		fsys["t.csv"] = &fstest.MapFile{Data: []byte(base)}
	}
	var faults Faults
	all := func(r Record) []string {
		if r.Text("phase") == "ALL" {
			return []string{"A", "B", "C"}
		}
		return nil
	}
	s := Read[lineRow](fsys, "t.csv", &faults)
	s.Split("phase", all)
	s.Keys(&faults)
	p := ReadPatch[lineRow](fsys, "case/t.csv", &faults)
	p.Split("phase", all)
	p.Keys(&faults)
	s.Patch(p, &faults)
	return s.Rows(&faults), s, faults
}

func TestPatchReplacesFilledCellsOnly(t *testing.T) {
	rows, _, faults := patched(t, head+"a,A,1,20,overhead,4,yes,2\na,B,1,20,overhead,4,yes,2\n",
		"line,phase,factor,kind,length [m],heat [degC]\na,B,7,,500,-\n")
	if len(faults) > 0 {
		t.Fatal(faults)
	}
	a, b := rows[0], rows[1]
	if a.Factor.Value != 2 || a.Length.Value != 1 || a.Heat.Value != 20 {
		t.Errorf("the row that the case does not name changed: %+v", a)
	}
	if b.Factor.Value != 7 || b.Length.Value != 0.5 || b.Heat.Given || b.Kind.Value != "overhead" || b.Steps.Value != 4 {
		t.Errorf("patched row: %+v", b)
	}
	if want := (Pos{"case/t.csv", 2, 3}); b.Factor.At != want {
		t.Errorf("the patched cell stands at %v, want %v", b.Factor.At, want)
	}
	if want := (Pos{"t.csv", 3, 6}); b.Steps.At != want {
		t.Errorf("the cell that was left stands at %v, want %v", b.Steps.At, want)
	}
}

func TestPatchAddsAndRemoves(t *testing.T) {
	rows, s, faults := patched(t, head+"a,A,1,,,,,\nb,B,1,,,,,\n", "line,phase,length [m],remove\na,A,,yes\nc,C,300,\n")
	if len(faults) > 0 {
		t.Fatal(faults)
	}
	if len(rows) != 2 || rows[0].Name.Value != "b" || rows[1].Name.Value != "c" || rows[1].Length.Value != 0.3 {
		t.Errorf("got %+v", rows)
	}
	if len(s.Removed) != 1 || s.Removed[0] != "a, A" {
		t.Errorf("Removed: %q", s.Removed)
	}
}

func TestPatchExpandsAllBeforeItIsLaidOver(t *testing.T) {
	rows, _, faults := patched(t, head+"a,all,1,,,,,2\n", "line,phase,factor\na,B,9\n")
	if len(faults) > 0 {
		t.Fatal(faults)
	}
	got := ""
	for _, r := range rows {
		got += r.Phase.Value + string(rune('0'+int(r.Factor.Value)))
	}
	if got != "A2B9C2" {
		t.Errorf("got %s, want A2B9C2: a case changes one phase of a row for all", got)
	}
	rows, _, faults = patched(t, head+"a,A,1,,,,,2\na,B,1,,,,,3\na,C,1,,,,,4\n", "line,phase,factor\na,all,9\n")
	if len(faults) > 0 || len(rows) != 3 || rows[0].Factor.Value != 9 || rows[2].Factor.Value != 9 {
		t.Errorf("a case's row for all: %+v, %v", rows, faults)
	}
}

func TestPatchOfATableThatTheBaseLacks(t *testing.T) {
	rows, _, faults := patched(t, "", "line,phase,length [km]\na,A,2\n")
	if len(faults) > 0 || len(rows) != 1 || rows[0].Length.Value != 2 {
		t.Errorf("got %+v, %v", rows, faults)
	}
}

func TestPatchFaults(t *testing.T) {
	base := head + "main,A,1,,,,,\n"
	for _, tt := range []struct{ name, patch, want string }{
		{"removes what is not there", "line,phase,remove\nmian,A,yes\n", `case/t.csv:2:1: line, phase "mian, A" cannot be removed: it is not there; did you mean "main, A"?`},
		{"remove neither yes nor no", "line,phase,remove\nmain,A,si\n", `case/t.csv:2:3: column remove: want yes or no, got "si"`},
		{"new row without a needed column", "line,phase,factor\nnew,A,2\n", `case/t.csv:2:1: line, phase "new, A" is not in the table, and a new row needs length [km] too`},
		{"new row with a needed cell blank", "line,phase,length [m]\nnew,A,\n", `case/t.csv:2:3: column length [km]: the cell is blank; it needs a value`},
		{"needed cell emptied", "line,phase,length [m]\nmain,A,-\n", `case/t.csv:2:3: column length [km]: the cell is blank; it needs a value`},
		{"key column missing", "line,factor\nmain,2\n", `case/t.csv:1: column phase is missing`},
		{"key twice", "line,phase,factor\nmain,A,2\nmain,A,3\n", `case/t.csv:3:1: line, phase "main, A" stands in line 2 already`},
		{"wrong number", "line,phase,factor\nmain,A,x\n", `case/t.csv:2:3: column factor: want a number, got "x"`},
	} {
		t.Run(tt.name, func(t *testing.T) {
			_, _, faults := patched(t, base, tt.patch)
			if len(faults) != 1 || !strings.Contains(faults[0].Error(), tt.want) {
				t.Errorf("got %d faults:\n%v\nwant one: %s", len(faults), faults, tt.want)
			}
		})
	}
}

func TestDefaultsAreListedByColumn(t *testing.T) {
	_, s, faults := patched(t, head+"a,A,1,,,,,\nb,B,1,,buried cable,,,\n", "line,phase,steps\nb,B,3\n")
	if len(faults) > 0 {
		t.Fatal(faults)
	}
	got := s.Defaults()
	want := []Default{{"kind", "overhead", 1, Pos{"t.csv", 2, 0}}, {"steps", "16", 1, Pos{"t.csv", 2, 0}}}
	if len(got) != 2 || got[0] != want[0] || got[1] != want[1] {
		t.Errorf("got %+v, want %+v", got, want)
	}
}
