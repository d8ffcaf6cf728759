package results

import (
	"errors"
	"fmt"
	"strings"
	"time"

	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

// The files of a run that had measurements.
const (
	measuredFile = "measured.csv"
	seriesFile   = "measured-series.csv"
	swapsFile    = "phase-swaps.csv"
)

var (
	measuredColumns = [...]string{"quantity", "place", "phase", "samples", "bias", "mean absolute error", "p95 error", "worst error", "worst time"}
	swapColumns     = [...]string{"place", "phase", "likely phase", "compared at", "compared phase", "correlation", "correlation with likely phase", "changes"}
)

// MeasuredRow is a row of measured.csv: how the model met one measurement. Errors are
// model less measurement, in p.u. for voltages, A, kW or kvar, taps and operations;
// NaN where there was no sample. P95 is of their sizes, Worst has its sign.
type MeasuredRow struct {
	Quantity, Place, Phase         string
	Samples                        int
	Bias, MeanAbsolute, P95, Worst float64
	WorstTime                      time.Time // the beginning of that sample
}

// Title names the measurement: "voltage n12.A".
func (r *MeasuredRow) Title() string {
	t := r.Quantity + " " + r.Place
	if r.Phase != "" {
		t += "." + r.Phase
	}
	return t
}

// Unit is that of the errors: pu, A, kW, kvar, or 1.
func (r *MeasuredRow) Unit() string { return measuredUnit(r.Quantity) }

func measuredUnit(quantity string) string {
	for q := feeder.MeasuredVoltage; q <= feeder.MeasuredOperations; q++ {
		if q.String() == quantity {
			return q.Unit()
		}
	}
	return "1"
}

// SwapRow is a row of phase-swaps.csv: a measured voltage that is clearly more like
// another phase than like the one that its row names. Compared are changes from sample
// to sample, at the node At (the place itself, or the nearest one towards the source
// that has several phases), where Own stands for the row's phase.
type SwapRow struct {
	Place, Phase, Likely    string
	At, Own                 string
	Correlation, WithLikely float64
	Samples                 int // changes compared
}

// Text says it in a sentence.
func (r *SwapRow) Text() string {
	where := ""
	if r.At != r.Place {
		where = " at " + r.At
	}
	return fmt.Sprintf("the voltage measured at %s, phase %s, moves with phase %s of the model%s (correlation %.2f) and not with %s (%.2f), over %d changes: look at the phase of the place, or of its meter",
		r.Place, r.Phase, r.Likely, where, r.WithLikely, r.Own, r.Correlation, r.Samples)
}

// seriesColumn is the name of a column of measured-series.csv.
func (r *MeasuredRow) seriesColumn(kind string) string {
	return r.Title() + " " + kind + " [" + r.Unit() + "]"
}

// MeasuredLog begins measured-series.csv for the run's measurements and returns what
// takes its rows, which have the length of those of steps.csv. Above 20 million values
// there is no such log, and what is returned is nil.
func (w *Writer) MeasuredLog() (func(start int64, measured, modelled []float64) error, error) {
	ms := w.plan.Model.Measurements
	if w.err != nil || len(ms) == 0 || w.rows()*2*len(ms) > autoVoltages {
		return nil, w.err
	}
	f, err := w.addFile(seriesFile)
	if err != nil {
		return nil, err
	}
	header := []string{"time"}
	for i := range ms {
		r := MeasuredRow{Quantity: ms[i].Quantity.String(), Place: ms[i].Place, Phase: ms[i].Phase}
		header = append(header, r.seriesColumn("measured"), r.seriesColumn("modelled"))
	}
	if err := f.header(header...); err != nil {
		return nil, w.fail(err)
	}
	return func(start int64, measured, modelled []float64) error {
		if w.err != nil {
			return w.err
		}
		f.row = w.clock.append(f.row, start)
		for i := range measured {
			for _, x := range [...]float64{measured[i], modelled[i]} {
				if ms[i].Quantity == feeder.MeasuredVoltage {
					f.pu(x)
				} else {
					f.figure(x)
				}
			}
		}
		return w.fail(f.end())
	}, nil
}

// addFile begins a file of the folder that Finish hashes with the others.
func (w *Writer) addFile(name string) (*outFile, error) {
	f, err := createFile(w.folder.temp, name)
	if err != nil {
		return nil, w.fail(err)
	}
	w.more = append(w.more, f)
	return f, nil
}

// Met takes how the model met its measurements, for measured.csv, phase-swaps.csv and
// the summary. It is called before Finish.
func (w *Writer) Met(rows []MeasuredRow, swaps []SwapRow) error {
	if w.err != nil {
		return w.err
	}
	w.met = rows
	f, err := w.addFile(measuredFile)
	if err != nil {
		return err
	}
	if err := w.writeMeasured(f, rows); err != nil {
		return w.fail(err)
	}
	if f, err = w.addFile(swapsFile); err != nil {
		return err
	}
	return w.fail(writeSwaps(f, swaps))
}

func (w *Writer) writeMeasured(f *outFile, rows []MeasuredRow) error {
	errs := []error{f.header(measuredColumns[:]...)}
	for i := range rows {
		r := &rows[i]
		f.text(r.Quantity)
		f.next(r.Place)
		f.next(r.Phase)
		f.count(r.Samples)
		for _, x := range [...]float64{r.Bias, r.MeanAbsolute, r.P95, r.Worst} {
			if r.Unit() == "pu" {
				f.pu(x)
			} else {
				f.figure(x)
			}
		}
		f.at(w.clock, r.WorstTime.UnixNano(), r.Samples > 0)
		errs = append(errs, f.end())
	}
	return errors.Join(errs...)
}

func writeSwaps(f *outFile, swaps []SwapRow) error {
	errs := []error{f.header(swapColumns[:]...)}
	for _, s := range swaps {
		f.text(s.Place)
		for _, t := range [...]string{s.Phase, s.Likely, s.At, s.Own} {
			f.next(t)
		}
		f.figure(s.Correlation)
		f.figure(s.WithLikely)
		f.count(s.Samples)
		errs = append(errs, f.end())
	}
	return errors.Join(errs...)
}

// measured writes how many measurements the model was held against, none included, and
// the mean absolute error over the samples of each quantity.
func (s *summary) measured() {
	s.count("measured quantities", len(s.w.met))
	for _, m := range meanErrors(s.w.met) {
		quantity := "mean absolute error of measured " + m.quantity
		if m.unit == "pu" {
			s.pu(quantity, m.size)
		} else {
			s.figure(quantity, m.size, m.unit)
		}
	}
}

// meanError is the mean over the samples of all measurements of a quantity.
type meanError struct {
	quantity, unit string
	rows, samples  int
	bias, size     float64
}

func meanErrors(rows []MeasuredRow) (out []meanError) {
	for q := feeder.MeasuredVoltage; q <= feeder.MeasuredOperations; q++ {
		m := meanError{quantity: q.String(), unit: q.Unit()}
		for i := range rows {
			if r := &rows[i]; r.Quantity == m.quantity {
				m.rows++
				if r.Samples > 0 {
					m.samples += r.Samples
					m.bias += r.Bias * float64(r.Samples)
					m.size += r.MeanAbsolute * float64(r.Samples)
				}
			}
		}
		if m.rows > 0 {
			m.bias /= float64(m.samples) // 0/0 where there was no sample
			m.size /= float64(m.samples)
			out = append(out, m)
		}
	}
	return out
}

// Met says in a sentence how the model met its measurements, or that it never met any;
// the first page of every report has it.
func (f *Folder) Met() string {
	if len(f.Measured) == 0 {
		return "The model never met a measurement: there are none in the study."
	}
	var parts []string
	samples := 0
	for _, m := range meanErrors(f.Measured) {
		samples += m.samples
		if m.samples > 0 {
			parts = append(parts, m.text(len(parts) == 0))
		}
	}
	if len(parts) == 0 {
		return fmt.Sprintf("Of %d measured series no sample could be compared with the model.", len(f.Measured))
	}
	list := parts[0]
	if n := len(parts); n > 1 {
		list = strings.Join(parts[:n-1], ", ") + " and " + parts[n-1]
	}
	return fmt.Sprintf("Held against %d measured series (%d samples), the model is off on average by %s.", len(f.Measured), samples, list)
}

// text is the mean size of the errors with its unit, and the bias with its sign, which
// the first says is one.
func (m *meanError) text(first bool) string {
	unit, decimals := m.unit, 1
	switch {
	case m.unit == "pu":
		unit, decimals = "p.u.", 4
	case m.unit == "1":
		unit, decimals = strings.Replace(m.quantity, "tap", "taps", 1), 2
	case m.size < 1:
		decimals = 3
	}
	bias := strings.Replace(fmt.Sprintf("%+.*f", decimals, m.bias), "-", "−", 1)
	if first {
		bias = "bias " + bias
	}
	return fmt.Sprintf("%.*f %s (%s)", decimals, m.size, unit, bias)
}

// readMeasured reads the files of measurements where the run wrote them.
func (f *Folder) readMeasured(rd *reader) {
	has := map[string]bool{}
	for _, name := range f.Run.Files {
		has[name] = true
	}
	if has[measuredFile] {
		rd.each(measuredFile, func(c cells) {
			f.Measured = append(f.Measured, MeasuredRow{Quantity: c.text(0), Place: c.text(1), Phase: c.text(2), Samples: c.whole(3),
				Bias: c.number(4), MeanAbsolute: c.number(5), P95: c.number(6), Worst: c.number(7), WorstTime: c.time(8, rd.zone)})
		}, measuredColumns[:]...)
	}
	if has[swapsFile] {
		rd.each(swapsFile, func(c cells) {
			f.Swaps = append(f.Swaps, SwapRow{Place: c.text(0), Phase: c.text(1), Likely: c.text(2), At: c.text(3), Own: c.text(4),
				Correlation: c.number(5), WithLikely: c.number(6), Samples: c.whole(7)})
		}, swapColumns[:]...)
	}
	f.hasSeries = has[seriesFile]
}

// MeasuredSeries is one measurement over time, by row of measured-series.csv. Modelled
// is NaN where the model has no value.
type MeasuredSeries struct {
	MeasuredRow
	Time               []int64 // ns since 1970 UTC, the starts of rows
	Measured, Modelled []float64
}

// Series reads measured-series.csv; nil where the run kept none.
func (f *Folder) Series() ([]MeasuredSeries, error) {
	if !f.hasSeries {
		return nil, nil
	}
	var faults tables.Faults
	rd := reader{files: f.files, faults: &faults, zone: f.Run.Location}
	s := rd.series(seriesFile)
	if err := faults.Err(); err != nil {
		return nil, err
	}
	var out []MeasuredSeries
	for _, r := range f.Measured {
		x := MeasuredSeries{MeasuredRow: r, Time: s.Time, Measured: s.Column(r.seriesColumn("measured")), Modelled: s.Column(r.seriesColumn("modelled"))}
		if x.Measured == nil || x.Modelled == nil {
			return nil, fmt.Errorf("%s has no columns for %s, which %s has: the files are of two runs; run the study again", seriesFile, r.Title(), measuredFile)
		}
		out = append(out, x)
	}
	return out, nil
}
