package plots

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"
)

// inventedMeasurements are those of an invented run, in the columns of the contract.
var inventedMeasurements = []struct {
	quantity, place, phase, unit string
	level, swing, off, noise     float64
}{
	{"voltage", "n05", "A", "pu", 1.012, 0.018, 0.0035, 0.002},
	{"voltage", "h08-2", "B", "pu", 0.985, 0.03, -0.006, 0.004},
	{"current", "s00", "A", "A", 150, 70, 4, 6},
	{"kW", "bus", "", "kW", 3600, 1500, -60, 120},
	{"kvar", "bus", "", "kvar", 700, 400, 90, 60},
	{"tap", "REG1", "A", "1", 4, 5, 0, 0.5},
	{"voltage", "n11", "C", "pu", 1.005, 0.02, 0.0004, 0.0006},
}

func (g invented) measuredFiles() string {
	if g.measured == 0 {
		return ""
	}
	return `"measured.csv":"","measured-series.csv":""`
}

// measure writes measured.csv and measured-series.csv: a day's course with a model that
// is off by a constant and by chance, and once by a lot.
func (g invented) measure(w func(string, string, ...any), stamp func(time.Time) string) {
	if g.measured == 0 {
		return
	}
	r := rand.New(rand.NewPCG(21, 3))
	ms := inventedMeasurements[:g.measured]
	title := func(k int) string {
		if ms[k].phase == "" {
			return ms[k].quantity + " " + ms[k].place
		}
		return ms[k].quantity + " " + ms[k].place + "." + ms[k].phase
	}
	w("measured-series.csv", "time")
	for k := range ms {
		w("measured-series.csv", ",%s measured [%s],%s modelled [%s]", title(k), ms[k].unit, title(k), ms[k].unit)
	}
	w("measured-series.csv", "\n")
	worst, worstAt := make([]float64, len(ms)), make([]time.Time, len(ms))
	rows, count := 0, 0
	sum, size := make([]float64, len(ms)), make([]float64, len(ms))
	for t := g.start; t.Before(g.end); t = t.Add(g.step) {
		h := float64(t.Hour()) + float64(t.Minute())/60
		season := math.Cos(2 * math.Pi * float64(t.YearDay()) / 365)
		w("measured-series.csv", "%s", stamp(t))
		solved := rows >= g.unsolvedRows
		if solved {
			count++
		}
		for k := range ms {
			m := &ms[k]
			measured := m.level + m.swing*(0.7*math.Sin(2*math.Pi*(h-11)/24)+0.3*season) + m.noise*r.NormFloat64()
			modelled := measured + m.off + m.noise*r.NormFloat64()
			if rows == 40+k {
				modelled += 5 * m.noise
			}
			if m.quantity == "tap" {
				measured, modelled = math.Round(measured), math.Round(modelled)
			}
			w("measured-series.csv", ",%.6f", measured)
			if !solved {
				w("measured-series.csv", ",")
				continue
			}
			w("measured-series.csv", ",%.6f", modelled)
			d := modelled - measured
			sum[k] += d
			size[k] += math.Abs(d)
			if math.Abs(d) > math.Abs(worst[k]) {
				worst[k], worstAt[k] = d, t
			}
		}
		w("measured-series.csv", "\n")
		rows++
	}
	w("measured.csv", "quantity,place,phase,samples,bias,mean absolute error,p95 error,worst error,worst time\n")
	for k := range ms {
		m := &ms[k]
		if count == 0 {
			w("measured.csv", "%s,%s,%s,0,,,,,\n", m.quantity, m.place, m.phase)
			continue
		}
		n := float64(count)
		at := worstAt[k]
		if at.IsZero() {
			at = g.start
		}
		w("measured.csv", "%s,%s,%s,%d,%.6f,%.6f,%.6f,%.6f,%s\n", m.quantity, m.place, m.phase, count, sum[k]/n, size[k]/n, 2*size[k]/n, worst[k], stamp(at))
	}
}

// The finding is what the tables say: the largest error against the range measured.
func TestMeasuredFinding(t *testing.T) {
	m := small().write()
	k := kept{}
	figures, err := Draw(m, k.out, Options{DPI: 40, Only: []string{"measured"}})
	if err != nil || len(figures) != 1 {
		t.Fatal(err, len(figures))
	}
	rows, series := columns(t, m, "measured.csv"), columns(t, m, "measured-series.csv")
	best, title, at := 0.0, "", ""
	for i := range rows["quantity"] {
		name := rows["quantity"][i] + " " + rows["place"][i]
		if p := rows["phase"][i]; p != "" {
			name += "." + p
		}
		lo, hi := math.Inf(1), math.Inf(-1)
		for h, cells := range series {
			if strings.HasPrefix(h, name+" measured") {
				for _, c := range cells {
					lo, hi = math.Min(lo, value(t, c)), math.Max(hi, value(t, c))
				}
			}
		}
		if x := math.Abs(value(t, rows["worst error"][i])) / (hi - lo); x > best {
			best, title, at = x, name, rows["worst time"][i]
		}
	}
	for _, want := range []string{"Held against 7 measured series (" + fmt.Sprint(7*len(series["time"])) + " samples)", " p.u. (bias ", "Farthest off is " + title, spokenTime(t, at), "Shown: the 6 met worst."} {
		if !strings.Contains(figures[0].Finding, want) {
			t.Errorf("%q does not say %q", figures[0].Finding, want)
		}
	}
	if strings.Contains(figures[0].Finding, "n11") {
		t.Errorf("the one met best is told: %q", figures[0].Finding)
	}
}

// A run without measurements has no such figure, and asking for it draws nothing.
func TestNoMeasurementsNoFigure(t *testing.T) {
	g := small()
	g.measured = 0
	k := kept{}
	figures, err := Draw(g.write(), k.out, Options{DPI: 40, Only: []string{"measured"}})
	if err != nil || len(figures) != 0 || len(k) != 0 {
		t.Errorf("%v, %d figures, files %d", err, len(figures), len(k))
	}
}
