package profiles

import (
	"bytes"
	"fmt"
	"math"
	"strings"
	"time"
)

// A TMY3 file is a year of 8,760 hours put together from typical months of several
// years (S. Wilcox and W. Marion, Users manual for TMY3 data sets,
// NREL/TP-581-43156, 2008, section 3, recalled from memory). Its first line is
//
//	id,"name",state,hours from UTC,latitude,longitude,elevation in m
//
// its second names the columns. Every row holds the mean irradiance over the hour that
// ends at its stamp, 01:00 to 24:00 of local standard time all year, and the other
// weather at the stamp itself; −9900 is missing. There is no 29 February.
var tmy3Columns = [weatherColumns]string{"GHI (W/m^2)", "DNI (W/m^2)", "DHI (W/m^2)", "Dry-bulb (C)", "Wspd (m/s)"}

const (
	tmy3Date = "Date (MM/DD/YYYY)"
	tmy3Time = "Time (HH:MM)"

	yearHours = 8760
	// nominalYear is where a typical year stands: no leap year.
	nominalYear = 2001
)

// isTMY3 reports whether the second line of a file is the TMY3 header.
func isTMY3(start []byte) bool {
	_, second, ok := bytes.Cut(start, []byte("\n"))
	return ok && bytes.HasPrefix(bytes.ToLower(bytes.TrimLeft(second, "\" ")), []byte("date (mm/dd/yyyy)"))
}

func (r *weatherReader) readTMY3() {
	line, _ := r.lines.next()
	first := r.headerCells(line)
	if first == nil || !r.readStation(first) {
		return
	}
	line, ok := r.lines.next()
	if !ok {
		return
	}
	header := r.headerCells(line)
	if header == nil {
		return
	}
	date, clock := r.findTMY3(header)
	if len(r.faults) > 0 {
		return
	}
	r.typical, r.tmy3, r.step = true, true, hour
	r.start = dayNumber(nominalYear, 1, 1)*day - r.offset
	r.line = make([]int, yearHours)
	for c := range r.values {
		r.values[c] = make([]float64, yearHours)
		for k := range r.values[c] {
			r.values[c][k] = math.NaN()
		}
	}
	for {
		line, ok := r.nextRow()
		if !ok {
			break
		}
		r.readTMY3Row(line, date, clock)
	}
	switch {
	case r.lines.err != nil || r.lines.tooLong || len(r.faults) > 0:
		return
	case r.count == 0:
		r.fault(0, "there are no rows below the header; want %d hours", yearHours)
		return
	}
	r.toIntervals(r.values[temperature])
	r.toIntervals(r.values[wind])
}

// readStation reads the first line.
func (r *weatherReader) readStation(cells [][]byte) bool {
	if len(cells) < 7 {
		r.fault(0, "the first line of a TMY3 file has 7 cells: id, name, state, hours from UTC, latitude, longitude, elevation; got %d", len(cells))
		return false
	}
	var v [4]float64
	for i, name := range [...]string{"hours from UTC", "latitude", "longitude", "elevation"} {
		x, problem := r.marks.number(cells[3+i], r.lines.number)
		if problem != "" {
			r.fault(4+i, "%s: %s", name, problem)
		}
		v[i] = x
	}
	if len(r.faults) > 0 {
		return false
	}
	r.station = strings.TrimSpace(string(cells[1]) + " " + string(cells[2]))
	r.site, r.sited = Site{v[1], v[2], v[3]}, true
	if r.options.Site != nil {
		r.site = *r.options.Site
	}
	if problem := r.site.problem(); problem != "" {
		r.fault(5, "%s", problem)
	}
	if !(v[0] >= -12 && v[0] <= 14) || v[0]*4 != math.Round(v[0]*4) {
		r.fault(4, "the hours from UTC are %g; want -12 to 14, west negative", v[0])
		return false
	}
	r.offset = int64(v[0]*4) * hour / 4
	r.clock = newClock(time.FixedZone("standard time", int(r.offset/second)))
	return len(r.faults) == 0
}

