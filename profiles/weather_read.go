package profiles

import (
	"bytes"
	"fmt"
	"io/fs"
	"math"
	"strings"
	"unicode/utf8"

	"yearflow/sim/tables"
)

// weatherReader reads one file of weather. Of the embedded reader it uses the lines,
// the clock, the decimal marks and the faults.
type weatherReader struct {
	reader
	options WeatherOptions

	column   [weatherColumns]weatherColumn
	time     int // column of the time
	place    [3]weatherColumn
	site     Site
	sited    bool
	station  string
	typical  bool // its months come from several years
	tmy3     bool
	moved    int64 // from a row's own time to its place in the typical year
	offset   int64
	start    int64
	unused   []string
	early    [][]float64 // rows until the step is known
	refused  bool        // no more rows are placed
	years    [2]int      // of a typical year, first and last
	values   [weatherColumns][]float64
	line     []int // of each interval, 0 where the row is missing
	leapRows int
	daylight []Daylight
	odd      [weatherColumns]oddValues
	assumed  []string
	warnings tables.Faults
}

// weatherColumn is a column's place in the row (from 0, −1: not there), its unit and
// its header.
type weatherColumn struct {
	at   int
	unit unit
	pos  tables.Pos
}

// open reads the file into values.
func (r *weatherReader) open(fsys fs.FS) {
	at := tables.Pos{File: r.name}
	switch r.options.Stamped {
	case "", "start", "end", "instant":
	default:
		r.faults.Add(at, "stamped = %q: want start, end or instant", r.options.Stamped)
		return
	}
	f, err := fsys.Open(r.name)
	if err != nil {
		r.faults.Add(at, "cannot be read: %v", reason(err))
		return
	}
	defer f.Close()
	if st, err := f.Stat(); err == nil && st.IsDir() {
		r.faults.Add(at, "is a folder; want a file")
		return
	}
	r.lines = newLines(f)
	r.readWeather()
	r.tellOdd()
	switch {
	case r.lines.err != nil:
		r.faults.Add(at, "cannot be read: %v", reason(r.lines.err))
	case r.lines.tooLong:
		at.Line = r.lines.number
		r.faults.Add(at, "the line is longer than %d bytes: this is not a table of weather", maxLine)
	}
	if r.untold > 0 {
		r.faults.Add(tables.Pos{File: r.name, Line: r.lines.number}, "and %d more faults in this file", r.untold)
	}
}

func (r *weatherReader) readWeather() {
	start := r.lines.peek(4096)
	if what := disguise(start); what != "" {
		r.faults.Add(tables.Pos{File: r.name}, "%s", what)
		return
	}
	if bytes.HasPrefix(start, []byte("\xef\xbb\xbf")) {
		r.lines.start += 3
	}
	if isTMY3(start) {
		r.readTMY3()
		return
	}
	header, ok := r.nextRow()
	if !ok {
		if r.lines.err == nil && !r.lines.tooLong {
			r.fault(0, "is empty; want a header such as time,ghi [W/m2],temperature [degC] and rows of values")
		}
		return
	}
	if !r.readWeatherHeader(header) {
		return
	}
	for {
		line, ok := r.nextRow()
		if !ok {
			break
		}
		r.readWeatherRow(line)
	}
	if r.lines.err == nil && !r.lines.tooLong {
		r.endRows()
	}
}

// weatherUnit returns the unit of a column of weather, in degC, m/s, W/m2, deg or m.
func weatherUnit(text string) (unit, bool) {
	switch strings.ToLower(text) {
	case "m/s":
		return unit{"m/s", 0, 1, 1}, true
	case "km/h":
		return unit{"m/s", 0, 1, 3.6}, true
	case "mph", "mi/h":
		return unit{"m/s", 0, 0.44704, 1}, true
	case "kn", "kt":
		return unit{"m/s", 0, 1852, 3600}, true
	case "k":
		return unit{"degC", -273.15, 1, 1}, true
	case "deg", "°":
		return unit{"deg", 0, 1, 1}, true
	case "m":
		return unit{"m", 0, 1, 1}, true
	case "ft":
		return unit{"m", 0, 0.3048, 1}, true
	}
	u, ok := unitOf(text)
	return u, ok && (u.base == "degC" || u.base == "W/m2")
}

var unitsFor = map[string]string{
	"W/m2": "[W/m2] or [kW/m2]", "degC": "[degC], [degF] or [K]", "m/s": "[m/s], [km/h], [mph] or [kn]", "deg": "[deg]", "m": "[m] or [ft]",
}

var weatherWords = []string{"time", "ghi", "dni", "dhi", "temperature", "wind", "latitude", "longitude", "elevation"}

