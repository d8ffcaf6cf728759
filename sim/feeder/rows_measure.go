package feeder

import "yearflow/sim/tables"

// measurementRow is a row of measurements.csv: a series that was measured on the
// feeder and that the model is held against. A blank phase is read as all.
type measurementRow struct {
	Row      tables.Row  `csv:"@"`
	Quantity tables.Text `csv:"quantity" is:"key" words:"voltage|current|kW|kvar|tap|operations"`
	Place    tables.Text `csv:"place" is:"key"`
	Phase    tables.Text `csv:"phase" is:"key" upper:"yes"`
	Profile  tables.Text `csv:"profile" is:"required"`
}

// allPhases is what a blank phase of measurements.csv stands for, so that the phase
// can be part of the key.
const allPhases = "ALL"

// blankPhases lets a row without a phase stand for all.
func blankPhases(row tables.Record, _ []tables.Record) []string {
	if row.Text("phase") == "" {
		return []string{allPhases}
	}
	return nil
}
