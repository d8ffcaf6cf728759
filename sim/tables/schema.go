package tables

import (
	"fmt"
	"reflect"
	"strings"
)

type kind uint8

const (
	text kind = iota
	number
	integer
	flag
)

// column is what the tags of a field say.
type column struct {
	name     string
	kind     kind
	unit     string // of the tag; blank: no dimension
	key      bool
	required bool
	positive bool // >0
	notBelow bool // >=0
	words    []string
	upper    bool
	fallback string
}

// title is the column's name with its unit, as a header has it.
func (c *column) title() string {
	if c.unit == "" {
		return c.name
	}
	return c.name + " [" + c.unit + "]"
}

// columnsOf reads the tags of a row struct. It panics where they make no sense,
// which is the program's fault and not a file's.
func columnsOf(t reflect.Type) []column {
	var out []column
	for i := range t.NumField() {
		f := t.Field(i)
		name := f.Tag.Get("csv")
		if name == "" || name == "-" || name == "@" {
			continue
		}
		c := column{name: name, unit: f.Tag.Get("unit"), upper: f.Tag.Get("upper") == "yes", fallback: f.Tag.Get("default")}
		switch reflect.New(f.Type).Interface().(type) {
		case *Text:
			c.kind = text
		case *Number:
			c.kind = number
		case *Integer:
			c.kind = integer
		case *Flag:
			c.kind = flag
			c.words = []string{"yes", "no"}
		default:
			panic(fmt.Sprintf("tables: field %s of %s is not a cell", f.Name, t))
		}
		if c.unit != "" {
			if _, _, ok := dimensionOf(c.unit); !ok {
				panic(fmt.Sprintf("tables: field %s of %s: unknown unit %q", f.Name, t, c.unit))
			}
		}
		if w := f.Tag.Get("words"); w != "" {
			c.words = strings.Split(w, "|")
		}
		for _, is := range strings.Split(f.Tag.Get("is"), ",") {
			switch is {
			case "":
			case "key":
				c.key, c.required = true, true
			case "required":
				c.required = true
			case ">0":
				c.positive = true
			case ">=0":
				c.notBelow = true
			default:
				panic(fmt.Sprintf("tables: field %s of %s: unknown mark %q", f.Name, t, is))
			}
		}
		out = append(out, c)
	}
	return out
}

// cell checks the text of a cell and returns it in the form that is decoded: numbers
// in the unit of the tag, keywords as they are spelled.
func (c *column) cell(s string, conv conversion, decimalComma bool) (string, error) {
	if s == "" {
		return "", nil
	}
	switch c.kind {
	case number, integer:
		if decimalComma && strings.Count(s, ",") == 1 && !strings.Contains(s, ".") {
			s = strings.Replace(s, ",", ".", 1)
		}
		x, err := ParseNumber(s)
		if err != nil {
			return "", err
		}
		if c.positive && !(x > 0) {
			return "", fmt.Errorf("must be above 0, got %s", clip(s))
		}
		if c.notBelow && !(x >= 0) {
			return "", fmt.Errorf("must not be negative, got %s", clip(s))
		}
		if c.kind == integer {
			if x != float64(int64(x)) || x > 1e9 || x < -1e9 {
				return "", fmt.Errorf("want a whole number, got %s", clip(s))
			}
			return fmt.Sprintf("%d", int64(x)), nil
		}
		y := conv.of(x)
		if y-y != 0 {
			return "", fmt.Errorf("number %s is too large", clip(s))
		}
		return fmt.Sprint(y), nil
	}
	if len(c.words) > 0 {
		folded := strings.Join(strings.Fields(s), " ")
		for _, w := range c.words {
			if strings.EqualFold(w, folded) {
				return w, nil
			}
		}
		return "", fmt.Errorf("%q is not one of %s%s", clip(s), strings.Join(c.words, ", "), near(folded, c.words))
	}
	if strings.ContainsAny(s, "\r\n") { // the results have one line a row, and a message names one line
		return "", fmt.Errorf("a line break stands in %q", clip(s))
	}
	if c.upper {
		s = strings.ToUpper(s)
	}
	return s, nil
}

// near is Hint without the list, for texts that have the list already.
func near(written string, names []string) string {
	if n, ok := Nearest(written, names); ok {
		return fmt.Sprintf("; did you mean %q?", n)
	}
	return ""
}
