package profiles

import "math"

// addRow takes a row and its stamp. Rows that were left out become missing values;
// what is no whole number of steps after the row before is a fault.
func (r *weatherReader) addRow(t int64, row []float64) {
	at := rowTime{t, r.lines.number}
	r.count++
	r.before, r.last = r.last, at
	if r.step == 0 {
		r.first = append(r.first, at)
		r.early = append(r.early, append([]float64(nil), row...))
		if len(r.first) == stepRows {
			r.placeEarly()
		}
		return
	}
	r.placeRow(at, row)
}

// placeEarly finds the step and places the rows that were kept.
func (r *weatherReader) placeEarly() {
	r.step = commonStep(r.first)
	r.checked.t = noTime
	if r.step < second || r.step > longestWeatherStep {
		r.faultAt(r.first[0].line, r.time+1, "the step is %s; want a second to an hour, in which the sun moves by 15 degrees", stepText(r.step))
		r.refused = true
	}
	for i, at := range r.first {
		r.placeRow(at, r.early[i])
	}
	r.early = nil
}

func (r *weatherReader) placeRow(at rowTime, row []float64) {
	if r.refused {
		return
	}
	r.seeYear(yearOf(at.t))
	if len(r.line) == 0 {
		r.start = at.t
	} else {
		if at.t = r.joinYears(at.t); at.t == noTime {
			return
		}
		ahead := at.t - r.checked.t
		if ahead <= 0 || ahead%r.step != 0 || ahead > longestGap+r.step {
			// Told in the row's own year; the next row is held against this one, so that
			// one jump is one fault.
			r.checked.t -= r.moved
			r.irregular(rowTime{at.t - r.moved, at.line})
			r.checked = at
			return
		}
		absent := int(ahead/r.step - 1)
		if len(r.line)+absent > 4*r.count+int(longestGap/r.step) {
			r.faultAt(at.line, r.time+1, "most rows are missing: the step is %s and up to here there are %d rows for %d intervals", stepText(r.step), r.count, len(r.line)+absent+1)
			r.refused = true
			return
		}
		for range absent {
			r.putRow(nil, 0)
		}
	}
	r.checked = at
	r.putRow(row, at.line)
}

// joinYears returns where a row belongs in the year of the rows before: its own time,
// until month, day and hour go on while the year jumps. Typical years are put together so,
// month by month; a year that jumps within a month is a slip. A 29 February that the year
// does not have is noTime.
func (r *weatherReader) joinYears(t int64) int64 {
	const widestOffset = 15 * hour // of a clock from UTC
	ahead := t + r.moved - r.checked.t
	onward := ahead > 0 && ahead <= longestGap+r.step
	if onward && r.moved == 0 {
		return t
	}
	_, before, _ := civilDate(floorDiv(t-widestOffset, day))
	_, after, _ := civilDate(floorDiv(t+widestOffset, day))
	if !onward && before == after {
		return t + r.moved
	}
	_, month, dom := civilDate(floorDiv(t, day))
	for _, year := range [...]int{yearOf(r.checked.t), yearOf(r.checked.t) + 1} {
		if dom > monthDays(year, month) && r.moved != 0 {
			r.leapRows++
			return noTime
		}
		image := dayNumber(year, month, min(dom, monthDays(year, month)))*day + floorMod(t, day)
		if ahead := image - r.checked.t; ahead > 0 && ahead <= longestGap+r.step && ahead%r.step == 0 {
			r.moved = image - t
			r.typical = true
			return image
		}
	}
	return t + r.moved
}

func yearOf(t int64) int {
	year, _, _ := civilDate(floorDiv(t, day))
	return year
}

// seeYear keeps the first and the last year that is met.
func (r *weatherReader) seeYear(year int) {
	if r.years[0] == 0 {
		r.years = [2]int{year, year}
	}
	r.years = [2]int{min(r.years[0], year), max(r.years[1], year)}
}

// putRow appends an interval; a nil row is a missing one.
func (r *weatherReader) putRow(row []float64, line int) {
	for c := range r.values {
		v := math.NaN()
		if row != nil {
			v = row[c]
		}
		r.values[c] = append(r.values[c], v)
	}
	r.line = append(r.line, line)
}

// endRows closes the reading of rows.
func (r *weatherReader) endRows() {
	switch {
	case r.count == 0 && len(r.faults) == 0:
		r.fault(0, "there are no rows below the header")
		return
	case r.count < 2:
		if len(r.faults) == 0 {
			r.fault(0, "there is only one row; want at least two, since their distance is the step")
		}
		return
	case r.step == 0:
		r.placeEarly()
	}
	switch r.options.Stamped {
	case "end":
		r.start -= r.step
	case "instant":
		r.start -= r.step / 2
	}
	if r.options.Site != nil && r.place[0].at < 0 {
		r.site = *r.options.Site
		if problem := r.site.problem(); problem != "" {
			r.fault(0, "%s", problem)
		}
	}
	r.offset = meridianOffset(r.site)
}
