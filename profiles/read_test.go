package profiles

import (
	"bytes"
	"fmt"
	"io"
	"io/fs"
	"slices"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"yearflow/sim/tables"
)

// hours writes rows at the given times, the value counting up from 0.
func hours(times ...string) string {
	b := "time,x [pu]\n"
	for i, t := range times {
		b += fmt.Sprintf("%s,%d\n", t, i)
	}
	return b
}

// Every way to write the same two series.
func TestFormsOfFiles(t *testing.T) {
	for name, file := range map[string]string{
		"plain":                     "time,a [pu],b [kW]\n2025-01-01T00:00,0.5,10\n2025-01-01T01:00,1.5,-20\n",
		"no last line end":          "time,a [pu],b [kW]\n2025-01-01T00:00,0.5,10\n2025-01-01T01:00,1.5,-20",
		"byte-order mark, CRLF":     "\xef\xbb\xbftime,a [pu],b [kW]\r\n2025-01-01 00:00,0.5,10\r\n2025-01-01 01:00,1.5,-20\r\n",
		"comments and blank lines":  "# made by hand\n\ntime,a [pu],b [kW]\n # first\n2025-01-01T00:00,0.5,10\n\n   \n2025-01-01T01:00,1.5,-20\n#end\n",
		"semicolons, commas":        "time;a [pu];b [kW]\n2025-01-01T00:00;0,5;10\n2025-01-01T01:00;1,5;-20,0\n",
		"semicolons, points":        "time;a [pu];b [kW]\n2025-01-01T00:00;0.5;10\n2025-01-01T01:00;1.5;-20\n",
		"tabs":                      "time\ta [pu]\tb [kW]\n2025-01-01T00:00\t0.5\t10\n2025-01-01T01:00\t1.5\t-20\n",
		"spaces":                    " time , a [pu] , b  [ kW ]\n 2025-01-01T00:00 , 0.5 , 10 \n2025-01-01T01:00 ,1.5, -20\n",
		"quotation marks":           "\"time\",\"a [pu]\",\"b [kW]\"\n\"2025-01-01T00:00\",\"0.5\", \"10\" \n2025-01-01T01:00,1.5,\"-20\"\n",
		"quoted decimal commas":     "time;\"a [pu]\";b [kW]\n2025-01-01T00:00;\"0,5\";10\n2025-01-01T01:00;1,5;-20\n",
		"upper and lower case":      "TIME,a [PU],b [KW]\n2025-01-01t00:00,0.5,10\n2025-01-01T01:00,1.5,-20\n",
		"offsets":                   "time,a [pu],b [kW]\n2025-01-01T00:00Z,0.5,10\n2024-12-31T18:00:00-07:00,1.5,-20\n",
		"other units":               "time,a [%],b [MW]\n2025-01-01T00:00,50,0.01\n2025-01-01T01:00,150,-0.02\n",
		"watts":                     "time,a [pu],b [W]\n2025-01-01T00:00,0.5,10000\n2025-01-01T01:00,1.5,-2e4\n",
		"note":                      "time,note,a [pu],b [kW]\n2025-01-01T00:00,\"a, b\",0.5,10\n2025-01-01T01:00,,1.5,-20\n",
		"separators at the end":     "time,a [pu],b [kW],,\n2025-01-01T00:00,0.5,10,,\n2025-01-01T01:00,1.5,-20,,\n,,,,\n",
		"plus signs, exponents":     "time,a [pu],b [kW]\n2025-01-01T00:00,+5e-1,1E1\n2025-01-01T01:00,1.5000000000000000000,-20.\n",
		"columns the other way":     "time,b [kW],a [pu]\n2025-01-01T00:00,10,0.5\n2025-01-01T01:00,-20,1.5\n",
		"semicolon inside a header": "time,a [pu],b [kW],\"c; d [V]\"\n2025-01-01T00:00,0.5,10,1\n2025-01-01T01:00,1.5,-20,1\n",
	} {
		set, err := Open(fstest.MapFS{"profiles/p.csv": {Data: []byte(file)}}, []Block{{Files: []string{"profiles/*.csv"}}})
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		a, b := series(t, set, "a"), series(t, set, "b")
		if !slices.Equal(a.values, []float64{0.5, 1.5}) || !slices.Equal(b.values, []float64{10, -20}) || a.Unit != "pu" || b.Unit != "kW" {
			t.Errorf("%s: got %v %s, %v %s", name, a.values, a.Unit, b.values, b.Unit)
		}
		start, end := a.Span()
		if start != instant(t, "2025-01-01T00:00:00Z") || end != start+2*hour {
			t.Errorf("%s: covers %s to %s", name, Format(start, nil), Format(end, nil))
		}
	}
}

