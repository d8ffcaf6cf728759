package results

// writeMended writes mended.csv: every rule that edited, or found odd, a meter's data,
// with how many values and how much energy it added.
func (w *Writer) writeMended(f *outFile) error {
	if err := f.header("meter", "rule", "from", "to", "values", "energy added [kWh]"); err != nil {
		return err
	}
	for _, m := range w.plan.Mended {
		f.text(m.Meter)
		f.next(m.Rule)
		f.comma()
		f.row = w.clock.append(f.row, m.From)
		f.comma()
		f.row = w.clock.append(f.row, m.To)
		f.count(m.Count)
		f.figure(m.Energy)
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}
