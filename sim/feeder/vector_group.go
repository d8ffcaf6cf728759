package feeder

import (
	"fmt"
	"strconv"
	"strings"

	"yearflow/sim/tables"
)

// parseConnection reads the connection of a transformer into its canonical form: a
// vector group such as "Dyn1", "1ph", or an open bank with its pairs. Words give the
// clock number that is common in North America: the low side lags by 30°
// (IEEE C57.12.00).
func parseConnection(s string) (canonical string, pairs []Pair, err error) {
	t := strings.ToLower(strings.Join(strings.Fields(s), " "))
	t = strings.ReplaceAll(strings.ReplaceAll(t, " /", "/"), "/ ", "/")
	for _, open := range []string{"open-wye/open-delta", "open-delta/open-delta"} {
		if rest, ok := strings.CutPrefix(t, open); ok {
			pairs, err := parseUnits(rest)
			if err != nil {
				return "", nil, fmt.Errorf("connection %q: %w", s, err)
			}
			return open, pairs, nil
		}
	}
	switch t {
	case "1ph":
		return "1ph", nil, nil
	case "center-tap", "centre-tap":
		return "center-tap", nil, nil
	case "unit":
		return "unit", nil, nil
	case "wye/wye", "grounded wye/wye", "wye/grounded wye":
		t = map[string]string{"wye/wye": "yy0", "grounded wye/wye": "yny0", "wye/grounded wye": "yyn0"}[t]
	case "grounded wye/grounded wye":
		t = "ynyn0"
	case "delta/grounded wye":
		t = "dyn1"
	case "delta/wye":
		t = "dy1"
	case "grounded wye/delta":
		t = "ynd1"
	case "wye/delta":
		t = "yd1"
	case "delta/delta":
		t = "dd0"
	}
	return vectorGroup(s, t)
}

// wordsOfConnection are what a fault offers.
func wordsOfConnection() []string {
	return []string{"YNyn0", "YNy0", "Dyn1", "Dyn11", "Dy1", "Dd0", "YNd1", "YNd11", "Yd1", "Yd11", "1ph", "center-tap", "unit",
		"grounded wye / grounded wye", "delta / grounded wye", "delta / wye", "grounded wye / delta", "wye / delta", "delta / delta",
		"open-wye/open-delta AB-BC", "open-delta/open-delta AB-BC"}
}

// vectorGroup reads an IEC 60076-1 vector group in small letters; shown is what the
// table has.
func vectorGroup(shown, t string) (string, []Pair, error) {
	unknown := fmt.Errorf("unknown connection %q%s", shown, tables.Hint(shown, wordsOfConnection()))
	if _, near := tables.Nearest(shown, wordsOfConnection()); !near {
		unknown = fmt.Errorf("unknown connection %q; want a vector group such as YNyn0, Dyn1 or YNd1, words such as delta / grounded wye, 1ph, or an open bank such as open-wye/open-delta AB-BC", shown)
	}
	high, low, rest := "", "", t
	for _, w := range []string{"yn", "y", "d"} {
		if strings.HasPrefix(rest, w) {
			high, rest = strings.ToUpper(w), rest[len(w):]
			break
		}
	}
	for _, w := range []string{"yn", "y", "d"} {
		if strings.HasPrefix(rest, w) {
			low, rest = w, rest[len(w):]
			break
		}
	}
	clock, err := strconv.Atoi(rest)
	if high == "" || low == "" || err != nil || rest != strconv.Itoa(clock) {
		return "", nil, unknown
	}
	if clock < 0 || clock > 11 {
		return "", nil, fmt.Errorf("connection %q: the clock number goes from 0 to 11", shown)
	}
	odd, mixed := clock%2 == 1, (high == "D") != (low == "d")
	if odd != mixed {
		kind := "even"
		if mixed {
			kind = "odd"
		}
		return "", nil, fmt.Errorf("connection %q: these windings have %s clock numbers", shown, kind)
	}
	if high == "Y" && low != "d" {
		return "", nil, fmt.Errorf("connection %q is refused: the zero sequence of a wye-wye bank with an ungrounded high side is that of its core, which the table does not give; YNyn0, YNy0 or Dyn1 are taken", shown)
	}
	return high + low + rest, nil, nil
}

// grounds tells which sides of a bank tie their part of the feeder to ground; low is
// the node of the low side.
func (t *Transformer) grounds(low *Node) (from, to bool) {
	switch t.Connection {
	case "1ph":
		if len(t.Phases) == 1 {
			return true, true
		}
		return false, !has(low.Phases, t.Phases[1])
	case "center-tap", "unit":
		return len(t.HighEnds) == 1, t.MidTap || len(t.LowEnds) == 1
	case "open-wye/open-delta":
		return true, false
	case "open-delta/open-delta":
		return false, false
	}
	return strings.HasPrefix(t.Connection, "YN"), strings.Contains(t.Connection, "yn")
}

func has(ps []Phase, p Phase) bool {
	for _, q := range ps {
		if q == p {
			return true
		}
	}
	return false
}
