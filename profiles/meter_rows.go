package profiles

import (
	"fmt"
	"slices"

	"yearflow/sim/tables"
)

// reading is a value as it was read, in twelve bytes, since there are many. sec counts
// from 1970 UTC, so that it goes to 2106; a value that is missing is NaN.
type reading struct {
	sec, line uint32
	v         float32
}

// chunk is a part of a meter's readings, all of one file. Registers are kept to 48
// bits, as the sum of v and low, since what counts is their difference.
type chunk struct {
	file int32
	rows []reading
	low  []float32 // nil: not of registers
}

// put adds a reading; there is room.
func (c *chunk) put(sec uint32, line int, v float64, register bool) {
	high := float32(v)
	c.rows = append(c.rows, reading{sec, uint32(line), high})
	if register {
		c.low = append(c.low, float32(v-float64(high)))
	}
}

func (c *chunk) full() bool { return len(c.rows) == cap(c.rows) }

// channel is the readings of a meter's real or reactive power, in pieces that are
// never moved, in the order of files and rows.
type channel struct {
	chunks []chunk
	energy bool // kWh or kvarh, else kW or kvar
	seen   bool
	pos    tables.Pos
}

// store is a meter while it is read.
type store struct {
	name           string
	real, reactive channel
	block          *MeterBlock
}

// take takes a chunk, which is full or the last, and returns room for more.
func (c *channel) take(one chunk, register bool) chunk {
	if len(one.rows) > 0 {
		c.chunks = append(c.chunks, one)
	}
	size := min(max(16, 2*cap(one.rows)), 1024)
	next := chunk{file: one.file, rows: make([]reading, 0, size)}
	if register {
		next.low = make([]float32, 0, size)
	}
	return next
}

// merge joins the meters of all files, in their order.
func merge(contents []meterContent, faults *tables.Faults) []*store {
	var list []*store
	index := make(map[string]*store)
	for i := range contents {
		for _, s := range contents[i].stores {
			first, ok := index[s.name]
			if !ok {
				index[s.name] = s
				list = append(list, s)
				continue
			}
			if first.block.Values != s.block.Values && (first.block.Values == "register" || s.block.Values == "register") {
				faults.Add(s.real.pos, "meter %q has registers here and intervals at %s; give one of them another name", s.name, first.real.pos)
			}
			first.real.join(&s.real, s.name, faults)
			first.reactive.join(&s.reactive, s.name, faults)
		}
		contents[i].stores = nil
	}
	return list
}

func (c *channel) join(other *channel, name string, faults *tables.Faults) {
	switch {
	case !other.seen:
		return
	case !c.seen:
		*c = *other
		return
	case c.energy != other.energy:
		faults.Add(other.pos, "meter %q is given as energy per interval and as power, see %s; write all its files in one unit", name, c.pos)
	}
	c.chunks = append(c.chunks, other.chunks...)
}

// placed is a reading on its way to its place, with its file.
type placed struct {
	sec, line uint32
	file      int32
	v         float64
}

// ordered is a channel's readings in order of time, none twice.
type ordered struct {
	rows      []placed
	untidy    int // rows that did not stand in order
	repeated  int // rows that stood twice with one value
	conflicts []conflict
}

// conflict is a time that has two values; the later row is kept.
type conflict struct{ first, second placed }

// order sorts the readings and takes out repeated ones. It writes over o's rows.
func (o *ordered) order(c *channel) {
	o.rows, o.untidy, o.repeated, o.conflicts = o.rows[:0], 0, 0, o.conflicts[:0]
	last, tidy := uint32(0), true
	for _, piece := range c.chunks {
		for i, r := range piece.rows {
			if r.sec < last {
				o.untidy++
			}
			if r.sec <= last {
				tidy = false
			}
			last = r.sec
			v := float64(r.v)
			if piece.low != nil {
				v += float64(piece.low[i])
			}
			o.rows = append(o.rows, placed{r.sec, r.line, piece.file, v})
		}
	}
	if tidy {
		return
	}
	slices.SortStableFunc(o.rows, func(a, b placed) int {
		switch {
		case a.sec < b.sec:
			return -1
		case a.sec > b.sec:
			return 1
		}
		return 0
	})
	o.single()
}

// single keeps one reading of each time: a value before a missing one, and of two
// values the later.
func (o *ordered) single() {
	n := 0
	for _, r := range o.rows {
		if n == 0 || o.rows[n-1].sec != r.sec {
			o.rows[n] = r
			n++
			continue
		}
		kept := &o.rows[n-1]
		switch {
		case r.v != r.v || r.v == kept.v:
			o.repeated++
		case kept.v != kept.v:
			o.repeated++
			*kept = r
		default:
			o.conflicts = append(o.conflicts, conflict{*kept, r})
			*kept = r
		}
	}
	o.rows = o.rows[:n]
}

// trim takes missing values from both ends: the meter begins and ends with a value.
func (o *ordered) trim() {
	for len(o.rows) > 0 && o.rows[0].v != o.rows[0].v {
		o.rows = o.rows[1:]
	}
	for n := len(o.rows); n > 0 && o.rows[n-1].v != o.rows[n-1].v; n-- {
		o.rows = o.rows[:n-1]
	}
}

// commonGap returns the distance in seconds that occurs most often among rows, the
// smaller of two that occur equally often.
func commonGap(rows []placed) uint32 {
	var seconds [3601]int32
	other := false
	for k := 1; k < len(rows); k++ {
		if d := rows[k].sec - rows[k-1].sec; d <= 3600 {
			seconds[d]++
		} else {
			other = true
		}
	}
	best, most := uint32(0), int32(0)
	for d, n := range seconds {
		if n > most {
			best, most = uint32(d), n
		}
	}
	if best == 0 && other {
		return rows[1].sec - rows[0].sec
	}
	return best
}

// mixedRun is how many distances in a row, all the same multiple of the step, tell
// that the step itself has changed.
const mixedRun = 8

// stepOf returns the step in seconds. problem says what is wrong with the times, and
// at which row.
func stepOf(rows []placed, where func(placed) tables.Pos) (step uint32, at placed, problem string) {
	if len(rows) < 2 {
		return 0, rows[0], "has only one value; want at least two, since their distance is the step"
	}
	step = commonGap(rows)
	if step < 60 || step > 3600 || 3600%step != 0 {
		return 0, rows[1], fmt.Sprintf("has values every %s; want a step from 1 min to 1 h that divides an hour", stepText(int64(step)*second))
	}
	n := (int64(rows[len(rows)-1].sec) - int64(rows[0].sec)) / int64(step)
	if n > 100*int64(len(rows))+100_000 {
		return 0, rows[len(rows)-1], "stands years away from the meter's other rows: its date is wrong"
	}
	run, multiple := 0, uint32(0)
	for k := 1; k < len(rows); k++ {
		d := rows[k].sec - rows[k-1].sec
		if d%step != 0 {
			return 0, rows[k], fmt.Sprintf("mixes steps: %s after the value at %s, where its step is %s; write each meter at one step",
				stepText(int64(d)*second), where(rows[k-1]), stepText(int64(step)*second))
		}
		if d/step != multiple || multiple == 1 {
			run, multiple = 0, d/step
		}
		run++
		if multiple > 1 && run >= mixedRun && int64(d)*second <= hour {
			return 0, rows[k+1-mixedRun], fmt.Sprintf("mixes steps: from here to %s its values are %s apart, elsewhere %s; write each meter at one step, or give the parts two names",
				where(rows[k]), stepText(int64(d)*second), stepText(int64(step)*second))
		}
	}
	return step, rows[0], ""
}
