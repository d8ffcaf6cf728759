package tables

import (
	"fmt"
	"io/fs"
	"strings"
	"testing"
	"testing/fstest"
	"time"

	"github.com/google/go-cmp/cmp"
)

// lineRow is a row with a cell of every kind.
type lineRow struct {
	Row    Row     `csv:"@"`
	Name   Text    `csv:"line" is:"key"`
	Phase  Text    `csv:"phase" is:"key" words:"A|B|C|ALL" upper:"yes"`
	Length Number  `csv:"length" unit:"km" is:"required,>0"`
	Heat   Number  `csv:"heat" unit:"degC"`
	Kind   Text    `csv:"kind" words:"overhead|buried cable" default:"overhead"`
	Steps  Integer `csv:"steps" is:">=0" default:"16"`
	Ganged Flag    `csv:"ganged"`
	Factor Number  `csv:"factor"`
}

const head = "line,phase,length [km],heat [degC],kind,steps,ganged,factor\n"

func readText(text string) ([]lineRow, Faults) {
	var faults Faults
	s := Read[lineRow](fstest.MapFS{"t.csv": {Data: []byte(text)}}, "t.csv", &faults)
	s.Keys(&faults)
	rows := s.Rows(&faults)
	return rows, faults
}

func TestReadDecodesEveryKindOfCell(t *testing.T) {
	rows, faults := readText("# a comment\n\n" + head + "a, b ,1.5,-40,Buried  CABLE,4,YES,2\n,,,,,,,\nb,C,2,,,,,\n")
	if len(faults) > 0 {
		t.Fatal(faults)
	}
	at := func(line, column int) Pos { return Pos{"t.csv", line, column} }
	got := rows[0]
	want := lineRow{Row{At: at(4, 0)}, Text{"a", true, at(4, 1)}, Text{"B", true, at(4, 2)}, Number{1.5, true, at(4, 3)}, Number{-40, true, at(4, 4)},
		Text{"buried cable", true, at(4, 5)}, Integer{4, true, at(4, 6)}, Flag{true, true, at(4, 7)}, Number{2, true, at(4, 8)}}
	if d := cmp.Diff(want, got); d != "" {
		t.Errorf("first row (-want +got):\n%s", d)
	}
	b := rows[1]
	if b.Kind.Value != "overhead" || b.Kind.Given || b.Steps.Value != 16 || b.Ganged.Value || b.Heat.Given || b.Heat.Value == b.Heat.Value {
		t.Errorf("blank cells of the second row: %+v", b)
	}
	if b.Row.At != at(6, 0) {
		t.Errorf("the second row stands at %v, want line 6", b.Row.At)
	}
}

// Conversions that are exact in the definition of the units.
func TestUnitsConvertExactly(t *testing.T) {
	for _, tt := range []struct {
		unit, to, cell string
		want           float64
	}{
		{"ft", "km", "5280", 1.609344}, // the international mile
		{"mi", "km", "1", 1.609344},
		{"m", "km", "300", 0.3},
		{"in", "m", "1", 0.0254},
		{"mil", "in", "1000", 1},
		{"ft", "m", "1", 0.3048},
		{"ohm/mi", "ohm/km", "1.609344", 1},
		{"ohm/kft", "ohm/km", "0.3048", 1},
		{"ohm/kft", "ohm/mi", "1", 5.28},
		{"uS/mi", "uS/km", "1.609344", 1},
		{"uS/kft", "uS/km", "0.3048", 1},
		{"V", "kV", "480", 0.48},
		{"MW", "kW", "1.5", 1500},
		{"W", "kW", "55", 0.055},
		{"MVA", "kVA", "0.5", 500},
		{"Mvar", "kvar", "-0.3", -300},
		{"MWh", "kWh", "2", 2000},
		{"kA", "A", "0.6", 600},
		{"min", "s", "1.5", 90},
		{"h", "s", "1", 3600},
		{"%", "pu", "5", 0.05},
		{"pu", "pu", "0.07", 0.07},
		{"degF", "degC", "212", 100},
		{"degF", "degC", "-40", -40},
		{"degC", "degC", "21.5", 21.5},
	} {
		d, to, ok := dimensionOf(tt.to)
		if !ok {
			t.Fatalf("no unit %q", tt.to)
		}
		from, ok := d.find(tt.unit)
		if !ok {
			t.Errorf("%s does not turn into %s", tt.unit, tt.to)
			continue
		}
		c := column{kind: number, unit: tt.to}
		got, err := c.cell(tt.cell, convert(from, to), false)
		if want := fmt.Sprint(tt.want); err != nil || got != want {
			t.Errorf("%s %s = %s %s, %v; want %s", tt.cell, tt.unit, got, tt.to, err, want)
		}
	}
}

