package study

import (
	"math"
	"strings"
	"testing"
)

// The worked example of the team's facts of the field: loads 2, 4, 6, 8, 10, 6 have a
// load factor of 0.6 and, losses going with the square, a loss factor of
// Σ P²/(6·10²) = 256/600; the formulas make 0.432, 0.396, 0.3984 and 0.3792 of 0.6
// (0.3/0.7: Buller and Woodrow 1928; 0.15/0.85: Gangel and Propst 1965, Gönen; 0.16/0.84:
// REA; 0.08/0.92: Gustafson and Baylor; coefficients recalled from memory).
func TestLossFactorFormulas(t *testing.T) {
	loads := []float64{2, 4, 6, 8, 10, 6}
	energy, squares := 0.0, 0.0
	for _, p := range loads {
		energy += p
		squares += p * p
	}
	lf := loadFactor(energy, 6, 10)
	if math.Abs(lf-0.6) > 1e-12 {
		t.Errorf("load factor %g, want 0.6", lf)
	}
	if got := loadFactor(squares, 6, 100); math.Abs(got-0.426667) > 1e-6 {
		t.Errorf("loss factor %g, want 0.426667", got)
	}
	for i, want := range []float64{0.432, 0.396, 0.3984, 0.3792} {
		if f := LossFactorFormulas()[i]; math.Abs(f.Of(lf)-want) > 1e-12 {
			t.Errorf("k = %g: %g, want %g", f.K, f.Of(lf), want)
		}
	}
}

// 7 % over 20 years is worth 10.5940 payments (any table of interest, e.g. Grant,
// Ireson, Leavenworth); 10 % over 20 years 8.5136; without interest the years. A and B
// are IEEE C57.120 with D 10 a kW and month, E 0.06, RF 0.8, LsF 0.35, PL 0.9.
func TestPresentWorth(t *testing.T) {
	for _, x := range []struct{ i, n, want float64 }{{0.07, 20, 10.5940}, {0.10, 20, 8.5136}, {0, 20, 20}, {0.05, 1, 0.952381}} {
		if got := PresentWorthFactor(x.i, x.n); math.Abs(got-x.want) > 5e-5 {
			t.Errorf("%g over %g years: %g, want %g", x.i, x.n, got, x.want)
		}
	}
	pwf := PresentWorthFactor(0.07, 20)
	if a := NoLoadWorth(pwf, 10, 0.06); math.Abs(a-6.8395) > 1e-4 {
		t.Errorf("A %g, want 6.8395", a)
	}
	if b := LoadWorth(pwf, 10, 0.06, 0.8, 0.35, 0.9); math.Abs(b-2.2376) > 1e-4 {
		t.Errorf("B %g, want 2.2376", b)
	}
}

// What the meter of the estimate sums is what the results of the run say, element by
// element, and the services are apart.
func TestLossesAreThoseOfTheResults(t *testing.T) {
	l := estimated(t, placed(t, smallFeeder()), LossSettings{Samples: -1})
	want := map[string]float64{}
	for _, r := range l.Cases[0].Results.Losses {
		kind := r.Kind
		if r.Element == "x-y" {
			kind = "service"
		}
		want[r.Element+"|"+kind] = r.EnergyKWh
	}
	rows := tableOf(t, l.Tables(), "losses-by-element.csv")
	if len(rows)-1 != len(want) {
		t.Fatalf("%d rows, want %d", len(rows)-1, len(want))
	}
	for _, r := range rows[1:] {
		w, there := want[r[0]+"|"+r[1]]
		if got := parse(r[3]); !there || math.Abs(got-w) > 2e-6*math.Max(1, w) {
			t.Errorf("%s, %s: %g kWh, losses.csv has %g (%v)", r[0], r[1], got, w, there)
		}
	}
	kinds := tableOf(t, l.Tables(), "losses-by-kind.csv")
	for column, quantity := range map[string]string{"energy [kWh]": "losses energy", "share of energy supplied [%]": "losses share of energy supplied", "peak [kW]": "peak losses"} {
		if got, w := parse(at(t, kinds, column, "all")), l.Cases[0].number(quantity); math.Abs(got-w) > 2e-6*math.Max(1, w) {
			t.Errorf("%s: %g, summary.csv has %g", quantity, got, w)
		}
	}
	factor := tableOf(t, l.Tables(), "loss-factor.csv")
	for column, quantity := range map[string]string{"load factor": "load factor", "loss factor": "loss factor", "equivalent hours [h]": "equivalent hours of loss"} {
		if got, w := parse(at(t, factor, column, "all", "exact")), l.Cases[0].number(quantity); math.Abs(got-w) > 2e-6*math.Max(1, w) {
			t.Errorf("%s: %g, summary.csv has %g", quantity, got, w)
		}
	}
}

