package main

import (
	"fmt"
	"strings"
	"time"
)

// A column is one profile: a name with its unit, a function of the hour of the year, and
// the decimals that it is written with.
type column struct {
	name     string
	at       func(h float64) float64
	decimals int
}

// zone is that of the study.
const zone = "America/Denver"

// The week that is also given by the minute, in local time: showers and sun in turn, at the
// end of May, when the first warm afternoons close the switched capacitors.
var (
	minuteFrom = time.Date(2025, 5, 26, 0, 0, 0, 0, time.UTC)
	minuteDays = 7
)

// profileFiles writes the hours of the year and the minutes of the week.
func profileFiles() ([]file, error) {
	loc, err := time.LoadLocation(zone)
	if err != nil {
		return nil, err
	}
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, loc)
	c := newClimate(start)
	loads, weather := loadColumns(c), weatherColumns(c)

	from := time.Date(minuteFrom.Year(), minuteFrom.Month(), minuteFrom.Day(), 0, 0, 0, 0, loc)
	week := append(append([]column{}, loads...), weather...)
	for i := range week {
		week[i].decimals = min(week[i].decimals, 3)
		if week[i].name == "grid [pu]" {
			week[i].decimals = 4
		}
	}
	const note = "Written by sim/demo/generate. A value's time is the start of its interval."
	return []file{
		series("profiles/loads.csv", note, loads, start, start, time.Hour, hoursPerYear, "2006-01-02T15:04Z07:00"),
		series("profiles/weather.csv", note+"\nOutputs of the solar plants, p.u. of rating; air temperature; the 69 kV voltage behind its impedance.",
			weather, start, start, time.Hour, hoursPerYear, "2006-01-02T15:04Z07:00"),
		series("profiles/minute/week.csv", note+"\nThe same weather and habits as in the hourly files, by the minute.",
			week, start, from, time.Minute, 1440*minuteDays, "2006-01-02T15:04"),
	}, nil
}

// loadColumns are the habits over the height of their hourly values in the year.
func loadColumns(c *climate) []column {
	var cols []column
	for _, b := range habits() {
		top := 0.0
		for h := 0; h < hoursPerYear; h++ {
			top = max(top, mean(func(x float64) float64 { return b.at(c, x) }, float64(h), 1))
		}
		cols = append(cols, column{profileName(b.class, b.variant) + " [pu]", func(h float64) float64 { return b.at(c, h) / top }, 4})
	}
	return cols
}

func weatherColumns(c *climate) []column {
	cols := []column{
		{"temperature [degC]", c.temperature, 2},
		{"grid [pu]", c.voltage, 4},
	}
	for _, p := range plants {
		cols = append(cols, column{p.name + " [pu]", func(h float64) float64 { return c.plantOutput(p, h) }, 4})
	}
	return cols
}

// mean is that of f over [h, h+length), by twelve points in the middle of equal
// parts.
func mean(f func(float64) float64, h, length float64) float64 {
	const parts = 12
	sum := 0.0
	for k := range parts {
		sum += f(h + length*(float64(k)+0.5)/parts)
	}
	return sum / parts
}

// series writes columns as means over n steps from the given time.
func series(name, comment string, cols []column, yearStart, from time.Time, step time.Duration, n int, layout string) file {
	header := []string{"time"}
	for _, c := range cols {
		header = append(header, c.name)
	}
	s := newSheet(name, comment, header...)
	for i := range n {
		at := from.Add(time.Duration(i) * step)
		h := at.Sub(yearStart).Hours()
		fmt.Fprint(&s.b, at.Format(layout))
		for _, c := range cols {
			s.b.WriteByte(',')
			s.b.WriteString(strings.TrimPrefix(number(mean(c.at, h, step.Hours()), c.decimals), "+"))
		}
		s.b.WriteByte('\n')
	}
	return s.file()
}