func TestUnitCapitalsMayDifferButNotMegaAndMilli(t *testing.T) {
	for _, tt := range []struct {
		name string
		want bool
	}{{"kw", true}, {"KW", true}, {"MW", true}, {"mW", false}, {"mw", false}} {
		d, _, _ := dimensionOf("kW")
		if _, ok := d.find(tt.name); ok != tt.want {
			t.Errorf("unit %q: taken %v, want %v", tt.name, ok, tt.want)
		}
	}
}

func TestReadFaults(t *testing.T) {
	row := "a,A,1,,,,,\n"
	long := strings.Repeat("x", maxLine+1)
	for _, tt := range []struct{ name, text, want string }{
		{"unit missing", "line,phase,length\na,A,1\n", `t.csv:1:3: column length: its unit is missing; want [ft], [m], [km], [mi], [in] or [mil]`},
		{"unit unknown", "line,phase,length [yd]\na,A,1\n", `t.csv:1:3: column length: unknown unit [yd]; want [ft], [m], [km], [mi], [in] or [mil]`},
		{"unit of another dimension", "line,phase,length [kV]\na,A,1\n", `t.csv:1:3: column length: [kV] is a unit of voltage; want [ft], [m], [km], [mi], [in] or [mil] (length)`},
		{"unit on a plain column", "line,phase,length [m],factor [pu]\na,A,1,1\n", `t.csv:1:4: column factor: takes no unit, got [pu]`},
		{"bracket left open", "line,phase,length [m\na,A,1\n", `t.csv:1:3: header "length [m": want name or name [unit]`},
		{"column unknown", "line,phase,lenght [m],length [m]\na,A,1,1\n", `t.csv:1:3: unknown column "lenght"; did you mean "length"?`},
		{"column twice", "line,phase,length [m],Length [ft]\na,A,1,1\n", `t.csv:1:4: column "length" stands here twice, first as column 3`},
		{"column without name", "line,phase,,length [m]\na,A,,1\n", `t.csv:1:3: the column has no name`},
		{"column missing", "line,phase\na,A\n", `t.csv:1: column length [km] is missing`},
		{"remove in a base table", "line,phase,length [m],remove\na,A,1,yes\n", `t.csv:1:4: column remove belongs to a case's tables; here, take the row out`},
		{"cell blank", head + "a,A,,,,,,\n", `t.csv:2:3: column length [km]: the cell is blank; it needs a value`},
		{"key blank", head + ",A,1,,,,,\n", `t.csv:2:1: column line: the cell is blank; it is needed to name the row`},
		{"key twice", head + row + "\n" + "a,a,2,,,,,\n", `t.csv:4:1: line, phase "a, A" stands in line 2 already`},
		{"word", head + "a,A,1,,overhad,,,\n", `t.csv:2:5: column kind: "overhad" is not one of overhead, buried cable; did you mean "overhead"?`},
		{"flag", head + "a,A,1,,,,maybe,\n", `t.csv:2:7: column ganged: "maybe" is not one of yes, no`},
		{"text for a number", head + "a,A,x1,,,,,\n", `t.csv:2:3: column length [km]: want a number, got "x1"`},
		{"NaN", head + "a,A,NaN,,,,,\n", `want a number, got "NaN"`},
		{"Inf", head + "a,A,1,-Inf,,,,\n", `want a number, got "-Inf"`},
		{"hexadecimal", head + "a,A,0x1p3,,,,,\n", `want a number, got "0x1p3"`},
		{"underscore", head + "a,A,1_000,,,,,\n", `want a number, got "1_000"`},
		{"too large", head + "a,A,1e400,,,,,\n", `want a number, got "1e400"`},
		{"thousands", head + "a,A,\"1,234\",,,,,\n", `a decimal comma is taken only in files separated by semicolons`},
		{"not above zero", head + "a,A,0,,,,,\n", `t.csv:2:3: column length [km]: must be above 0, got 0`},
		{"negative", head + "a,A,1,,,-1,,\n", `t.csv:2:6: column steps: must not be negative, got -1`},
		{"not whole", head + "a,A,1,,,1.5,,\n", `t.csv:2:6: column steps: want a whole number, got 1.5`},
		{"row short", head + "a,A,1\n", `t.csv:2: the row has 3 cells, the header 8: write blank cells too`},
		{"row long", head + "a,A,1,,,,,,surplus\n", `t.csv:2:9: the row has more cells than the header (8)`},
		{"quote inside", head + "a\"b,A,1,,,,,\n", `t.csv:2: a quotation mark stands inside a cell or is not closed`},
		{"control character", head + "a\x1fb,A,1,,,,,\n", `t.csv:2:1: holds a control character`},
		{"empty", "", `t.csv: is empty; want a header with the names of the columns`},
		{"comments alone", "# nothing\n\n", `t.csv: is empty`},
		{"tabs", "line\tphase\tlength [m]\na\tA\t1\n", `t.csv:1: is separated by tabs; separate the cells by commas or semicolons`},
		{"zero bytes", head + "a,A\x00,1,,,,,\n", `t.csv:2: holds zero bytes: the file is binary or UTF-16; save it as CSV in UTF-8`},
		{"UTF-16", "\xff\xfel\x00i\x00", `t.csv: is UTF-16; save it as CSV in UTF-8`},
		{"Latin-1", head + "caf\xe9,A,1,,,,,\n", `t.csv:2: holds a byte that is not UTF-8`},
		{"PNG", "\x89PNG\r\n\x1a\n", `t.csv: is a PNG image, not a table`},
		{"spreadsheet", "PK\x03\x04...", `t.csv: is a spreadsheet or an archive; save it as CSV in UTF-8`},
		{"old spreadsheet", "\xd0\xcf\x11\xe0", `t.csv: is an old spreadsheet`},
		{"compressed", "\x1f\x8b\x08", `t.csv: is a compressed file`},
		{"PDF", "%PDF-1.7", `t.csv: is a PDF, not a table`},
		{"long line", head + long, `t.csv:2: the line is longer than 1048576 bytes: this is not a table`},
	} {
		t.Run(tt.name, func(t *testing.T) {
			_, faults := readText(tt.text)
			if len(faults) != 1 || !strings.Contains(faults[0].Error(), tt.want) {
				t.Errorf("got %d faults:\n%v\nwant one: %s", len(faults), faults, tt.want)
			}
		})
	}
}

