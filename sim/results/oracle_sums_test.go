package results

import (
	"math"
	"testing"
	"time"

	"yearflow/sim/network"
)

func TestSummaryAndMonthsAgreeWithBruteForce(t *testing.T) {
	x, s, dir := randomRun(t, 4)
	o := oracle{x, s}
	zone := x.plan.Settings.Period.Zone
	type sums struct {
		source, losses, below, customers, settled, settling, peak float64
		operations, low, unsolved                                 int
	}
	months := map[string]*sums{}
	var order []string
	of := func(ns int64) *sums {
		m := time.Unix(0, ns).In(zone).Format("2006-01")
		if months[m] == nil {
			months[m] = &sums{peak: math.Inf(-1)}
			order = append(order, m)
		}
		return months[m]
	}
	for i := range s.steps {
		st := &s.steps[i]
		for _, a := range st.actions {
			of(a.Time).operations++
		}
		b := of(st.Start)
		switch st.Status {
		case Low:
			b.low++
			continue
		case Unsolved:
			b.unsolved++
			continue
		}
		for _, iv := range st.intervals {
			h := hoursOf(iv)
			b.source += o.sourceKW(iv.State) * h
			b.losses += o.losses(iv.State, -1, network.Section, network.Transformer, network.TransformerNoLoad, network.RegulatorSeries, network.RegulatorNoLoad) * h / 1000
			if !iv.Settled {
				b.settling += h
				continue
			}
			b.settled += h
			b.peak = max(b.peak, o.sourceKW(iv.State))
			v := o.volts(iv.State)
			// Judged: low.A, low.B, low.C (12 customers, three phases), n3.A (7), shop.AB (1).
			town := v[0] < 0.95 || v[1] < 0.95 || v[2] < 0.95
			farm, press := v[9] < 0.975, v[10] < 0.95
			if town || farm || press {
				b.below += h
			}
			for _, c := range []struct {
				is bool
				n  float64
			}{{town, 12}, {farm, 7}, {press, 1}} {
				if c.is {
					b.customers += c.n * h
				}
			}
		}
	}
	rows := sheetRows(t, dir, "monthly.csv")
	if len(rows) != 2 || len(order) != 2 {
		t.Fatalf("%d months, want %v", len(rows), order)
	}
	var all sums
	all.peak = math.Inf(-1)
	for k, row := range rows {
		b := months[order[k]]
		if row["month"] != order[k] {
			t.Fatalf("month %s, want %s", row["month"], order[k])
		}
		cell(t, row, "source energy [kWh]", b.source)
		cell(t, row, "losses energy [kWh]", b.losses)
		cell(t, row, "peak [kW]", b.peak)
		cell(t, row, "hours below A [h]", b.below)
		cell(t, row, "customer-hours below A [h]", b.customers)
		cell(t, row, "operations", float64(b.operations))
		cell(t, row, "low steps", float64(b.low))
		cell(t, row, "unsolved steps", float64(b.unsolved))
		cell(t, row, "settling [%]", 100*b.settling/(b.settled+b.settling))
		all.source += b.source
		all.losses += b.losses
		all.customers += b.customers
		all.below += b.below
		all.settled += b.settled
		all.settling += b.settling
		all.operations += b.operations
		all.peak = max(all.peak, b.peak)
	}
	if all.customers == 0 || all.below == 0 || all.below >= all.settled {
		t.Fatalf("%g customer-hours and %g of %g h below: the run shows nothing", all.customers, all.below, all.settled)
	}
	sum := map[string]map[string]string{}
	for _, r := range sheetRows(t, dir, "summary.csv") {
		if sum[r["quantity"]] != nil {
			t.Errorf("quantity %q stands twice", r["quantity"])
		}
		sum[r["quantity"]] = r
	}
	for q, want := range map[string]float64{
		"source energy": all.source, "losses energy": all.losses, "peak demand": all.peak,
		"customer-hours below A": all.customers, "hours with a place below A": all.below,
		"settled hours": all.settled, "settling hours": all.settling, "operations": float64(all.operations),
		"load factor": all.source / (all.settled + all.settling) / all.peak,
		"customers":   20,
	} {
		if sum[q] == nil {
			t.Fatalf("no quantity %q", q)
		}
		cell(t, sum[q], "value", want)
	}
	if len(sum) < 30 {
		t.Errorf("%d quantities, want at least 30", len(sum))
	}
}

func TestDutyAgreesWithBruteForce(t *testing.T) {
	x, s, dir := randomRun(t, 5)
	rows := sheetRows(t, dir, "duty.csv")
	for i, d := range x.plan.Devices {
		row := rows[i]
		if row["device"] != d.Name || row["phase"] != d.Phase {
			t.Fatalf("row %d is %s %s, want %s %s", i, row["device"], row["phase"], d.Name, d.Phase)
		}
		var n, raises, lowers, reversals, last int
		days := map[string]int{}
		low, high := 0, 0
		if d.Kind == CapacitorDevice {
			low, high = 1, 1
		}
		var stop, out, reverse, hunting float64
		for k := range s.steps {
			st := &s.steps[k]
			for _, a := range st.actions {
				if a.Device != i {
					continue
				}
				n++
				if a.To > a.From {
					raises++
				} else {
					lowers++
				}
				if last*(a.To-a.From) < 0 {
					reversals++
				}
				last = a.To - a.From
				days[time.Unix(0, a.Time).In(x.plan.Settings.Period.Zone).Format("2006-01-02")]++
				low, high = min(low, a.To), max(high, a.To)
			}
			if st.Status != OK {
				continue
			}
			for _, iv := range st.intervals {
				dev, h := iv.Devices[i], hoursOf(iv)
				if dev.Hunting {
					hunting += h
				}
				if !iv.Settled {
					continue
				}
				if dev.AtStop {
					stop += h
				}
				if dev.OutOfBand {
					out += h
				}
				if dev.Reverse {
					reverse += h
				}
			}
		}
		for c, want := range map[string]float64{"operations": float64(n), "raises": float64(raises), "lowers": float64(lowers), "reversals": float64(reversals),
			"lowest position": float64(low), "highest position": float64(high), "hours at a stop [h]": stop, "hours out of band [h]": out, "hours reverse [h]": reverse, "hunting [h]": hunting} {
			cell(t, row, c, want)
		}
		most := 0
		for _, c := range days {
			most = max(most, c)
		}
		cell(t, row, "operations that day", float64(most))
		if days[row["busiest day"]] != most {
			t.Errorf("busiest day %s has %d operations, want %d", row["busiest day"], days[row["busiest day"]], most)
		}
	}
}
