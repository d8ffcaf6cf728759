package plots

import (
	"time"
)

// calendar cuts the period into local months, or into days where it is short.
type calendar struct {
	starts []time.Time
	labels []string
	word   string // "month" or "day"
}

const dayColumns = 31 // up to this many days are shown one by one

func (s span) calendar() calendar {
	c := calendar{word: "month"}
	first, step, layout := time.Date(s.start.Year(), s.start.Month(), 1, 0, 0, 0, 0, s.start.Location()), 1, "Jan"
	if s.days() <= dayColumns+0.1 {
		c.word = "day"
		for m := midnight(s.start); m.Before(s.end); m = m.AddDate(0, 0, 1) {
			c.starts, c.labels = append(c.starts, m), append(c.labels, m.Format("2"))
		}
		if len(c.labels) <= 14 {
			for i := range c.labels {
				c.labels[i] = c.starts[i].Format("2 Jan")
			}
		}
		return c
	}
	if s.days() > 25*31 {
		c.word, step, layout = "year", 12, "2006"
		first = time.Date(s.start.Year(), 1, 1, 0, 0, 0, 0, s.start.Location())
	}
	for m := first; m.Before(s.end); m = m.AddDate(0, step, 0) {
		c.starts, c.labels = append(c.starts, m), append(c.labels, m.Format(layout))
	}
	return c
}

// at returns the column of an instant.
func (c calendar) at(t time.Time) int {
	lo, hi := 0, len(c.starts)
	for hi-lo > 1 {
		if m := (lo + hi) / 2; c.starts[m].After(t) {
			hi = m
		} else {
			lo = m
		}
	}
	return lo
}

// name is a column in a sentence.
func (c calendar) name(i int) string {
	switch c.word {
	case "day":
		return c.starts[i].Format("2 Jan")
	case "year":
		return c.starts[i].Format("2006")
	}
	return c.starts[i].Format("January")
}