func series(t *testing.T, s *Set, name string) *Series {
	t.Helper()
	one, ok := s.Lookup(name)
	if !ok {
		t.Fatalf("no series %q", name)
	}
	return one
}

func TestUnits(t *testing.T) {
	for _, c := range []struct {
		unit, base  string
		value, want float64
	}{
		{"pu", "pu", 1.5, 1.5}, {"%", "pu", 7, 0.07}, {"kW", "kW", 3, 3}, {"MW", "kW", 0.5, 500}, {"W", "kW", 1, 0.001},
		{"V", "V", 120, 120}, {"kV", "V", 12.47, 12470}, {"A", "A", 5, 5}, {"kA", "A", 0.5, 500},
		{"degC", "degC", 21, 21}, {"degF", "degC", 212, 100}, {"degF", "degC", -40, -40}, {"°C", "degC", 1, 1},
		{"W/m2", "W/m2", 800, 800}, {"kW/m2", "W/m2", 0.8, 800},
		{"USD/kWh", "USD/kWh", 0.12, 0.12}, {"EUR/MWh", "EUR/kWh", 90, 0.09},
	} {
		u, ok := unitOf(c.unit)
		if !ok || u.base != c.base || u.apply(c.value) != c.want {
			t.Errorf("%v %s: got %v %s, want %v %s", c.value, c.unit, u.apply(c.value), u.base, c.want, c.base)
		}
	}
	for _, bad := range []string{"", "mW", "mvar", "kVA", "kWh", "h", "ct/kWh", "usd/kWh", "USD/h", "p", "U/kWh", "EURO/kWh"} {
		if u, ok := unitOf(bad); ok {
			t.Errorf("[%s] is taken for %s", bad, u.base)
		}
	}
}

func TestKvarCompanion(t *testing.T) {
	set, err := Open(fstest.MapFS{"p.csv": {Data: []byte("time,a [kvar],a [MW],b [kW]\n2025-01-01,1,2,3\n2025-01-02,4,5,6\n")}}, []Block{{Files: []string{"p.csv"}}})
	if err != nil {
		t.Fatal(err)
	}
	a, b := series(t, set, "a"), series(t, set, "b")
	if !slices.Equal(set.Names(), []string{"a", "b"}) || b.Kvar != nil {
		t.Errorf("names %v, companion of b %v", set.Names(), b.Kvar)
	}
	if a.Unit != "kW" || a.values[0] != 2000 || a.Kvar == nil || a.Kvar.Unit != "kvar" || !slices.Equal(a.Kvar.values, []float64{1, 4}) {
		t.Errorf("a is %+v", a)
	}
	if want := (tables.Pos{File: "p.csv", Line: 1, Column: 3}); a.Pos != want {
		t.Errorf("a stands at %v, want %v", a.Pos, want)
	}
}

