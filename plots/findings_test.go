package plots

import (
	"encoding/csv"
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"
	"time"
)

// columns reads a CSV of a folder into columns, by the plainest means.
func columns(t *testing.T, m fstest.MapFS, name string) map[string][]string {
	t.Helper()
	rows, err := csv.NewReader(strings.NewReader(string(m[name].Data))).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	out := map[string][]string{}
	for c, h := range rows[0] {
		for _, r := range rows[1:] {
			out[h] = append(out[h], r[c])
		}
	}
	return out
}

func value(t *testing.T, s string) float64 {
	t.Helper()
	if s == "" {
		return math.NaN()
	}
	x, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

func spokenTime(t *testing.T, stamp string) string {
	t.Helper()
	at, err := time.Parse(time.RFC3339, stamp)
	if err != nil {
		t.Fatal(err)
	}
	return at.In(denver()).Format("2 Jan at 15:04")
}

// TestFindingsAreInTheTables looks up in the tables, by hand as it were, what the
// figures say.
func TestFindingsAreInTheTables(t *testing.T) {
	m := small().write()
	k := kept{}
	figures, err := Draw(m, k.out, Options{DPI: 40})
	if err != nil {
		t.Fatal(err)
	}
	said := map[string]string{}
	for _, f := range figures {
		said[strings.TrimSuffix(f.Name, ".png")] = f.Finding
	}
	want := func(figure string, parts ...string) {
		t.Helper()
		for _, p := range parts {
			if !strings.Contains(said[figure], p) {
				t.Errorf("%s says %q, want %q in it", figure, said[figure], p)
			}
		}
	}

	// Only the services, whose names begin with h, have customers.
	v := columns(t, m, "voltages.csv")
	lo, hi := 9.0, 0.0
	var loAt, hiAt, loTime, hiTime string
	below := map[string]bool{} // days
	for name, cells := range v {
		if !strings.HasPrefix(name, "h") || name == "head.A" || name == "head.B" || name == "head.C" {
			continue
		}
		for i, c := range cells {
			x := value(t, c)
			if x < lo {
				lo, loAt, loTime = x, name, v["time"][i]
			}
			if x > hi {
				hi, hiAt, hiTime = x, name, v["time"][i]
			}
			if x < 0.95 {
				below[v["time"][i][:10]] = true
			}
		}
	}
	want("voltage-lowest-year", fmt.Sprintf("%.3f p.u. (%.1f V", lo, 120*lo), loAt, spokenTime(t, loTime))
	want("voltage-highest-year", fmt.Sprintf("%.3f p.u. (%.1f V", hi, 120*hi), hiAt, spokenTime(t, hiTime))
	want("voltage-distance", fmt.Sprintf("%.3f p.u. at %s", lo, loAt), fmt.Sprintf("%.3f p.u. at %s", hi, hiAt), spokenTime(t, loTime), spokenTime(t, hiTime))
	if len(below) == 0 {
		want("voltage-envelope", "stays in range A on all 90 days")
	} else {
		want("voltage-envelope", fmt.Sprintf("below range A on %d ", len(below)), "of 90 days")
	}

	s := columns(t, m, "steps.csv")
	peak, at, lost, in := 0.0, "", 0.0, 0.0
	for i, c := range s["source real [kW]"] {
		if x := value(t, c); x > peak {
			peak, at = x, s["time"][i]
		}
		lost += value(t, s["losses energy [kWh]"][i])
		in += value(t, s["source energy [kWh]"][i]) + value(t, s["generation energy [kWh]"][i])
	}
	want("power", fmt.Sprintf("peaks at %.2f MW on %s", peak/1000, spokenTime(t, at)), "never flows back")
	want("losses", fmt.Sprintf("%.0f MWh are lost", lost/1000), fmt.Sprintf("%.1f %% of the energy", 100*lost/in))

	o := columns(t, m, "operations.csv")
	by, months := map[string]int{}, map[string]int{}
	for i, d := range o["device"] {
		if o["phase"][i] != "" {
			d += "." + o["phase"][i]
		}
		by[d]++
		months[o["time"][i][5:7]]++
	}
	most := 0
	for _, n := range by {
		most = max(most, n)
	}
	busiest := max(months["01"], months["02"], months["03"])
	want("operations", number(float64(len(o["device"])), 0)+" operations in all", "leads with "+number(float64(most), 0), "with "+number(float64(busiest), 0)+".")
	want("taps", fmt.Sprintf("moves most: %d operations", most))

	l := columns(t, m, "loading.csv")
	top, over, element := 0.0, 0, ""
	for i, c := range l["loading [%]"] {
		x := value(t, c)
		if x > top {
			top, element = x, l["element"][i]+"."+l["phase"][i]
		}
		if x > 100 {
			over++
		}
	}
	want("loading", fmt.Sprintf("%s is loaded most, to %.0f %% of its 230", element, top))
	if over == 0 {
		want("loading", "no element exceeds its rating")
	} else if over > 1 {
		want("loading", fmt.Sprintf("%d of", over))
	}
}

// TestReverseFlowIsCounted: two rows of three hours with power into the source.
func TestReverseFlowIsCounted(t *testing.T) {
	m := small().write()
	lines := strings.SplitAfter(string(m["steps.csv"].Data), "\n")
	for i, kw := range map[int]string{5: "-250.0000", 9: "-1.5000"} {
		cells := strings.Split(lines[i], ",")
		cells[2] = kw
		lines[i] = strings.Join(cells, ",")
	}
	m["steps.csv"] = &fstest.MapFile{Data: []byte(strings.Join(lines, ""))}
	figures, err := Draw(m, kept{}.out, Options{DPI: 40, Only: []string{"power"}})
	if err != nil {
		t.Fatal(err)
	}
	if want := "flows back into the source for 6.0 h, 250.0 kW at most."; !strings.Contains(figures[0].Finding, want) {
		t.Errorf("%q, want %q", figures[0].Finding, want)
	}
}

// TestLowStepsAreNoStatistic: a step marked low that holds the lowest voltage of all
// is neither the finding nor the scale.
func TestLowStepsAreNoStatistic(t *testing.T) {
	g := small()
	g.voltages = false
	m := g.write()
	lines := strings.SplitAfter(string(m["steps.csv"].Data), "\n")
	cells := strings.Split(lines[7], ",")
	cells[1], cells[15] = "low", "0.612345"
	lines[7] = strings.Join(cells, ",")
	m["steps.csv"] = &fstest.MapFile{Data: []byte(strings.Join(lines, ""))}
	figures, err := Draw(m, kept{}.out, Options{DPI: 40, Only: []string{"voltage-lowest-year", "voltage-envelope"}})
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range figures {
		if strings.Contains(f.Finding, "0.612") {
			t.Errorf("%s: %q", f.Name, f.Finding)
		}
	}
	if !strings.Contains(figures[1].Finding, "Grey: 1 row ") {
		t.Errorf("%q does not say that a row is grey", figures[1].Finding)
	}
}

// TestMonthlyLossesComeFromMonthlyCSV: where the writer gave the kinds by month, they
// are shown and not an estimate.
func TestMonthlyLossesComeFromMonthlyCSV(t *testing.T) {
	m := small().write()
	m["monthly.csv"] = &fstest.MapFile{Data: []byte("month,line losses [kWh],transformer load losses [kWh],transformer no-load losses [kWh],regulator losses [kWh]\n" +
		"2025-01,10000,2000,3000,0\n2025-02,10000,2000,3000,0\n2025-03,20000,4000,6000,0\n")}
	figures, err := Draw(m, kept{}.out, Options{DPI: 40, Only: []string{"losses"}})
	if err != nil {
		t.Fatal(err)
	}
	// 60,000 kWh in all, 40,000 in lines, 12,000 no-load.
	for _, want := range []string{"60 MWh are lost", "line losses make 67 %", "no-load losses 20 %"} {
		if !strings.Contains(figures[0].Finding, want) {
			t.Errorf("%q, want %q", figures[0].Finding, want)
		}
	}
}