func TestReadTakesWhatSpreadsheetsWrite(t *testing.T) {
	want, faults := readText(head + "a,A,1.5,20,,,,\nb,B,0.25,,,,,0.5\n")
	if len(faults) > 0 {
		t.Fatal(faults)
	}
	for name, text := range map[string]string{
		"byte order mark":         "\xef\xbb\xbf" + head + "a,A,1.5,20,,,,\nb,B,0.25,,,,,0.5\n",
		"CRLF":                    strings.ReplaceAll(head+"a,A,1.5,20,,,,\nb,B,0.25,,,,,0.5\n", "\n", "\r\n"),
		"semicolons and commas":   strings.ReplaceAll(head, ",", ";") + "a;A;1,5;20;;;;\nb;B;0,25;;;;;0,5\n",
		"semicolons and points":   strings.ReplaceAll(head, ",", ";") + "a;A;1.5;20;;;;\nb;B;0.25;;;;;0.5\n",
		"spaces and capitals":     " Line , PHASE,Length  [ km ],heat [degC],kind,steps,ganged,factor\n a , a, 1.5 ,20 ,,,,\nb,b,0.25,,,,, 0.5\n",
		"quotes":                  head + "\"a\",\"A\",\"1.5\",20,,,,\n\"b\",B,0.25,,,,,0.5\n",
		"another unit":            "line,phase,length [m],heat [degF],kind,steps,ganged,factor\na,A,1500,68,,,,\nb,B,250,,,,,0.5\n",
		"surplus separators":      head[:len(head)-1] + ",,\na,A,1.5,20,,,,,,\nb,B,0.25,,,,,0.5,,\n",
		"no end of the last line": strings.TrimSuffix(head+"a,A,1.5,20,,,,\nb,B,0.25,,,,,0.5\n", "\n"),
	} {
		got, faults := readText(text)
		if len(faults) > 0 {
			t.Errorf("%s: %v", name, faults)
			continue
		}
		if d := cmp.Diff(want, got, cmp.Comparer(func(a, b Number) bool {
			return a.Given == b.Given && a.At == b.At && (!a.Given || a.Value == b.Value)
		})); d != "" {
			t.Errorf("%s (-want +got):\n%s", name, d)
		}
	}
}

