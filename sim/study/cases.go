package study

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"sort"
	"strings"
	"time"

	"golang.org/x/sync/errgroup"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// Place is where a study stands and where its results go.
type Place struct {
	FS      fs.FS  // the study's folder
	Results string // the folder of its results folders
	Demo    bool
	Version string // of the program, for run.json
}

// Settings of Run. The zero value runs what has changed on all cores and draws no
// figures.
type Settings struct {
	// Again runs every case, also where its results are those of the inputs as they are.
	Again bool
	// Workers is how many cases run at once; 0 means GOMAXPROCS. No result depends on it.
	Workers int
	// Figures draws into a results folder, as results.RunInfo has it; nil for none.
	Figures func(dir string) ([]string, results.WallTime, error)
	// Watch returns recorders that see the steps of a case while it runs, on the
	// goroutine of that case; nil for none. Of a case that is not run it is not asked.
	Watch func(c *Case, e *sim.Engine) []sim.Recorder
}

// Case is one case of a study with what it gave.
type Case struct {
	Name     string
	Study    *feeder.Study
	Warnings []tables.Fault
	Inputs   map[string]string // SHA-256 of every input file
	Dir      string            // its results folder
	Results  *results.Folder
	Origin   *results.Origin
	Reused   bool // the results were there
	// Price is the energy price by step, where [prices] names a profile; Peak the
	// profile whose peak is charged.
	Price, Peak []float64
}

// LeftOut is a case that is not taken, and why.
type LeftOut struct{ Case, Why string }

// Choose opens the base and the named cases. Without names it takes all cases of the
// study whose period and step are the base's, and says which it leaves out. A named
// case that cannot be taken is an error.
func Choose(p Place, names []string) (studies []*feeder.Study, left []LeftOut, err error) {
	base, err := feeder.Open(p.FS, "")
	if err != nil {
		return nil, nil, err
	}
	studies = append(studies, base)
	all := len(names) == 0
	if all {
		names = base.Cases
	}
	seen := map[string]bool{feeder.Base: true}
	for _, name := range names {
		if seen[name] {
			continue // the base is there in any case, and a case once
		}
		seen[name] = true
		st, err := feeder.Open(p.FS, name)
		why := ""
		switch {
		case err != nil && !all:
			return nil, nil, err
		case err != nil:
			why = "its input is wrong: " + firstLine(err)
		case !st.Settings.Period.Same(base.Settings.Period):
			why = fmt.Sprintf("its period or step is another: %s, that of the base %s", spoken(st), spoken(base))
		}
		if why == "" {
			studies = append(studies, st)
			continue
		}
		if !all {
			return nil, nil, fmt.Errorf("case %q cannot be compared with the base: %s", name, why)
		}
		left = append(left, LeftOut{name, why})
	}
	return studies, left, nil
}

// spoken is a study's period in a sentence.
func spoken(st *feeder.Study) string {
	p := st.Settings.Period
	day := func(ns int64) string {
		return strings.TrimSuffix(time.Unix(0, ns).In(p.Zone).Format("2006-01-02 15:04"), " 00:00")
	}
	step := time.Duration(p.Step).String()
	step = strings.TrimSuffix(strings.TrimSuffix(step, "0s"), "0m")
	return fmt.Sprintf("%s to %s in steps of %s", day(p.Start), day(p.End), step)
}

func firstLine(err error) string {
	first, rest, more := strings.Cut(err.Error(), "\n")
	if more {
		first += fmt.Sprintf(" (and %d more)", strings.Count(rest, "\n")+1)
	}
	return first
}

// Run runs the studies, or takes the results that are there where they come from the
// same inputs and the same version of the program. Each gets the results folder that a
// single run writes. The cases come in the order of studies, whatever the number of
// workers.
func Run(ctx context.Context, p Place, studies []*feeder.Study, s Settings) ([]*Case, error) {
	out := make([]*Case, len(studies))
	g, ctx := errgroup.WithContext(ctx)
	workers := s.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	g.SetLimit(workers)
	errs := make([]error, len(studies))
	walks := &baseWalks{}
	for i, st := range studies {
		g.Go(func() error {
			out[i], errs[i] = runCase(ctx, p, st, s, walks)
			return errs[i]
		})
	}
	if err := g.Wait(); err != nil {
		// Which of several cases fails first is a matter of luck; which one is told is not.
		for i, err := range errs {
			if err != nil && !errors.Is(err, context.Canceled) {
				return nil, fmt.Errorf("case %s: %w", studies[i].Case, err)
			}
		}
		return nil, err
	}
	return out, nil
}