// Files that are wrong, the places and the words of their faults.
func TestFaults(t *testing.T) {
	denver := zone(t, "America/Denver")
	row := "2025-01-01T00:00,"
	next := "2025-01-01T01:00,1\n"
	for _, c := range []struct {
		name, file string
		want       []string // beginnings after the file's name; each must be met
	}{
		{"empty", "", []string{": is empty"}},
		{"comments alone", "# nothing\n\n", []string{": is empty"}},
		{"header alone", "time,x [pu]\n", []string{":1: there are no rows"}},
		{"one row", "time,x [pu]\n" + row + "1\n", []string{":2: there is only one row"}},
		{"UTF-16 little", "\xff\xfet\x00i\x00", []string{": is UTF-16"}},
		{"UTF-16 big", "\xfe\xff\x00t", []string{": is UTF-16"}},
		{"UTF-16 without mark", "t\x00i\x00m\x00e\x00", []string{":1: holds zero bytes"}},
		{"Latin-1", "time,K\xe4lte [degC]\n", []string{":1: holds a byte that is not UTF-8"}},
		{"PNG", "\x89PNG\r\n\x1a\n", []string{": is a PNG"}},
		{"spreadsheet", "PK\x03\x04abc", []string{": is a spreadsheet"}},
		{"carriage returns", "time,x [pu]\r2025-01-01,1\r", []string{":1: lines end with a carriage return"}},
		{"no time", "when,x [pu]\n", []string{":1:1: the first column must be `time`"}},
		{"no columns", "time\n2025-01-01\n", []string{":1: there is no column but `time`"}},
		{"no unit", "time,x\n", []string{`:1:2: column "x" has no unit; want "x [unit]"`}},
		{"unknown unit", "time,x [kWh]\n", []string{`:1:2: column "x": the unit "kWh" is not known`}},
		{"no name", "time,[pu],,y [pu]\n", []string{`:1:2: the column "[pu]" has no name`, ":1:3: the column has no name"}},
		{"name twice", "time,x [pu],x [kW]\n", []string{`:1:3: the name "x" stands twice, first in column 2`}},
		{"kvar alone", "time,x [kvar]\n", []string{`:1:2: "x" in [kvar] stands alone`}},
		{"kvar beside pu", "time,x [pu],x [kvar]\n", []string{`:1:3: "x" in [kvar] stands alone`}},
		{"header quote", "time,\"x [pu]\n", []string{":1:2: a quotation mark is not closed"}},
		{"empty cell", "time,x [pu]\n" + row + "\n" + next, []string{`:2:2: profile "x": is empty`}},
		{"NaN", "time,x [pu]\n" + row + "NaN\n" + next, []string{`:2:2: profile "x": want a number, got "NaN"`}},
		{"Inf", "time,x [pu]\n" + row + "-Inf\n" + next, []string{":2:2:"}},
		{"text", "time,x [pu]\n" + row + "n/a\n" + next, []string{`:2:2: profile "x": want a number, got "n/a"`}},
		{"hexadecimal", "time,x [pu]\n" + row + "0x10\n" + next, []string{":2:2:"}},
		{"underscore", "time,x [pu]\n" + row + "1_0\n" + next, []string{":2:2:"}},
		{"two points", "time,x [pu]\n" + row + "1.0.0\n" + next, []string{":2:2:"}},
		{"too large", "time,x [pu]\n" + row + "1e999\n" + next, []string{":2:2: profile \"x\": the number \"1e999\" is too large"}},
		{"decimal comma", "time,x [pu]\n" + row + "\"1,5\"\n" + next, []string{`:2:2: profile "x": want a number with a decimal point`}},
		{"thousands", "time,x [pu]\n" + row + "\"1,234.5\"\n" + next, []string{":2:2: profile \"x\": want a number with a decimal point"}},
		{"both marks", "time;x [pu]\n2025-01-01;1,5\n2025-01-02;1.5\n", []string{`:3:2: profile "x": want a number with a decimal comma as on line 2`}},
		{"commas not in columns", "time,x [pu]\n" + row + "1,5\n" + next, []string{":2:3: the row is longer than the header"}},
		{"short row", "time,x [pu],y [pu]\n" + row + "1\n2025-01-01T01:00,1,2\n", []string{":2: the row has 2 cells, the header has 3"}},
		{"very short row", "time,x [pu]\n2025-01-01T00:00\n" + next, []string{":2: the row has 1 cells, the header has 2"}},
		{"quote inside", "time,x [pu]\n" + row + "1\"\n" + next, []string{":2:2: a quotation mark stands inside a cell"}},
		{"text behind quote", "time,x [pu]\n" + row + "\"1\"2\n" + next, []string{":2:2: text stands behind"}},
		{"empty time", "time,x [pu]\n,1\n" + next, []string{":2:1: the time is empty"}},
		{"no ISO time", "time,x [pu]\n1/1/2025 00:00,1\n" + next, []string{":2:1: want a time such as"}},
		{"no such date", hours("2025-02-29", "2025-03-01"), []string{":2:1: no such date"}},
		{"gap", hours("2025-01-01T00:00", "2025-01-01T01:00", "2025-01-01T02:00", "2025-01-01T05:00", "2025-01-01T06:00"),
			[]string{":5:1: a gap: expected 2025-01-01T03:00:00-07:00 (the step is 1 h), found 2025-01-01T05:00:00-07:00; add the missing rows (2)"}},
		{"gap at the start", hours("2025-01-01T00:00", "2025-01-01T02:00", "2025-01-01T03:00", "2025-01-01T04:00"),
			[]string{":3:1: a gap: expected 2025-01-01T01:00:00-07:00"}},
		{"duplicate", hours("2025-01-01T00:00", "2025-01-01T01:00", "2025-01-01T01:00", "2025-01-01T02:00"),
			[]string{":4:1: 2025-01-01T01:00:00-07:00 stands twice, on line 3 too; expected 2025-01-01T02:00:00-07:00"}},
		{"backwards", hours("2025-01-01T00:00", "2025-01-01T01:00", "2025-01-01T00:30", "2025-01-01T02:00", "2025-01-01T03:00"),
			[]string{":4:1: the time goes back to 2025-01-01T00:30:00-07:00; expected 2025-01-01T02:00:00-07:00", ":5:1:"}},
		{"uneven", hours("2025-01-01T00:00", "2025-01-01T01:00", "2025-01-01T02:10", "2025-01-01T03:10", "2025-01-01T04:10"),
			[]string{":4:1: the step is not regular: expected 2025-01-01T02:00:00-07:00 (the step is 1 h), found 2025-01-01T02:10:00-07:00"}},
		{"missing day", hours("2025-01-01", "2025-01-02", "2025-01-04"), []string{":4:1: a gap: expected 2025-01-03T00:00:00-07:00"}},
		{"always the same time", hours("2025-01-01", "2025-01-01"), []string{":3:1: 2025-01-01T00:00:00-07:00 stands twice"}},
		{"skipped hour", hours("2025-03-09T00:00", "2025-03-09T01:00", "2025-03-09T02:00", "2025-03-09T03:00"),
			[]string{`:4:1: 2025-03-09T02:00:00 does not exist in America/Denver: the clock goes from 02:00 to 03:00; where a clock keeps standard time all year write the offset, or set zone = "Etc/GMT+7"`}},
		{"repeated hour once", hours("2025-11-02T00:00", "2025-11-02T01:00", "2025-11-02T02:00"),
			[]string{":4:1: a gap: expected 2025-11-02T01:00:00-07:00", "2025-11-02T01:00:00 occurs twice in America/Denver"}},
		{"days over a change", hours("2025-03-07", "2025-03-08", "2025-03-09", "2025-03-10", "2025-03-11"),
			[]string{":5:1: the step is not regular: expected 2025-03-10T01:00:00-06:00", "a local day has 23 or 25 hours"}},
	} {
		set, err := Open(fstest.MapFS{"p.csv": {Data: []byte(c.file)}}, []Block{{Files: []string{"p.csv"}, Zone: denver}})
		if err == nil {
			t.Errorf("%s: taken, %v", c.name, set.Names())
			continue
		}
		for _, want := range c.want {
			if strings.HasPrefix(want, ":") {
				want = "p.csv" + want
			}
			if !strings.Contains(err.Error(), want) {
				t.Errorf("%s: got\n%v\nwant %q", c.name, err, want)
			}
		}
		if n := len(err.(tables.Faults)); n > len(c.want) {
			t.Errorf("%s: %d faults, want %d:\n%v", c.name, n, len(c.want), err)
		}
	}
}