// Months and kinds add up to the period, and money is energy times price plus peak times
// price.
func TestMonthsAndKindsAddUp(t *testing.T) {
	fsys := smallFeeder()
	fsys["study.toml"].Data = []byte(strings.Replace(string(fsys["study.toml"].Data), "start = 2025-03-01\nend = 2025-03-03", "start = 2025-02-28T18:00:00\nend = 2025-03-02", 1))
	fsys["study.toml"].Data = []byte(strings.Replace(string(fsys["study.toml"].Data), "profiles/*.csv\"]", "profiles/*.csv\"]\nrepeat = \"day\"", 1))
	l := estimated(t, placed(t, fsys), LossSettings{Samples: -1})
	rows := tableOf(t, l.Tables(), "losses-by-month.csv")
	if len(rows) != 4 || rows[1][0] != "2025-02" || rows[2][0] != "2025-03" {
		t.Fatalf("months: %v", rows)
	}
	for i, h := range rows[0] {
		if i == 0 || strings.HasSuffix(h, "time") || strings.HasPrefix(h, "share") {
			continue
		}
		if a, b, all := parse(rows[1][i]), parse(rows[2][i]), parse(rows[3][i]); math.Abs(a+b-all) > 0.011 {
			t.Errorf("%s: %g + %g, the period has %g", h, a, b, all)
		}
	}
	for _, r := range rows[1:] {
		sum := 0.0
		for _, k := range kindNames {
			sum += parse(at(t, rows, k+" [kWh]", r[0]))
		}
		losses := parse(at(t, rows, "losses [kWh]", r[0]))
		if math.Abs(sum-losses) > 1e-3 {
			t.Errorf("%s: kinds add up to %g, losses are %g", r[0], sum, losses)
		}
		want := 0.1*losses + 8*parse(at(t, rows, "losses at peak [kW]", r[0]))
		if got := parse(at(t, rows, "cost [USD]", r[0])); math.Abs(got-want) > 0.011 {
			t.Errorf("%s: cost %g, want %g", r[0], got, want)
		}
	}
}

// A price that follows the load makes a kWh lost dearer than the mean of the price.
func TestAPriceProfilePricesEveryStep(t *testing.T) {
	fsys := smallFeeder()
	fsys["study.toml"].Data = []byte(strings.Replace(string(fsys["study.toml"].Data), "energy = 0.1", "energy = \"dear\"", 1))
	p := placed(t, fsys)
	l := estimated(t, p, LossSettings{Samples: -1})
	steps := &l.Cases[0].Results.Steps
	want := 0.0
	for i, e := range steps.Column("losses energy [kWh]") {
		want += e * (0.05 + 0.1*[]float64{0.3, 0.25, 0.3, 0.5, 0.8, 1, 0.7, 0.45}[i/3%8])
	}
	if got := parse(at(t, tableOf(t, l.Tables(), "losses-by-kind.csv"), "energy cost [USD]", "all")); math.Abs(got-want) > 0.006 {
		t.Errorf("cost of the losses %g, the steps make %g", got, want)
	}
	if c := compared(t, p); math.Abs(parse(c.Quantity("cost of losses energy").Cells[0])-want) > 0.006 {
		t.Errorf("compare: %s, want %g", c.Quantity("cost of losses energy").Cells[0], want)
	}
}

// A run with 20 kW more of constant power at a place, controls held, loses more by what
// the marginal losses say: at three places, all hours sampled.
func TestMarginalLossesAreThoseOfARunWithMoreLoad(t *testing.T) {
	held := func(more string) *LossEstimate {
		fsys := smallFeeder()
		fsys["feeder/regulator-settings.csv"].Data = []byte("regulator,phase,set [V],bandwidth [V],delay [s],control,tap\nR1,all,121,2,30,held,6\n")
		delete(fsys, "feeder/capacitor-settings.csv")
		fsys["feeder/loads.csv"].Data = append(fsys["feeder/loads.csv"].Data, more...)
		return estimated(t, placed(t, fsys), LossSettings{Samples: 10_000})
	}
	base := held("")
	if base.Marginal.Samples != 48 {
		t.Fatalf("%d samples, want all 48 steps", base.Marginal.Samples)
	}
	losses := func(l *LossEstimate) float64 { return l.meters[0].kindsSum()[kinds].kwh }
	for node, phases := range map[string]string{"L": "ABC", "R": "ABC", "M": "A"} {
		const kw = 2.0
		more := held("L3," + node + "," + phases + ",2,1,,0\n")
		got := (losses(more) - losses(base)) / (kw * 48)
		for _, x := range base.Marginal.Places {
			if x.Node == node && math.Abs(got-x.Mean) > 0.01*math.Abs(x.Mean) {
				t.Errorf("%s: a run with %g kW more loses %.6f a kW, marginal losses are %.6f", node, kw, got, x.Mean)
			}
		}
	}
}

