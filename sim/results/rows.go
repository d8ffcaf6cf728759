package results

import (
	"math"
	"time"
)

var stepsColumns = [...]string{"time", "status", "source real [kW]", "source reactive [kvar]", "load real [kW]", "load reactive [kvar]",
	"generation real [kW]", "generation reactive [kvar]", "losses real [kW]", "losses reactive [kvar]", "capacitors reactive [kvar]",
	"line losses [kW]", "transformer load losses [kW]", "transformer no-load losses [kW]", "regulator losses [kW]",
	"lowest [pu]", "lowest at", "highest [pu]", "highest at", "lowest in step [pu]", "highest in step [pu]",
	"unbalance [%]", "unbalance at", "negative sequence [%]", "actions",
	"source energy [kWh]", "load energy [kWh]", "generation energy [kWh]", "losses energy [kWh]"}

func stepsHeader() []string {
	columns := append([]string(nil), stepsColumns[:]...)
	for _, p := range [...]string{"A", "B", "C"} {
		columns = append(columns, "source "+p+" real [kW]", "source "+p+" reactive [kvar]", "source "+p+" current [A]")
	}
	return columns
}

var operationsHeader = [...]string{"time", "device", "phase", "from", "to", "reason", "measured", "set", "waited [s]"}

func (w *Writer) voltagesHeader() []string {
	columns := []string{"time"}
	for _, i := range w.places {
		columns = append(columns, w.meter.Points[i].Name)
	}
	return columns
}

func (w *Writer) flowsHeader() []string {
	columns := []string{"time"}
	for _, e := range w.ends {
		for k := range e.phases {
			columns = append(columns, e.name+"."+e.phases[k].phase.String()+" [A]")
		}
		columns = append(columns, e.name+" [kW]", e.name+" [kvar]")
	}
	return columns
}

func (w *Writer) devicesHeader() []string {
	columns := append([]string{"time"}, w.plan.TapNames...)
	for i := range w.plan.Model.Capacitors {
		columns = append(columns, w.plan.Model.Capacitors[i].Name)
	}
	return columns
}

// flowReading is a logged flow at the end of a step.
type flowReading struct {
	amps  []float64
	power complex128
}

func (f *flowReading) read(e *endFlow, s *State) {
	for k := range e.phases {
		f.amps[k] = magnitude(e.phases[k].current(s))
	}
	f.power = e.power(s)
}

// writeRow writes the open row to every log. voltages.csv and flows.csv have no
// rows where nothing was chosen for them.
func (w *Writer) writeRow() error {
	if w.timed {
		began := time.Now()
		defer func() { w.writing += time.Since(began) }()
	}
	err := w.writeStep()
	if err == nil && len(w.places) > 0 {
		err = w.writeVoltages()
	}
	if err == nil && len(w.ends) > 0 {
		err = w.writeFlows()
	}
	if err == nil {
		err = w.writeDevices()
	}
	if err == nil && w.storage != nil {
		err = w.writeStorage()
	}
	w.row.steps, w.row.begun = 0, false
	return err
}

func (w *Writer) writeStep() error {
	f, row := w.steps, &w.row
	f.row = w.clock.append(f.row, row.start)
	f.next(row.status.String())
	if row.last {
		w.writeInstant(f)
	} else {
		f.empty(17)
	}
	if row.solved > 0 && row.lowest <= row.highest {
		f.pu(row.lowest)
		f.pu(row.highest)
	} else {
		f.empty(2)
	}
	if row.last {
		f.figure(w.now.Unbalance)
		f.comma()
		if w.now.UnbalanceAt >= 0 {
			f.text(w.plan.Model.Nodes[w.now.UnbalanceAt].Name)
		}
		f.figure(w.now.NegativeSequence)
	} else {
		f.empty(3)
	}
	f.count(row.actions)
	if row.solved > 0 {
		f.figure(kWh(row.source))
		f.figure(kWh(row.load))
		f.figure(kWh(row.generation))
		f.figure(kWh(row.losses))
	} else {
		f.empty(4)
	}
	for p := range w.now.SourcePhase {
		if !row.last {
			f.empty(3)
			continue
		}
		f.power(w.now.SourcePhase[p])
		f.figure(w.now.SourceCurrent[p])
	}
	return f.end()
}

// writeInstant writes the powers and the extreme voltages at the end of the row.
func (w *Writer) writeInstant(f *outFile) {
	r := w.now
	f.power(r.Source)
	f.power(r.Load)
	f.power(r.Generation)
	f.power(r.Losses)
	f.figure(imag(r.Capacitors) / 1000)
	for _, va := range r.ByKind {
		f.figure(real(va) / 1000)
	}
	if r.Lowest < 0 {
		f.empty(4)
		return
	}
	f.pu(r.PU[r.Lowest])
	f.next(w.meter.Points[r.Lowest].Name)
	f.pu(r.PU[r.Highest])
	f.next(w.meter.Points[r.Highest].Name)
}

func (w *Writer) writeVoltages() error {
	f := w.voltages
	f.begin(w.clock, w.row.start)
	if !w.row.last {
		f.empty(len(w.places))
		return f.end()
	}
	for _, i := range w.places {
		f.pu(w.now.PU[i])
	}
	return f.end()
}

func (w *Writer) writeFlows() error {
	f := w.flows
	f.begin(w.clock, w.row.start)
	for i := range w.flowNow {
		x := &w.flowNow[i]
		if !w.row.last {
			f.empty(len(x.amps) + 2)
			continue
		}
		for _, a := range x.amps {
			f.figure(a)
		}
		f.power(x.power)
	}
	return f.end()
}

// writeDevices writes the positions, which an unsolved step leaves as they are.
func (w *Writer) writeDevices() error {
	f := w.devices
	f.row = w.clock.append(f.row, w.row.start)
	for _, tap := range w.taps {
		f.count(tap)
	}
	for _, closed := range w.caps {
		f.count(closedAs(closed))
	}
	return f.end()
}

func (w *Writer) writeOperation(a *Action, d *Device) error {
	f := w.operations
	f.row = w.clock.append(f.row, a.Time)
	f.next(d.Name)
	f.next(d.Phase)
	f.count(a.From)
	f.count(a.To)
	f.next(a.Reason)
	f.figure(a.Measured)
	f.figure(a.Set)
	f.comma()
	if !math.IsNaN(a.Waited) {
		f.row = appendTrimmed(f.row, a.Waited)
	}
	return f.end()
}

// power writes kW and kvar.
func (f *outFile) power(va complex128) {
	f.figure(real(va) / 1000)
	f.figure(imag(va) / 1000)
}
