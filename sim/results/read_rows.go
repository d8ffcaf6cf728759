package results

import "strings"

// The small files of the folder, column by column as section 7 of the design has them.

func (f *Folder) readNodes(rd *reader) {
	rd.each("nodes.csv", func(c cells) {
		f.Nodes = append(f.Nodes, NodeRow{
			Node: c.text(0), Phase: c.text(1), NominalKV: c.number(2), Customers: c.number(3),
			Min: c.number(4), MinTime: c.time(5, rd.zone), Max: c.number(6), MaxTime: c.time(7, rd.zone),
			Mean: c.number(8), P1: c.number(9), P5: c.number(10), P50: c.number(11), P95: c.number(12), P99: c.number(13),
			HoursBelowA: c.number(14), HoursAboveA: c.number(15), HoursBelowB: c.number(16), HoursAboveB: c.number(17),
			CustomerHoursBelowA: c.number(18), CustomerHoursAboveA: c.number(19), SettlingHoursOutsideA: c.number(20),
			LowestSettling: c.number(21), HighestSettling: c.number(22),
		})
	}, "node", "phase", "nominal [kV]", "customers", "min [pu]", "min time", "max [pu]", "max time", "mean [pu]",
		"p1 [pu]", "p5 [pu]", "p50 [pu]", "p95 [pu]", "p99 [pu]", "hours below A [h]", "hours above A [h]",
		"hours below B [h]", "hours above B [h]", "customer-hours below A [h]", "customer-hours above A [h]",
		"settling hours outside A [h]", "lowest settling [pu]", "highest settling [pu]")
}

func (f *Folder) readOperations(rd *reader) {
	rd.each("operations.csv", func(c cells) {
		f.Operations = append(f.Operations, OperationRow{
			Time: c.time(0, rd.zone), Device: c.text(1), Phase: c.text(2), From: c.whole(3), To: c.whole(4),
			Reason: c.text(5), Measured: c.number(6), Set: c.number(7), Waited: c.number(8),
		})
	}, "time", "device", "phase", "from", "to", "reason", "measured", "set", "waited [s]")
}

func (f *Folder) readDuty(rd *reader) {
	rd.each("duty.csv", func(c cells) {
		f.Duty = append(f.Duty, DutyRow{
			Device: c.text(0), Phase: c.text(1), Operations: c.whole(2), Raises: c.whole(3), Lowers: c.whole(4),
			Reversals: c.whole(5), BusiestDay: c.text(6), OperationsThatDay: c.whole(7), LowestPosition: c.whole(8),
			HighestPosition: c.whole(9), HoursAtStop: c.number(10), HoursOutOfBand: c.number(11),
			HoursReverse: c.number(12), Hunting: c.number(13),
		})
	}, "device", "phase", "operations", "raises", "lowers", "reversals", "busiest day", "operations that day",
		"lowest position", "highest position", "hours at a stop [h]", "hours out of band [h]", "hours reverse [h]", "hunting [h]")
}

func (f *Folder) readLosses(rd *reader) {
	rd.each("losses.csv", func(c cells) {
		f.Losses = append(f.Losses, LossRow{
			Element: c.text(0), Kind: c.text(1), EnergyKWh: c.number(2), SharePercent: c.number(3),
			PeakKW: c.number(4), PeakTime: c.time(5, rd.zone),
		})
	}, "element", "kind", "energy [kWh]", "share [%]", "peak [kW]", "peak time")
}

func (f *Folder) readLoading(rd *reader) {
	rd.each("loading.csv", func(c cells) {
		f.Loading = append(f.Loading, LoadingRow{
			Element: c.text(0), Phase: c.text(1), Peak: c.number(2), Rating: c.number(3), Percent: c.number(4),
			PeakTime: c.time(5, rd.zone), HoursAboveRating: c.number(6), HoursAboveEmergency: c.number(7),
		})
	}, "element", "phase", "peak [A]", "rating [A]", "loading [%]", "peak time", "hours above rating [h]", "hours above emergency [h]")
}

func (f *Folder) readPlaces(rd *reader) {
	rd.each("places.csv", func(c cells) {
		f.Places = append(f.Places, PlaceRow{
			Node: c.text(0), X: c.number(1), Y: c.number(2), LongLat: c.text(3) == "yes",
			DistanceKM: c.number(4), NominalKV: c.number(5), Phases: c.text(6), Judged: strings.Fields(c.text(7)),
		})
	}, "node", "x", "y", "longlat", "distance [km]", "nominal [kV]", "phases", "judged")
	f.judged = make(map[string][]string, len(f.Places))
	for _, p := range f.Places {
		f.judged[p.Node] = p.Judged
	}
}

func (f *Folder) readBranches(rd *reader) {
	rd.each("network.csv", func(c cells) {
		f.Branches = append(f.Branches, BranchRow{
			Element: c.text(0), Kind: c.text(1), From: c.text(2), To: c.text(3), Phases: c.text(4), LengthKM: c.number(5),
		})
	}, "element", "kind", "from", "to", "phases", "length [km]")
}

func (f *Folder) readSummary(rd *reader) {
	rd.each("summary.csv", func(c cells) {
		f.Summary = append(f.Summary, SummaryRow{Quantity: c.text(0), Value: c.text(1), Unit: c.text(2)})
	}, "quantity", "value", "unit")
}