const weatherHeader = "time,ghi [W/m2],dni [W/m2],dhi [W/m2],temperature [degC],wind [m/s],latitude [deg],longitude [deg]"

// headerCells cuts a header line and reports what is no header.
func (r *weatherReader) headerCells(line []byte) [][]byte {
	r.sep = separatorOf(line)
	if r.sep == ',' {
		r.marks.mark = '.'
	}
	switch {
	case bytes.IndexByte(line, 0) >= 0:
		r.fault(0, "holds zero bytes: the file is binary or UTF-16; save it as CSV in UTF-8")
		return nil
	case !utf8.Valid(line):
		r.fault(0, "holds a byte that is not UTF-8; save the file as CSV in UTF-8")
		return nil
	}
	cells, problem := splitCells(line, r.sep)
	if problem != "" {
		r.fault(len(cells)+1, "%s", problem)
		return nil
	}
	return cells
}

func (r *weatherReader) readWeatherHeader(line []byte) bool {
	cells := r.headerCells(line)
	if cells == nil {
		return false
	}
	r.time = -1
	for c := range r.place {
		r.place[c].at = -1
	}
	seen := make(map[string]int)
	for i, cell := range cells {
		name, text := string(cell), ""
		if open := bytes.LastIndexByte(cell, '['); open >= 0 && cell[len(cell)-1] == ']' {
			name, text = string(cell[:open]), strings.TrimSpace(string(cell[open+1:len(cell)-1]))
		}
		name = strings.ToLower(strings.Join(strings.Fields(name), " "))
		if name == "" || name == "note" {
			continue
		}
		if first, ok := seen[name]; ok {
			r.fault(i+1, "the column %q stands twice, first in column %d", shorten(name), first)
			continue
		}
		seen[name] = i + 1
		r.weatherColumn(i, name, text)
	}
	if len(r.faults) > 0 {
		return false
	}
	light := r.column[ghi].at >= 0 || r.column[dni].at >= 0 && r.column[dhi].at >= 0
	switch {
	case r.time < 0:
		r.fault(0, "there is no column `time`; a header reads: %s", weatherHeader)
	case !light:
		r.fault(0, "there is no irradiance: want ghi [W/m2], or dni and dhi; a header reads: %s", weatherHeader)
	case r.place[0].at >= 0 != (r.place[1].at >= 0):
		r.fault(0, "want both latitude [deg] and longitude [deg], or neither")
	case r.place[0].at < 0 && r.options.Site == nil:
		r.fault(0, "where is this weather? Add the columns latitude [deg] (north positive) and longitude [deg] (east positive)")
	}
	return len(r.faults) == 0
}

// weatherColumn takes one heading.
func (r *weatherReader) weatherColumn(i int, name, text string) {
	at := weatherColumn{at: i, pos: tables.Pos{File: r.name, Line: r.lines.number, Column: i + 1}}
	want, target := "", (*weatherColumn)(nil)
	switch name {
	case "time":
		r.time = i
		return
	case "ghi", "dni", "dhi":
		want = "W/m2"
	case "temperature":
		want = "degC"
	case "wind":
		want = "m/s"
	case "latitude":
		want, target = "deg", &r.place[0]
	case "longitude":
		want, target = "deg", &r.place[1]
	case "elevation":
		want, target = "m", &r.place[2]
	default:
		words := &Set{names: weatherWords}
		if near := words.Suggest(name); near != "" {
			r.fault(i+1, "the column %q is not known; did you mean %s?", shorten(name), near)
			return
		}
		r.unused = append(r.unused, shorten(name))
		return
	}
	u, ok := weatherUnit(text)
	switch {
	case text == "":
		r.fault(i+1, "column %q has no unit; want %s", name, unitsFor[want])
		return
	case !ok:
		r.fault(i+1, "column %q: the unit %q is not known; want %s", name, shorten(text), unitsFor[want])
		return
	case u.base != want:
		r.fault(i+1, "column %q cannot be in [%s]; want %s", name, shorten(text), unitsFor[want])
		return
	}
	at.unit = u
	if target == nil {
		for c, n := range weatherNames {
			if n == name {
				target = &r.column[c]
			}
		}
	}
	*target = at
}

func (r *weatherReader) readWeatherRow(line []byte) {
	cells, problem := splitCells(line, r.sep)
	if problem != "" {
		r.fault(len(cells)+1, "%s", problem)
		return
	}
	if r.time >= len(cells) {
		r.fault(0, "the row has %d cells and no time", len(cells))
		return
	}
	t, ok := r.weatherTime(cells[r.time])
	if !ok {
		return
	}
	if !r.sited && r.place[0].at >= 0 {
		r.readSite(cells)
	}
	var row [weatherColumns]float64
	for c := range row {
		row[c] = r.weatherCell(cells, r.column[c], c)
	}
	r.addRow(t, row[:])
}

