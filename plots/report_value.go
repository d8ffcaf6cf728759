package plots

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"
)

// Value is a number, a time or a name as a report shows it, and what it stands for.
type Value struct {
	Show  string // as people read it: "28,245,126"
	Exact string // as the file has it: "28245125.9520"; "" where Show is no number of a file
	Unit  string // printed behind it in running text; tables have it in the column's head
	// Source is where Exact stands: file#row/column; "" for a plain word.
	Source string
}

// Text is running text whose numbers keep their sources.
type Text []Value

// Plain is text without numbers of a file.
func Plain(s string) Text { return Text{{Show: s}} }

// Word is a value that is no number of a file: a name, a sentence, a mark.
func Word(s string) Value { return Value{Show: s} }

// Say makes text of a sentence with a pair of braces for each value:
//
//	Say("The losses are {}, {} of the energy supplied.", losses, share)
//
// It panics where the braces are not as many as the values.
func Say(sentence string, values ...Value) Text {
	parts := strings.Split(sentence, "{}")
	if len(parts) != len(values)+1 {
		panic(fmt.Sprintf("plots: %d values for %d braces in %q", len(values), len(parts)-1, sentence))
	}
	var t Text
	for i, p := range parts {
		if p != "" {
			t = append(t, Word(p))
		}
		if i < len(values) {
			t = append(t, values[i])
		}
	}
	return t
}

// String returns the text as it reads.
func (t Text) String() string {
	var b strings.Builder
	for _, v := range t {
		b.WriteString(v.Show)
		if v.Unit != "" && v.Source != "" {
			b.WriteString(" " + v.Unit)
		}
	}
	return b.String()
}

// SourceOf names a cell of a results file: file#row/column. The row is named by its
// first cells, as many as are needed to tell it from others, joined by semicolons.
func SourceOf(file, column string, row ...string) string {
	escape := strings.NewReplacer("%", "%25", "#", "%23", "/", "%2F", ";", "%3B")
	var b strings.Builder
	b.WriteString(file + "#")
	for i, r := range row {
		if i > 0 {
			b.WriteByte(';')
		}
		b.WriteString(escape.Replace(r))
	}
	b.WriteString("/" + escape.Replace(column))
	return b.String()
}

// Number returns the value of a cell of a results file: a number rounded to four
// significant digits, or to the whole number where it is larger; per unit to four
// decimals; a time as local people write it; anything else as it is. A blank cell
// shows an en dash.
func Number(cell, unit, source string) Value { return Rounded(cell, unit, source, -1) }

// Rounded is Number with a given number of decimals; −1 chooses them.
func Rounded(cell, unit, source string, decimals int) Value {
	v := Value{Show: cell, Exact: cell, Unit: shownUnit(unit), Source: source}
	if cell == "" {
		v.Show, v.Unit = "–", ""
		return v
	}
	switch unit {
	case "node.phase", "device.phase", "element.phase", "node", "element":
		return v // a name, even where it reads as a number
	case "time":
		if t, err := time.Parse(time.RFC3339Nano, cell); err == nil {
			v.Show = t.Format("2 Jan 2006 15:04")
			if t.Second() != 0 || t.Nanosecond() != 0 {
				v.Show = t.Format("2 Jan 2006 15:04:05")
			}
		}
		return v
	}
	x, err := strconv.ParseFloat(cell, 64)
	if err != nil || math.IsNaN(x) || math.IsInf(x, 0) {
		return v
	}
	if decimals < 0 && x != 0 && math.Abs(x) < 1e-4 && unit != "pu" {
		v.Show = powerOfTen(x)
		return v
	}
	if decimals < 0 {
		decimals = decimalsOf(x, cell, unit)
	}
	v.Show = number(x, decimals)
	return v
}

// decimalsOf chooses how many decimals of a number are worth reading.
func decimalsOf(x float64, cell, unit string) int {
	if !strings.ContainsAny(cell, ".eE") {
		return 0 // a count
	}
	if x == 0 || unit == "1" && x == math.Trunc(x) {
		return 0
	}
	if unit == "pu" {
		return 4
	}
	return max(0, min(6, 3-int(math.Floor(math.Log10(math.Abs(x))))))
}

// powerOfTen writes a tiny number with four digits and its power of ten.
func powerOfTen(x float64) string {
	mantissa, exponent, _ := strings.Cut(strconv.FormatFloat(x, 'e', 3, 64), "e")
	n, _ := strconv.Atoi(exponent)
	raised := strings.NewReplacer("-", "⁻", "0", "⁰", "1", "¹", "2", "²", "3", "³", "4", "⁴", "5", "⁵", "6", "⁶", "7", "⁷", "8", "⁸", "9", "⁹").Replace(strconv.Itoa(n))
	return strings.Replace(mantissa, "-", "\u2212", 1) + "×10" + raised
}

// shownUnit is a unit of a results file as people write it.
func shownUnit(unit string) string {
	switch unit {
	case "1", "time", "node.phase", "device.phase", "element.phase", "node", "element":
		return ""
	case "pu":
		return "p.u."
	}
	return unit
}

// sourcesOf lists the files that the numbers of a block come from, each once, in the
// order of the block.
func sourcesOf(b Block) []string {
	var files []string
	take := func(values ...Value) {
		for _, v := range values {
			if file, _, ok := strings.Cut(v.Source, "#"); ok && !slices.Contains(files, file) {
				files = append(files, file)
			}
		}
	}
	switch x := b.(type) {
	case Paragraph:
		take(x.Text...)
	case Finding:
		take(x.Text...)
	case Caution:
		for _, t := range x.Items {
			take(t...)
		}
	case List:
		for _, t := range x.Items {
			take(t...)
		}
	case Facts:
		for _, f := range x.Rows {
			take(f.Text...)
		}
	case Table:
		for _, r := range x.Rows {
			take(r...)
		}
		take(x.Note...)
	case Verdicts:
		for _, r := range x.Rows {
			take(r.Value, r.Limit, r.Margin, r.Where)
		}
		take(x.Note...)
	case Picture:
		take(x.Caption...)
	}
	return files
}
