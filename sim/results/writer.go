package results

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"
)

// autoVoltages is the number of voltages up to which voltages = "auto" keeps all.
const autoVoltages = 20_000_000

// Writer writes a results folder while a study runs. Memory does not grow with the
// period, but for the voltages that exact percentiles need (at most exactValues).
//
// An error of any method is final: later calls return it again, and Abort clears
// up. The old folder stays as it is until Finish has written and synced everything.
type Writer struct {
	plan   *Plan
	folder *folder
	clock  *zoneClock
	meter  *Meter
	stats  *statistics
	duty   []duty
	err    error
	closed bool

	steps, voltages, flows, devices, operations *outFile
	storage                                     *outFile // nil without batteries
	allocation                                  *outFile // nil without one
	shared                                      allocationCounts
	hashes                                      map[string]string

	places []int // of voltages.csv, into Meter.Points
	ends   []*endFlow

	pend pending
	row  row
	now  *Reading // at the end of the last step: own, or that of its last interval
	own  *Reading
	// The state of the last interval, its end, and what was read of it.
	seen    *State
	seenEnd int64
	reading *Reading
	taps    []int // positions as far as they are known
	caps    []bool

	solver  map[string]int // steps by the path of their last solution
	trouble []troubleOut   // the first steps that are not OK, at most troubleKept
	balance balanceCheck
	flowNow []flowReading
	stored  storageReading

	more []*outFile    // of measurements
	met  []MeasuredRow // how the model met them

	timed   bool
	writing time.Duration
}

// balanceCheck is how well the balance of power closed over all solved intervals.
type balanceCheck struct {
	checked int
	worst   float64 // of the sum of apparent powers
	at      int64
}

func (b *balanceCheck) take(r *Reading, at int64) {
	p, q, scale := r.Balance()
	b.checked++
	if scale <= 0 {
		return
	}
	if off := max(abs(p), abs(q)) / scale; off > b.worst || off != off {
		b.worst, b.at = off, at
	}
}

func abs(x float64) float64 {
	if x < 0 {
		return -x
	}
	return x
}

// Create begins a results folder that will stand at dir. It is written into a
// hidden folder beside it; hidden folders of killed runs are removed. Names in
// [run] voltages and flows that the model does not have are errors.
func Create(dir string, p *Plan) (*Writer, error) {
	return create(dir, p, exactValues)
}

func create(dir string, p *Plan, exact int) (*Writer, error) {
	w := &Writer{plan: p, clock: newZoneClock(p.Settings.Period.Zone), hashes: map[string]string{}, solver: map[string]int{}}
	w.meter = NewMeter(p.Network)
	if err := w.choose(); err != nil {
		return nil, err
	}
	w.stats = newStatistics(p, w.meter, exact)
	w.pend = newPending(w.meter, len(w.stats.judge.services), len(p.Devices))
	w.duty = make([]duty, len(p.Devices))
	w.own = w.meter.NewReading()
	w.now = w.own
	w.startPositions()
	f, err := createFolder(dir)
	if err != nil {
		return nil, err
	}
	w.folder = f
	if err := w.open(); err != nil {
		return nil, errors.Join(err, w.Abort())
	}
	return w, nil
}

// choose finds the columns of voltages.csv and flows.csv.
func (w *Writer) choose() error {
	run := &w.plan.Settings.Run
	var errs []error
	switch run.Voltages {
	case "none":
	case "list":
		for _, name := range run.Places {
			i := slices.IndexFunc(w.meter.Points, func(p Point) bool { return p.Name == name })
			if i < 0 {
				errs = append(errs, fmt.Errorf("[run] voltages: there is no place %q: want node.phase (node.AB and so on where nothing grounds the node)", name))
				continue
			}
			w.places = append(w.places, i)
		}
	default:
		if run.Voltages == "all" || w.rows()*len(w.meter.Points) <= autoVoltages {
			for i := range w.meter.Points {
				w.places = append(w.places, i)
			}
		}
	}
	for _, name := range run.Flows {
		e, ok := w.meter.flowOf(name)
		if !ok {
			errs = append(errs, fmt.Errorf("[run] flows: there is no section, transformer, regulator or closed switch %q", name))
			continue
		}
		w.ends = append(w.ends, e)
	}
	w.flowNow = make([]flowReading, len(w.ends))
	for i, e := range w.ends {
		w.flowNow[i].amps = make([]float64, len(e.phases))
	}
	return errors.Join(errs...)
}

// rows is the number of rows of steps.csv.
func (w *Writer) rows() int {
	p := w.plan.Settings.Period
	p.Step = max(p.Step, w.plan.Settings.Run.Log)
	return p.Steps()
}