func TestReadLeavesNotesOut(t *testing.T) {
	rows, faults := readText("line,note,phase,length [km]\na,anything [at] all,B,2\n")
	if len(faults) > 0 || len(rows) != 1 || rows[0].Phase.At.Column != 3 || rows[0].Length.Value != 2 {
		t.Errorf("got %+v, %v", rows, faults)
	}
}

func TestFaultsBeyondTheLimitAreCounted(t *testing.T) {
	text := head + strings.Repeat("a,A,x,,,,,\n", maxFaults+50)
	var faults Faults
	Read[lineRow](fstest.MapFS{"t.csv": {Data: []byte(text)}}, "t.csv", &faults)
	if len(faults) != maxFaults+1 || !strings.Contains(faults[maxFaults].Text, "and 50 more faults in this table") {
		t.Errorf("got %d faults, the last: %v", len(faults), faults[len(faults)-1])
	}
}

// endless is a file of one line that never ends; it counts what is read of it.
type endless struct{ read int }

func (e *endless) Open(string) (fs.File, error) { return e, nil }
func (e *endless) Stat() (fs.FileInfo, error)   { return e, nil }
func (e *endless) Read(b []byte) (int, error) {
	for i := range b {
		b[i] = 'x'
	}
	e.read += len(b)
	return len(b), nil
}
func (e *endless) Close() error       { return nil }
func (e *endless) Name() string       { return "t.csv" }
func (e *endless) Size() int64        { return 200 << 20 }
func (e *endless) Mode() fs.FileMode  { return 0 }
func (e *endless) ModTime() time.Time { return time.Time{} }
func (e *endless) IsDir() bool        { return false }
func (e *endless) Sys() any           { return nil }

func TestLineOf200MegabytesIsLeftAfterOne(t *testing.T) {
	e := &endless{}
	var faults Faults
	Read[lineRow](e, "t.csv", &faults)
	if len(faults) != 1 || !strings.Contains(faults[0].Text, "longer than") {
		t.Errorf("got %v", faults)
	}
	if e.read > 2*maxLine {
		t.Errorf("%d bytes were read of a line that is too long after %d", e.read, maxLine)
	}
}

func TestNearest(t *testing.T) {
	for _, tt := range []struct {
		written string
		names   []string
		want    string
	}{
		{"n12", []string{"n1", "n2", "n123"}, "n1"},
		{"Main Streat", []string{"main street", "mill street"}, "main street"},
		{"xyz", []string{"abc", "def"}, ""},
		{"hihg", []string{"low", "high"}, "high"},
		{"ab", []string{"ba", "aa"}, "aa"},
	} {
		got, _ := Nearest(tt.written, tt.names)
		if got != tt.want {
			t.Errorf("Nearest(%q, %q) = %q, want %q", tt.written, tt.names, got, tt.want)
		}
	}
}
