package study

import "yearflow/sim/feeder"

// SettingsInForce is settings.csv of a run: the settings of every control that its study
// holds, beside those of the base, the header first. Settings are in the order and the
// words of a settings sheet. The base's cells are blank where the base does not read, as
// a case may mend what is wrong with it, and of devices that are in the case alone.
func SettingsInForce(st *feeder.Study) [][]string {
	base := st.Model
	if st.Case != "" && st.Case != feeder.Base {
		base = &feeder.Model{}
		if b, err := feeder.Open(st.FS, feeder.Base); err == nil {
			base = b.Model
		}
	}
	rows := [][]string{{"device", "phase", "setting", "kind", "unit", "value", "base"}}
	for _, r := range sheetRows(base, st.Model) {
		rows = append(rows, []string{r.Device, r.Phase, r.Setting, r.Kind, r.Unit, r.New, r.Present})
	}
	return rows
}