// startPositions takes the positions of the tables, which hold until the first
// solution says otherwise.
func (w *Writer) startPositions() {
	m := w.plan.Model
	for i := range m.Regulators {
		for _, u := range m.Regulators[i].Units {
			tap := 0
			if u.Settings != nil {
				tap = u.Settings.Tap
			}
			w.taps = append(w.taps, tap)
		}
	}
	for i := range m.Capacitors {
		w.caps = append(w.caps, m.Capacitors[i].Closed)
	}
}

// open creates the logs and writes their headers.
func (w *Writer) open() (err error) {
	for _, x := range []struct {
		file   **outFile
		name   string
		header []string
	}{
		{&w.steps, "steps.csv", stepsHeader()},
		{&w.voltages, w.series("voltages"), w.voltagesHeader()},
		{&w.flows, w.series("flows"), w.flowsHeader()},
		{&w.devices, "devices.csv", w.devicesHeader()},
		{&w.operations, "operations.csv", operationsHeader[:]},
		{&w.storage, "storage.csv", w.storageHeader()},
		{&w.allocation, "allocation.csv", w.allocationHeader()},
	} {
		if len(x.header) == 0 {
			continue // nothing of the kind in the model
		}
		if *x.file, err = createFile(w.folder.temp, x.name); err != nil {
			return err
		}
		if strings.HasSuffix(x.name, parquetEnding) {
			if (*x.file).columns, err = newColumnFile(*x.file, x.header); err != nil {
				return fmt.Errorf("%s: %w", x.name, err)
			}
		} else {
			err = (*x.file).header(x.header...)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// series is the name of a file that [run] series has a say in.
func (w *Writer) series(name string) string {
	if w.plan.Settings.Run.Parquet {
		return name + parquetEnding
	}
	return name + ".csv"
}

var errClosed = errors.New("results: the folder is finished or given up")

// fail keeps the first error.
func (w *Writer) fail(err error) error {
	if w.err == nil {
		w.err = err
	}
	return w.err
}

// Action logs a movement of a device.
func (w *Writer) Action(a *Action) error {
	if w.err != nil {
		return w.err
	}
	d := &w.plan.Devices[a.Device]
	w.duty[a.Device].act(a, w.clock.dayOf(a.Time))
	month := w.stats.month(w.clock.monthOf(a.Time))
	if d.Kind == TapDevice {
		month.tapOperations++
		w.stats.total.tapOperations++
		for _, u := range d.Units {
			w.taps[u] = a.To
		}
	} else {
		month.capOperations++
		w.stats.total.capOperations++
		w.caps[d.Index] = a.To != 0
	}
	return w.fail(w.writeOperation(a, d))
}

// Interval takes an interval; it belongs to the step that is closed next.
func (w *Writer) Interval(iv *Interval) error {
	if w.err != nil {
		return w.err
	}
	if iv.End <= iv.Start {
		return nil
	}
	x := w.pend.sample()
	x.start, x.end = iv.Start, iv.End
	w.meter.Read(iv.State, x.reading)
	w.seen, w.seenEnd, w.reading = iv.State, iv.End, x.reading
	w.balance.take(x.reading, iv.Start)
	w.pend.take(x, iv, w.stats.judge)
	return nil
}

// Step closes a step and the row of the logs that ends with it.
func (w *Writer) Step(s *Step) error {
	if w.err != nil {
		return w.err
	}
	month := w.stats.month(w.clock.monthOf(s.Start))
	for _, b := range [...]*bucket{&w.stats.total, month} {
		b.steps++
		switch s.Status {
		case Low:
			b.low++
		case Unsolved:
			b.unsolved++
		}
	}
	if s.Solver != "" {
		w.solver[s.Solver]++
	}
	if s.Status != OK && len(w.trouble) < troubleKept {
		w.trouble = append(w.trouble, troubleOut{w.clock.text(s.Start), s.Status.String(), s.Where})
	}
	if s.Allocation != nil && w.allocation != nil {
		if err := w.writeAllocation(s); err != nil {
			return w.fail(err)
		}
	}
	if s.Last != nil {
		w.now = w.own
		if s.Last == w.seen && s.End == w.seenEnd {
			w.now = w.reading // of the interval that the step ends with
		} else {
			w.meter.Read(s.Last, w.now)
		}
		w.balance.take(w.now, s.Start)
		copy(w.taps, s.Last.Taps)
		copy(w.caps, s.Last.Closed)
		for i, e := range w.ends {
			w.flowNow[i].read(e, s.Last)
		}
		w.stored.read(s.Last)
	}
	w.row.add(s, &w.pend)
	if s.Status == OK {
		w.pend.commit(w.stats, month, w.duty)
	}
	w.pend.reset()
	if w.rowEnds(s) {
		return w.fail(w.writeRow())
	}
	return nil
}

// rowEnds tells whether a row of the logs ends with the step.
func (w *Writer) rowEnds(s *Step) bool {
	p, length := &w.plan.Settings.Period, w.plan.Settings.Run.Log
	if length <= p.Step || s.End >= p.End {
		return true
	}
	return (s.End-p.Start)/length > (s.Start-p.Start)/length
}

// Time has the writer measure how long it writes rows of the logs.
func (w *Writer) Time() { w.timed = true }

// Writing is how long it wrote rows of the logs so far, where Time was called.
func (w *Writer) Writing() time.Duration { return w.writing }

// Abort removes what has been written; an older folder stays.
func (w *Writer) Abort() error {
	if w.closed {
		return nil
	}
	w.closed = true
	w.fail(errClosed)
	for _, f := range w.logs() {
		if f != nil {
			f.out.Close() // the folder goes away
		}
	}
	return w.folder.abort()
}

func (w *Writer) logs() []*outFile {
	logs := []*outFile{w.steps, w.voltages, w.flows, w.devices, w.operations}
	if w.storage != nil {
		logs = append(logs, w.storage)
	}
	if w.allocation != nil {
		logs = append(logs, w.allocation)
	}
	return append(logs, w.more...)
}

// Finish writes the remaining files, syncs everything and puts the folder in its
// place. On an error the folder that stood there before stays, and the new one is
// removed.
func (w *Writer) Finish(o *Outcome, run RunInfo) error {
	if w.err != nil {
		return w.err
	}
	if err := w.finish(o, run); err != nil {
		return errors.Join(w.fail(err), w.Abort())
	}
	w.closed = true
	if err := w.folder.exchange(); err != nil {
		w.fail(err)
		return errors.Join(err, w.folder.abort())
	}
	w.fail(errClosed)
	return nil
}

func (w *Writer) finish(o *Outcome, run RunInfo) error {
	if w.row.steps > 0 {
		if err := w.writeRow(); err != nil {
			return err
		}
	}
	w.stats.gather()
	w.finalPositions(o)
	for _, f := range w.logs() {
		if err := w.keep(f, nil); err != nil {
			return err
		}
	}
	for _, t := range []struct {
		name  string
		write func(*outFile) error
	}{
		{"duty.csv", w.writeDuty},
		{"nodes.csv", w.writeNodes},
		{"losses.csv", w.writeLosses},
		{"loading.csv", w.writeLoading},
		{"monthly.csv", w.writeMonthly},
		{"summary.csv", w.writeSummary},
		{"places.csv", w.writePlaces},
		{"network.csv", w.writeNetwork},
		{"plants.csv", func(f *outFile) error { return writePlants(f, o.Plants) }},
		{"mended.csv", w.writeMended},
		{"settings.csv", func(f *outFile) error { return f.rows(run.Settings) }},
	} {
		if t.name == "mended.csv" && len(w.plan.Mended) == 0 || t.name == "settings.csv" && run.Settings == nil {
			continue
		}
		f, err := createFile(w.folder.temp, t.name)
		if err != nil {
			return err
		}
		if err := w.keep(f, t.write(f)); err != nil {
			return err
		}
	}
	if err := w.writeRun(o, run); err != nil {
		return err
	}
	if run.Figures != nil {
		if err := w.draw(o, &run); err != nil {
			return err
		}
	}
	return w.writeTiming(run)
}

// draw adds the figures, which are drawn from the files and from run.json, and
// writes run.json anew with their hashes.
func (w *Writer) draw(o *Outcome, run *RunInfo) error {
	names, wall, err := run.Figures(w.folder.temp)
	if err != nil {
		return err
	}
	run.Wall = append(slices.Clone(run.Wall), wall)
	for _, name := range names {
		if w.hashes[name], err = syncAndHash(w.folder.temp, name); err != nil {
			return err
		}
	}
	return w.writeRun(o, *run)
}

// syncAndHash hands a file that somebody else wrote to the disk and returns its hash.
func syncAndHash(dir, name string) (string, error) {
	f, err := os.OpenFile(filepath.Join(dir, name), os.O_RDWR, 0)
	if err != nil {
		return "", fmt.Errorf("read %s: %w", name, err)
	}
	defer f.Close()
	sum := sha256.New()
	if _, err := io.Copy(sum, f); err != nil {
		return "", fmt.Errorf("read %s: %w", name, err)
	}
	if err := f.Sync(); err != nil {
		return "", fmt.Errorf("write %s: %w", name, err)
	}
	return hex.EncodeToString(sum.Sum(nil)), nil
}

// keep finishes a file and notes its hash; err is how writing it went.
func (w *Writer) keep(f *outFile, err error) error {
	if err != nil {
		f.out.Close()
		return err
	}
	if err := f.finish(); err != nil {
		return err
	}
	w.hashes[f.name] = f.hash()
	return nil
}