// Local times without offsets over both changes, and beginnings in a repeated hour.
func TestLocalTimes(t *testing.T) {
	for _, c := range []struct {
		zone, first string
		step        int64
		n           int
	}{
		{"America/Denver", "2025-11-01T00:00:00-06:00", hour, 72},
		{"America/Denver", "2025-11-01T00:00:00-06:00", 15 * minute, 288},
		{"America/Denver", "2025-11-01T22:30:00-06:00", 2 * hour, 12}, // meets only the second 01:30
		{"America/Denver", "2025-11-01T23:30:00-06:00", 2 * hour, 12}, // meets only the first
		{"America/Denver", "2025-03-08T00:00:00-07:00", 30 * minute, 144},
		{"America/Denver", "2025-11-02T01:00:00-06:00", hour, 10},
		{"America/Denver", "2025-11-02T01:00:00-07:00", hour, 10},
		{"America/Denver", "2025-11-02T01:30:00-07:00", minute, 100},
		{"Europe/Zurich", "2025-10-25T00:00:00+02:00", 10 * minute, 500},
		{"Europe/Zurich", "2025-03-29T00:00:00+01:00", hour, 72},
		{"Australia/Lord_Howe", "2025-04-05T00:00:00+11:00", 10 * minute, 300}, // the clock moves by half an hour
		{"Australia/Lord_Howe", "2025-10-04T00:00:00+10:30", 10 * minute, 300},
	} {
		z := zone(t, c.zone)
		first := instant(t, c.first)
		u := newTruth(make([]float64, c.n), first, c.step, c.step, Block{Zone: z})
		s := open(t, u.write(first, false), Block{Zone: z})[0]
		if start, end := s.Span(); start != first || end != first+int64(c.n)*c.step || s.StepLength() != c.step {
			t.Errorf("%+v: covers %s to %s by %v", c, Format(start, z), Format(end, z), time.Duration(s.StepLength()))
		}
	}
}