// findTMY3 finds the columns that are used.
func (r *weatherReader) findTMY3(header [][]byte) (date, clock int) {
	at := func(name string) int {
		for i, cell := range header {
			if strings.EqualFold(string(cell), name) {
				return i
			}
		}
		return -1
	}
	date, clock = at(tmy3Date), at(tmy3Time)
	if clock < 0 {
		r.fault(0, "there is no column %q", tmy3Time)
	}
	for c, name := range tmy3Columns {
		r.column[c].at = at(name)
		r.column[c].unit = unit{"", 0, 1, 1}
		r.column[c].pos.File, r.column[c].pos.Line, r.column[c].pos.Column = r.name, r.lines.number, r.column[c].at+1
	}
	if r.column[ghi].at < 0 && (r.column[dni].at < 0 || r.column[dhi].at < 0) {
		r.fault(0, "there is no column %q", tmy3Columns[ghi])
	}
	return date, clock
}

func (r *weatherReader) readTMY3Row(line []byte, date, clock int) {
	cells, problem := splitCells(line, r.sep)
	if problem != "" {
		r.fault(len(cells)+1, "%s", problem)
		return
	}
	if date >= len(cells) || clock >= len(cells) {
		r.fault(0, "the row has %d cells and no time", len(cells))
		return
	}
	year, month, dom, ok := tmy3DateOf(cells[date])
	if !ok {
		r.fault(date+1, "want a date such as 07/31/1998 (month, day, year), got %q", shorten(string(cells[date])))
		return
	}
	h, ok := digits(cells[clock], 0, 2)
	if m, two := digits(cells[clock], 3, 2); !ok || !two || m != 0 || len(cells[clock]) != 5 || cells[clock][2] != ':' || h < 1 || h > 24 {
		r.fault(clock+1, "want the end of an hour, 01:00 to 24:00, got %q", shorten(string(cells[clock])))
		return
	}
	r.count++
	if month == 2 && dom == 29 {
		r.leapRows++
		return
	}
	k := int(dayNumber(nominalYear, month, dom)-dayNumber(nominalYear, 1, 1))*24 + h - 1
	if r.line[k] != 0 {
		r.fault(date+1, "%s %s stands twice, on line %d too", cells[date][:5], cells[clock], r.line[k])
		return
	}
	r.line[k] = r.lines.number
	r.seeYear(year)
	for c := range r.values {
		r.values[c][k] = r.weatherCell(cells, r.column[c], c)
	}
}

func tmy3DateOf(b []byte) (year, month, dom int, ok bool) {
	month, ok1 := digits(b, 0, 2)
	dom, ok2 := digits(b, 3, 2)
	year, ok3 := digits(b, 6, 4)
	if !ok1 || !ok2 || !ok3 || len(b) != 10 || b[2] != '/' || b[5] != '/' {
		return 0, 0, 0, false
	}
	ok = year >= 1800 && year <= 2200 && month >= 1 && month <= 12 && dom >= 1 && dom <= monthDays(year, month)
	return year, month, dom, ok
}

// toIntervals turns values at the end of each hour into means over it; the year is a
// ring. A missing value leaves both of its hours without a mean.
func (r *weatherReader) toIntervals(values []float64) {
	before := values[len(values)-1]
	for k, v := range values {
		values[k] = (before + v) / 2
		before = v
	}
}

// typicalAssumed says what a typical year is.
func (r *weatherReader) typicalAssumed() string {
	s := fmt.Sprintf("a typical year of months from %d to %d, laid over the period by month, day and hour of standard time; 29 February reads 28 February", r.years[0], r.years[1])
	if r.leapRows > 0 {
		s += fmt.Sprintf(" (%d rows of 29 February are left out)", r.leapRows)
	}
	return s
}