func TestMarginalLossesDoNotDependOnTheWorkers(t *testing.T) {
	var first [][]string
	for _, workers := range []int{1, 3} {
		l := estimated(t, placed(t, smallFeeder()), LossSettings{Settings: Settings{Workers: workers}, Samples: 12})
		rows := l.marginalTable().Rows
		if first == nil {
			first = rows
		}
		for i := range rows {
			if strings.Join(rows[i], ",") != strings.Join(first[i], ",") {
				t.Errorf("%d workers: %v, want %v", workers, rows[i], first[i])
			}
		}
	}
}

func TestWhatACaseSaves(t *testing.T) {
	l := estimated(t, placed(t, smallFeeder()), LossSettings{Case: "same", Samples: -1})
	for _, r := range l.saving().Rows[1:] {
		for _, i := range []int{3, 5, 6, 7, 8} {
			if parse(r[i]) != 0 {
				t.Errorf("a case that changes nothing saves: %v", r)
			}
		}
	}
	fsys := smallFeeder()
	fsys["cases/thick/sections.csv"] = fsys["cases/same/regulator-settings.csv"]
	copied := *fsys["cases/thick/sections.csv"]
	copied.Data = []byte("section,length [mi]\nr-L,1.5\n")
	fsys["cases/thick/sections.csv"] = &copied
	l = estimated(t, placed(t, fsys), LossSettings{Case: "thick", Samples: -1})
	rows := l.saving().Rows
	saved, yearly, worth := parse(at(t, rows, "saved [kWh]", "line")), parse(at(t, rows, "energy saved [USD a year]", "line"))+parse(at(t, rows, "demand saved [USD a year]", "line")), parse(at(t, rows, "present worth [USD]", "line"))
	if !(saved > 0) || math.Abs(worth-yearly*10.594) > 0.001*worth {
		t.Errorf("half of a line saves %g kWh, %g a year, worth %g", saved, yearly, worth)
	}
	if want := 0.1 * saved * 8760 / 48; math.Abs(parse(at(t, rows, "energy saved [USD a year]", "line"))-want) > 0.02*want {
		t.Errorf("energy saved a year %s, want %g", at(t, rows, "energy saved [USD a year]", "line"), want)
	}
}

func TestLossesOfOneStep(t *testing.T) {
	fsys := smallFeeder()
	fsys["study.toml"].Data = []byte(strings.Replace(string(fsys["study.toml"].Data), "end = 2025-03-03", "end = 2025-03-01T01:00:00", 1))
	delete(fsys, "cases/short/case.toml")
	p := placed(t, fsys)
	l := estimated(t, p, LossSettings{})
	if f := at(t, l.factors().Rows, "loss factor", "all", "exact"); parse(f) != 1 {
		t.Errorf("loss factor of one step %s, want 1", f)
	}
	if !said(l.Cautions, "", "single step") {
		t.Errorf("nobody says how short it is: %v", l.Cautions)
	}
	if c := compared(t, p, "wide"); len(c.Ranking) != 2 {
		t.Errorf("compare of one step: %v", c.Ranking)
	}
}

func TestLossesWithoutPricesTellNoMoney(t *testing.T) {
	fsys := smallFeeder()
	text, _, _ := strings.Cut(string(fsys["study.toml"].Data), "[prices]")
	fsys["study.toml"].Data = []byte(text)
	l := estimated(t, placed(t, fsys), LossSettings{Case: "wide"})
	for _, f := range l.Tables() {
		for _, h := range f.Rows[0] {
			if strings.Contains(h, "USD") {
				t.Errorf("%s has a column %q", f.Name, h)
			}
		}
	}
	if rows := l.worth().Rows; len(rows) != 2 {
		t.Errorf("worth without prices: %v", rows)
	}
}

func TestLossesOfAFeederThatCannotBeSolved(t *testing.T) {
	fsys := smallFeeder()
	fsys["feeder/loads.csv"].Data = []byte(strings.Replace(string(fsys["feeder/loads.csv"].Data), "2400", "21600", 1))
	l := estimated(t, placed(t, fsys), LossSettings{Samples: 48})
	if !said(l.Cautions, "base", "unsolved steps") {
		t.Errorf("nobody says that steps are missing: %v", l.Cautions)
	}
	if n := l.Marginal.Samples; !(n > 0 && n < 48) {
		t.Errorf("%d of 48 steps have marginal losses", n)
	}
}