func TestFaultsAreCollected(t *testing.T) {
	fsys := fstest.MapFS{
		"profiles/a.csv": {Data: []byte("time,x [pu],y [pu]\n2025-01-01,?,?\n2025-01-02,1,?\n")},
		"profiles/b.csv": {Data: []byte("time,z [pu]\n2025-01-01,1\n2025-01-02,2\n")},
		"profiles/c.csv": {Data: []byte("time,z [pu]\n2025-01-01,1\n2025-01-02,2\n")},
		"extra.csv":      {Data: []byte("time,e\n")},
	}
	_, err := Open(fsys, []Block{
		{Pos: tables.Pos{File: "study.toml", Line: 3}, Files: []string{"profiles/*.csv", "missing.csv", "../up.csv", "[", "profiles"}, Stamped: "middle", Repeat: "month"},
		{Pos: tables.Pos{File: "study.toml", Line: 9}, Files: []string{"./extra.csv", "profiles/b.csv"}},
	})
	if err == nil {
		t.Fatal("no fault")
	}
	got := strings.Split(err.Error(), "\n")
	for i, want := range []string{
		"extra.csv:1:2: column \"e\" has no unit",
		"profiles: is a folder",
		"profiles/a.csv:2:2: profile \"x\"",
		"profiles/a.csv:2:3: profile \"y\"",
		"profiles/a.csv:3:3: profile \"y\"",
		"profiles/c.csv:1:2: the name \"z\" is taken by profiles/b.csv:1:2",
		"study.toml:3: stamped = \"middle\"",
		"study.toml:3: repeat = \"month\"",
		"study.toml:3: files \"missing.csv\": there is no such file",
		"study.toml:3: files \"../up.csv\": want a path below",
		"study.toml:3: files \"[\": not a pattern",
		"study.toml:9: profiles/b.csv is named by the block of profiles at study.toml:3 too",
	} {
		if i >= len(got) || !strings.HasPrefix(got[i], want) {
			t.Fatalf("fault %d: want %q in\n%v", i, want, err)
		}
	}
	if len(got) != 12 {
		t.Errorf("%d faults:\n%v", len(got), err)
	}
}

func TestManyFaultsAreCounted(t *testing.T) {
	file := "time,x [pu]\n"
	for i := range 1000 {
		file += Format(int64(i)*hour, nil) + ",?\n"
	}
	_, err := Open(fstest.MapFS{"p.csv": {Data: []byte(file)}}, []Block{{Files: []string{"p.csv"}}})
	faults, ok := err.(tables.Faults)
	if !ok || len(faults) != maxFaults+1 || !strings.Contains(err.Error(), "and 980 more faults") {
		t.Errorf("got %v", err)
	}
}