// weatherTime reads a stamp and returns the start of its interval or, until the step is
// known, the stamp itself.
func (r *weatherReader) weatherTime(cell []byte) (int64, bool) {
	s, problem := parseStamp(cell)
	if problem != "" {
		r.fault(r.time+1, "%s, got %q", problem, shorten(string(cell)))
		return 0, false
	}
	t := s.civil - s.offset
	if !s.zoned {
		if t = r.resolve(s.civil); t == noTime {
			return 0, false
		}
	}
	return t, true
}

// weatherCell returns the value of a column in base units, NaN where it is missing.
func (r *weatherReader) weatherCell(cells [][]byte, col weatherColumn, c int) float64 {
	if col.at < 0 || col.at >= len(cells) || missingWord(cells[col.at]) {
		return math.NaN()
	}
	v, problem := r.marks.number(cells[col.at], r.lines.number)
	if problem != "" {
		r.fault(col.at+1, "%s: %s; leave the cell blank where the value is missing", weatherNames[c], problem)
		return math.NaN()
	}
	if missingNumber(v) {
		return math.NaN()
	}
	v = col.unit.apply(v)
	if problem := implausible(c, v); problem != "" {
		if r.odd[c].count++; r.odd[c].count == 1 {
			r.odd[c].line, r.odd[c].text = r.lines.number, problem
		}
		return math.NaN()
	}
	return v
}

// oddValues are the values of a column that no instrument gives: a wrong unit makes
// thousands of them, which are one mistake.
type oddValues struct {
	count, line int
	text        string // of the first
}

func (r *weatherReader) tellOdd() {
	for c, odd := range r.odd {
		switch {
		case odd.count == 1:
			r.faultAt(odd.line, r.column[c].at+1, "%s", odd.text)
		case odd.count > 1:
			r.faultAt(odd.line, r.column[c].at+1, "%s (and %d more values like it)", odd.text, odd.count-1)
		}
	}
}

// missingWord reports what loggers write for a value that is not there.
func missingWord(cell []byte) bool {
	switch strings.ToLower(string(cell)) {
	case "", "na", "n/a", "nan", "null", "none", "-", "--", "missing":
		return true
	}
	return false
}

// missingNumber reports the numbers that stand for a missing value in TMY3 (−9900) and
// elsewhere (−999, −9999, 9999, 99999).
func missingNumber(v float64) bool { return v <= -900 || v >= 9000 }

// implausible says why no instrument gives a value, or is blank.
func implausible(c int, v float64) string {
	switch {
	case c <= dhi && v < -10:
		return fmt.Sprintf("%s is %g W/m2: irradiance is not negative (a thermopile at night gives a few watts below zero, which are taken as 0)", weatherNames[c], v)
	case c <= dhi && v > 2000:
		return fmt.Sprintf("%s is %g W/m2: the sun gives no more than about 1400, the brightest cloud edge 2000; check the unit", weatherNames[c], v)
	case c == temperature && (v < -90 || v > 65):
		return fmt.Sprintf("temperature is %.4g degC, which no weather station has measured; is it in [degF] or [K]?", v)
	case c == wind && (v < 0 || v > 115):
		return fmt.Sprintf("wind is %.4g m/s, which no weather station has measured; check the unit", v)
	}
	return ""
}

// readSite takes the place of the first row.
func (r *weatherReader) readSite(cells [][]byte) {
	r.sited = true
	into := [...]*float64{&r.site.Latitude, &r.site.Longitude, &r.site.Elevation}
	for i, col := range r.place {
		if col.at < 0 {
			continue
		}
		if col.at >= len(cells) {
			r.fault(0, "the first row must say the latitude and longitude")
			return
		}
		v, problem := r.marks.number(cells[col.at], r.lines.number)
		if problem != "" {
			r.fault(col.at+1, "%s: %s", weatherWords[6+i], problem)
			continue
		}
		*into[i] = col.unit.apply(v)
	}
	if problem := r.site.problem(); problem != "" {
		r.fault(r.place[0].at+1, "%s", problem)
	}
}

// problem says what is wrong with a site, or is blank.
func (s Site) problem() string {
	switch {
	case !(math.Abs(s.Latitude) <= 90):
		return fmt.Sprintf("the latitude is %g; want -90 (south) to 90 (north) degrees", s.Latitude)
	case !(math.Abs(s.Longitude) <= 180):
		return fmt.Sprintf("the longitude is %g; want -180 (west) to 180 (east) degrees", s.Longitude)
	case !(s.Elevation >= -500 && s.Elevation <= 9000):
		return fmt.Sprintf("the elevation is %g m; want -500 to 9000", s.Elevation)
	}
	return ""
}
