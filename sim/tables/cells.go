package tables

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Row is the field of a row struct that holds where the row stands (tag "@"). Bad
// tells that a cell of it is a fault already: what follows from that cell's being
// blank now need not be told as well.
type Row struct {
	At  Pos
	Bad bool
}

// Text is a cell of text or of a keyword. Given tells whether the file has it; a
// default fills Value without Given.
type Text struct {
	Value string
	Given bool
	At    Pos
}

// Number is a cell of a number in the unit of its tag; NaN where it is blank.
type Number struct {
	Value float64
	Given bool
	At    Pos
}

// Integer is a cell of a whole number; zero where it is blank.
type Integer struct {
	Value int
	Given bool
	At    Pos
}

// Flag is a cell of yes or no; no where it is blank.
type Flag struct {
	Value bool
	Given bool
	At    Pos
}

// Cells travel through the decoder as one string each, with their place in front:
// the decoder itself knows neither lines nor units.
const mark = "\x1f"

func pack(text string, given bool, at Pos) string {
	g := "0"
	if given {
		g = "1"
	}
	return strconv.Itoa(at.Line) + mark + strconv.Itoa(at.Column) + mark + at.File + mark + g + mark + text
}

func unpack(s string) (text string, given bool, at Pos, err error) {
	parts := strings.SplitN(s, mark, 5)
	if len(parts) != 5 {
		return "", false, Pos{}, fmt.Errorf("cell without a place: %q", s)
	}
	if at.Line, err = strconv.Atoi(parts[0]); err != nil {
		return "", false, Pos{}, err
	}
	if at.Column, err = strconv.Atoi(parts[1]); err != nil {
		return "", false, Pos{}, err
	}
	at.File = parts[2]
	return parts[4], parts[3] == "1", at, nil
}

// UnmarshalCSV reads what the Sheet hands on.
func (r *Row) UnmarshalCSV(s string) (err error) {
	var good bool
	_, good, r.At, err = unpack(s)
	r.Bad = !good
	return err
}

// UnmarshalCSV reads what the Sheet hands on.
func (c *Text) UnmarshalCSV(s string) (err error) {
	c.Value, c.Given, c.At, err = unpack(s)
	return err
}

// UnmarshalCSV reads what the Sheet hands on.
func (c *Number) UnmarshalCSV(s string) (err error) {
	var text string
	if text, c.Given, c.At, err = unpack(s); err != nil {
		return err
	}
	c.Value = math.NaN()
	if text != "" {
		c.Value, err = strconv.ParseFloat(text, 64)
	}
	return err
}

// UnmarshalCSV reads what the Sheet hands on.
func (c *Integer) UnmarshalCSV(s string) (err error) {
	var text string
	if text, c.Given, c.At, err = unpack(s); err != nil {
		return err
	}
	if text != "" {
		c.Value, err = strconv.Atoi(text)
	}
	return err
}

// UnmarshalCSV reads what the Sheet hands on.
func (c *Flag) UnmarshalCSV(s string) (err error) {
	var text string
	text, c.Given, c.At, err = unpack(s)
	c.Value = text == "yes"
	return err
}

// ParseNumber reads a plain decimal number. It refuses what would be read another
// way elsewhere: hexadecimal, underscores, NaN, Inf, and commas.
func ParseNumber(s string) (float64, error) {
	if s == "" {
		return 0, fmt.Errorf("want a number, got nothing")
	}
	for _, r := range s {
		if !strings.ContainsRune("0123456789+-.eE", r) {
			if r == ',' {
				return 0, fmt.Errorf("want a number, got %q: a decimal comma is taken only in files separated by semicolons, and thousands are not grouped", clip(s))
			}
			return 0, fmt.Errorf("want a number, got %q", clip(s))
		}
	}
	x, err := strconv.ParseFloat(s, 64)
	if err != nil || math.IsInf(x, 0) {
		return 0, fmt.Errorf("want a number, got %q", clip(s))
	}
	return x, nil
}

// clip shortens a text for a message.
func clip(s string) string {
	r := []rune(s)
	if len(r) > 60 {
		return string(r[:57]) + "..."
	}
	return s
}