func runCase(ctx context.Context, p Place, st *feeder.Study, s Settings, walks *baseWalks) (*Case, error) {
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	began := time.Now()
	e, err := sim.Prepare(st, sim.Options{Demo: p.Demo})
	if err != nil {
		return nil, err
	}
	c := &Case{Name: st.Case, Study: st, Warnings: e.Warnings, Dir: filepath.Join(p.Results, st.Case)}
	if c.Inputs, err = Inputs(p.FS, e); err != nil {
		return nil, err
	}
	if err := c.profiles(e); err != nil {
		return nil, err
	}
	if !s.Again && c.reuse(p.Version) {
		return c, nil
	}
	if err := replaceable(c.Dir); err != nil {
		return nil, err
	}
	if keepsBaseLoads(st) {
		if e, err = walks.prepare(ctx, st, p.Demo); err != nil {
			return nil, err
		}
	}
	read := time.Now()
	w, err := results.Create(c.Dir, e.Plan)
	if err != nil {
		return nil, err
	}
	recorders := []sim.Recorder{w}
	if s.Watch != nil {
		recorders = append(recorders, s.Watch(c, e)...)
	}
	outcome, err := e.Run(ctx, recorders...)
	if err != nil {
		return nil, errors.Join(err, w.Abort())
	}
	info := results.RunInfo{Version: p.Version, Inputs: c.Inputs, Warnings: e.Warnings, Settings: SettingsInForce(st), Figures: s.Figures, Wall: []results.WallTime{
		{Part: "reading", Seconds: read.Sub(began).Seconds()}, {Part: "run", Seconds: time.Since(read).Seconds()}}}
	if err := w.Finish(outcome, info); err != nil {
		return nil, err
	}
	return c, c.read()
}

// Inputs returns the SHA-256 of every file that the engine's study was read from.
func Inputs(fsys fs.FS, e *sim.Engine) (map[string]string, error) {
	files := append(append([]string(nil), e.Study.Files...), e.ProfileFiles()...)
	sort.Strings(files)
	out := make(map[string]string, len(files))
	for _, f := range files {
		data, err := fs.ReadFile(fsys, f)
		if err != nil {
			return nil, fmt.Errorf("read %s: %w", f, err)
		}
		sum := sha256.Sum256(data)
		out[f] = hex.EncodeToString(sum[:])
	}
	return out, nil
}

// profiles samples the profiles that [prices] names.
func (c *Case) profiles(e *sim.Engine) (err error) {
	p := &c.Study.Settings.Prices
	if p.EnergyProfile != "" {
		if c.Price, _, err = e.Profile(p.EnergyProfile); err != nil {
			return err
		}
	}
	if p.Peak != "" {
		c.Peak, _, err = e.Profile(p.Peak)
	}
	return err
}

// usedFiles are the files of a results folder that documents are made from.
func usedFiles() []string {
	return []string{"steps.csv", "nodes.csv", "duty.csv", "losses.csv", "loading.csv", "monthly.csv", "summary.csv", "devices.csv"}
}

// reuse takes the results that are there, if they are whole and come from the same
// inputs and the same version. A folder of another version is no error here: it is
// run again.
func (c *Case) reuse(version string) bool {
	fsys := os.DirFS(c.Dir)
	o, err := results.ReadOrigin(fsys)
	if err != nil || o.Version != version || o.Case != c.Name || len(o.Inputs) != len(c.Inputs) {
		return false
	}
	for f, h := range c.Inputs {
		if o.Inputs[f] != h {
			return false
		}
	}
	if o.Intact(fsys, usedFiles()...) != nil || c.read() != nil {
		return false
	}
	c.Reused = true
	return true
}

// read reads the results back.
func (c *Case) read() (err error) {
	fsys := os.DirFS(c.Dir)
	if c.Origin, err = results.ReadOrigin(fsys); err != nil {
		return err
	}
	c.Results, err = results.ReadFolder(fsys)
	return err
}

// replaceable refuses to put results in the place of something else.
func replaceable(dir string) error {
	entries, err := os.ReadDir(dir)
	if err != nil || len(entries) == 0 {
		return nil // absent or empty, or the writer says what is wrong with it
	}
	if _, err := os.Stat(filepath.Join(dir, "run.json")); err == nil {
		return nil
	}
	return fmt.Errorf("%s is not empty and holds no results (no run.json), and results replace the folder: move it away", dir)
}

// value returns a row of summary.csv as it is written, with its unit; blank where the
// folder has none.
func (c *Case) value(quantity string) (text, unit string) {
	for _, r := range c.Results.Summary {
		if r.Quantity == quantity {
			return r.Value, r.Unit
		}
	}
	return "", ""
}

// number returns it as a number, NaN where there is none.
func (c *Case) number(quantity string) float64 {
	text, _ := c.value(quantity)
	return parse(text)
}

// record names the runs that a document was made from.
func record(cases []*Case) []results.TablesCase {
	var out []results.TablesCase
	for _, c := range cases {
		out = append(out, results.TablesCase{Case: c.Name, Folder: filepath.Base(c.Dir), Run: c.Origin.Run, Inputs: c.Inputs})
	}
	return out
}