func TestNamesFilesAndSuggest(t *testing.T) {
	fsys := fstest.MapFS{
		"profiles/b.csv": {Data: []byte("time,house [pu],farm [pu]\n2025-01-01,1,1\n2025-01-02,2,2\n")},
		"profiles/a.csv": {Data: []byte("time,shop [pu]\n2025-01-01,1\n2025-01-02,2\n")},
		"weather.csv":    {Data: []byte("time,air [degC]\n2025-01-01,1\n2025-01-02,2\n")},
	}
	set, err := Open(fsys, []Block{{Files: []string{"weather.csv"}}, {Files: []string{"profiles/*.csv", "profiles/a.csv", "none/*.csv"}}})
	if err != nil {
		t.Fatal(err)
	}
	if got := set.Names(); !slices.Equal(got, []string{"air", "shop", "house", "farm"}) {
		t.Errorf("names %v", got)
	}
	if got := set.Files(); !slices.Equal(got, []string{"profiles/a.csv", "profiles/b.csv", "weather.csv"}) {
		t.Errorf("files %v", got)
	}
	for wrong, want := range map[string]string{"hose": "house", "House": "house", "shops": "shop", "f": "", "entirely other": "", "": ""} {
		if got := set.Suggest(wrong); got != want {
			t.Errorf("%q: suggested %q, want %q", wrong, got, want)
		}
	}
	if set, err := Open(fsys, nil); err != nil || len(set.Names()) != 0 {
		t.Errorf("no blocks: %v, %v", set, err)
	}
}

// endless is a file of one line without an end; it counts what is read of it.
type endless struct {
	read int
	fail error // after 10 MB
}

func (e *endless) Open(string) (fs.File, error) { return e, nil }
func (e *endless) Close() error                 { return nil }
func (e *endless) Stat() (fs.FileInfo, error)   { return unsized{}, nil }
func (e *endless) Read(b []byte) (int, error) {
	if e.fail != nil {
		return 0, e.fail
	}
	for i := range b {
		b[i] = '7'
	}
	e.read += len(b)
	return len(b), nil
}

// unsized is the little that is known of an endless file.
type unsized struct{ fs.FileInfo }

func (unsized) IsDir() bool { return false }
func (unsized) Size() int64 { return 0 }

func TestLongLineIsNotReadOn(t *testing.T) {
	e := &endless{}
	_, err := Open(e, []Block{{Files: []string{"p.csv"}}})
	if err == nil || !strings.Contains(err.Error(), "p.csv:1: the line is longer than 1048576 bytes") {
		t.Errorf("got %v", err)
	}
	if e.read > 4*maxLine {
		t.Errorf("%d bytes were read", e.read)
	}
	// In the middle of a file, too.
	data := append([]byte("time,x [pu]\n2025-01-01,1\n2025-01-02,"), bytes.Repeat([]byte{'1'}, 2*maxLine)...)
	_, err = Open(fstest.MapFS{"p.csv": {Data: data}}, []Block{{Files: []string{"p.csv"}}})
	if err == nil || !strings.Contains(err.Error(), "p.csv:3: the line is longer") || len(err.(tables.Faults)) != 1 {
		t.Errorf("got %v", err)
	}
}

func TestReadErrorsAreFaults(t *testing.T) {
	e := &endless{fail: io.ErrUnexpectedEOF}
	_, err := Open(e, []Block{{Files: []string{"p.csv"}}})
	if err == nil || err.Error() != "p.csv: cannot be read: unexpected EOF" {
		t.Errorf("got %v", err)
	}
}

// Rows and columns beyond the reader's blocks and buffers come back in their places.
func TestLongFile(t *testing.T) {
	data := manyColumns(7, 5000, minute)
	list := open(t, data, Block{})
	names, columns := slowRead(data)
	for i := range names {
		if !slices.Equal(list[i].values, columns[i]) {
			t.Errorf("%s differs", names[i])
		}
	}
}
