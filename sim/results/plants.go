package results

// plantsHeader is that of plants.csv: what generators, batteries and chargers did over
// the period, kWh at their terminals.
var plantsHeader = [...]string{"plant", "kind", "delivered [kWh]", "drawn [kWh]", "curtailed [kWh]", "losses [kWh]", "change of store [kWh]", "unserved [kWh]"}

// writePlants writes plants.csv.
func writePlants(f *outFile, plants []PlantRow) error {
	if err := f.header(plantsHeader[:]...); err != nil {
		return err
	}
	for _, p := range plants {
		f.text(p.Name)
		f.next(p.Kind)
		for _, v := range [...]float64{p.Delivered, p.Drawn, p.Curtailed, p.Losses, p.Change, p.Unserved} {
			f.figure(v)
		}
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}

// storageReading is where the batteries stood at the end of the last solved step.
type storageReading struct {
	known   bool
	kW, kWh []float64
}

func (r *storageReading) read(s *State) {
	r.known = true
	r.kW, r.kWh = r.kW[:0], append(r.kWh[:0], s.Stored...)
	for _, va := range s.Storage {
		r.kW = append(r.kW, real(va)/1000)
	}
}

// storageHeader is that of storage.csv: power delivered and energy stored, by battery;
// nothing where there are none.
func (w *Writer) storageHeader() []string {
	var head []string
	for i := range w.plan.Model.Batteries {
		if i == 0 {
			head = append(head, "time")
		}
		name := w.plan.Model.Batteries[i].Name
		head = append(head, name+" [kW]", name+" [kWh]")
	}
	return head
}

// writeStorage writes a row of storage.csv. The power is that at the end of the row;
// an unsolved step has none, and what is stored stays.
func (w *Writer) writeStorage() error {
	f := w.storage
	f.row = w.clock.append(f.row, w.row.start)
	for i := range w.plan.Model.Batteries {
		if !w.stored.known {
			f.empty(2)
			continue
		}
		if w.row.last {
			f.figure(w.stored.kW[i])
		} else {
			f.comma()
		}
		f.figure(w.stored.kWh[i])
	}
	return f.end()
}
