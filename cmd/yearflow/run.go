package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"time"

	"github.com/spf13/cobra"

	"yearflow/sim"
	"yearflow/sim/results"
	"yearflow/sim/study"
)

// runOptions are the options of run.
type runOptions struct {
	caseName, out string
	strict        bool
	noFigures     bool
	timing        bool
	reference     bool
	csv, json     string
	study         string // as the user named it
}

func runCommand(c *console) *cobra.Command {
	var o runOptions
	cmd := &cobra.Command{
		Use: "run [STUDY] [--case NAME] [--out DIR]", Short: "the period: logs, statistics, figures and report",
		Long: `Runs the study's period and writes a results folder: results/<case> in the study's
folder, or --out. The folder is exchanged for the old one when everything is written,
so it is whole or absent.

Exit status: 0 done; 1 steps were low or unsolved, or with --strict a limit was
violated; 2 the input is wrong; 3 the machine failed.`,
		Example: "  yearflow run\n  yearflow run --case lower-band --out results/lower-band",
		Args:    atMostOne("study"),
		RunE:    func(cmd *cobra.Command, args []string) error { return c.run(cmd.Context(), args, &o) },
	}
	f := cmd.Flags()
	f.StringVar(&o.caseName, "case", "", "the `NAME` of a case (default: the study as it stands)")
	f.StringVar(&o.out, "out", "", "the results folder `DIR` (default: results/<case> in the study's folder)")
	f.BoolVar(&o.strict, "strict", false, "exit status 1 where a voltage limit was violated")
	f.BoolVar(&o.noFigures, "no-figures", false, "draw no figures, and a report without them (\"yearflow report\" draws them later)")
	f.BoolVar(&o.timing, "timing", false, "say at the end where the time went")
	f.BoolVar(&o.reference, "reference", false, "solve every step by itself, slowly: the judge of the faster path")
	f.StringVar(&o.csv, "csv", "", "write the summary to this `FILE` too; - for standard output")
	f.StringVar(&o.json, "json", "", "write it to this `FILE` as JSON; - for standard output")
	return cmd
}

func (c *console) run(ctx context.Context, args []string, o *runOptions) error {
	began := time.Now()
	if len(args) > 0 {
		o.study = args[0]
	}
	st, err := c.find(args)
	if err != nil {
		return err
	}
	e, err := st.prepareWith(o.caseName, sim.Options{Timing: o.timing, Reference: o.reference})
	if err != nil {
		return err
	}
	c.warn(e.Warnings)
	dir := o.out
	if dir == "" {
		dir = st.results(o.caseName)
	}
	if err := replaceable(dir); err != nil {
		return err
	}
	inputs, err := st.inputs(e)
	if err != nil {
		return err
	}
	read := time.Now()
	w, err := results.Create(dir, e.Plan)
	if err != nil {
		return machineOr(err)
	}
	if o.timing {
		w.Time()
	}
	bar := newProgress(c.errs, e.Steps())
	counts := &tally{}
	recorders := []sim.Recorder{w, counts, bar}
	measured := e.Measured()
	if measured != nil {
		if measured.Log, err = w.MeasuredLog(); err != nil {
			return errors.Join(machineOr(err), w.Abort())
		}
		recorders = append(recorders, measured)
	}
	outcome, err := e.Run(ctx, recorders...)
	bar.end()
	if err == nil && measured != nil {
		err = w.Met(measured.Rows(), measured.PhaseSwaps())
	}
	if err != nil {
		return errors.Join(machineOr(err), w.Abort())
	}
	ran := time.Now()
	info := results.RunInfo{Version: version, Inputs: inputs, Wall: []results.WallTime{
		{Part: "reading", Seconds: read.Sub(began).Seconds()}, {Part: "run", Seconds: ran.Sub(read).Seconds()}}}
	if o.timing {
		info.Wall = append(info.Wall, wallOf(e.Timing(), w.Writing())...)
	}
	info.Warnings, info.Settings = e.Warnings, study.SettingsInForce(e.Study)
	var drawing results.WallTime
	info.Figures = func(dir string) (names []string, _ results.WallTime, err error) {
		names, drawing, err = picturesInto(dir, !o.noFigures)
		return names, drawing, err
	}
	if err := w.Finish(outcome, info); err != nil {
		return machineOr(err)
	}
	finished := time.Now()
	if err := c.tellRun(e, outcome, counts, dir, o); err != nil || !o.timing {
		return err
	}
	p := runProfile{timing: e.Timing(), speed: outcome.Speed, paths: outcome.Paths, steps: e.Steps(), rows: w.Writing(), drawing: drawing,
		reading: read.Sub(began), files: finished.Sub(ran), total: finished.Sub(began)}
	where := c.quiet(o.csv, o.json)
	if where == io.Discard {
		where = c.errs
	}
	p.write(where)
	return nil
}

// replaceable refuses to put results in the place of something else.
func replaceable(dir string) error {
	entries, err := os.ReadDir(dir)
	if err != nil || len(entries) == 0 {
		return nil // absent or empty, or the writer says what is wrong with it
	}
	for _, e := range entries {
		if e.Name() == "run.json" {
			return nil
		}
	}
	return wrongf("%s is not empty and holds no results (no run.json), and results replace the folder: name another with --out, such as %s", dir, filepath.Join(dir, "results"))
}

// machineOr marks an error of the file system as the machine's; any other stays what
// it is.
func machineOr(err error) error {
	var path *os.PathError
	var link *os.LinkError
	var number syscall.Errno
	if errors.As(err, &path) || errors.As(err, &link) || errors.As(err, &number) {
		return machineError{err}
	}
	return err
}

// tally counts steps that are not ok.
type tally struct {
	low, unsolved int
	first         *results.Step
}

var _ sim.Recorder = (*tally)(nil)

func (t *tally) Interval(*results.Interval) error { return nil }
func (t *tally) Action(*results.Action) error     { return nil }
func (t *tally) Whole(start, end int64) bool      { return false }
func (t *tally) Quiet(*results.Quiet) error       { return nil }
func (t *tally) Gathers() bool                    { return true }
func (t *tally) Gathered(*results.Gathered) error { return nil } // steps that are ok

func (t *tally) Step(s *results.Step) error {
	switch s.Status {
	case results.Low:
		t.low++
	case results.Unsolved:
		t.unsolved++
	default:
		return nil
	}
	if t.first == nil {
		first := *s
		first.Last = nil
		t.first = &first
	}
	return nil
}

// tellRun prints the summary and what is wrong.
func (c *console) tellRun(e *sim.Engine, outcome *results.Outcome, t *tally, dir string, o *runOptions) error {
	folder, err := results.ReadFolder(os.DirFS(dir))
	if err != nil {
		return machineError{fmt.Errorf("read the results back: %w", err)}
	}
	out := c.quiet(o.csv, o.json)
	fmt.Fprintf(out, "%s, case %s: results in %s\n\n", e.Study.Title, e.Study.Case, dir)
	rows := [][]string{{"quantity", "value", "unit"}}
	s := sheet{left: 1}
	for _, r := range folder.Summary {
		s.add(r.Quantity, r.Value, unitForPeople(r.Unit))
		rows = append(rows, []string{r.Quantity, r.Value, r.Unit})
	}
	s.write(out)
	fmt.Fprintf(out, "\n%s\n", folder.Met())
	for i := range folder.Swaps {
		fmt.Fprintf(c.errs, "warning: %s\n", folder.Swaps[i].Text())
	}
	for _, name := range outcome.StillMoving {
		fmt.Fprintf(c.errs, "warning: at the start %s had not come to rest after 24 h of event time\n", name)
	}
	for _, name := range outcome.CoarseAt {
		fmt.Fprintf(c.errs, "warning: the step is too coarse for operations and durations: from step to step the voltage at %s moves more than its bandwidth\n", name)
	}
	if len(outcome.Hunting) > 0 {
		fmt.Fprintf(c.errs, "warning: %s of hunting; see operations.csv and duty.csv\n", count(len(outcome.Hunting), "instant"))
	}
	c.tellAllocation(folder, dir)
	if t.first != nil {
		fmt.Fprintf(c.errs, "%s low, %s without a solution; the first at %s, %s (%s)\n", count(t.low, "step"), count(t.unsolved, "step"),
			stamp(e, t.first.Start), t.first.Where, t.first.Status)
		c.status = exitFound
	}
	if o.strict {
		bad := 0
		for _, n := range folder.Nodes {
			if folder.Judged(n) && (n.HoursBelowA > 0 || n.HoursAboveA > 0) {
				bad++
			}
		}
		if bad > 0 {
			fmt.Fprintf(c.errs, "%s outside the voltage limits at some time\n", count(bad, "place"))
			c.status = exitFound
		}
	}
	c.tellNext(out, folder, dir, o)
	return c.export(&instantOptions{csv: o.csv, json: o.json}, rows)
}

// unitForPeople leaves out what is no unit.
func unitForPeople(unit string) string {
	switch unit {
	case "kWh", "kW", "kvar", "%", "h", "V", "A", "kVA":
		return unit
	case "pu":
		return "p.u."
	}
	return ""
}

// tellNext says where the report and the figures are and how to follow the worst voltage down.
func (c *console) tellNext(out io.Writer, folder *results.Folder, dir string, o *runOptions) {
	said := map[string]string{}
	for _, r := range folder.Summary {
		said[r.Quantity] = r.Value
	}
	fmt.Fprintf(out, "\nReport: %s. ", filepath.Join(dir, reportFile))
	if !o.noFigures {
		fmt.Fprintf(out, "Figures: %s. ", filepath.Join(dir, "figures"))
	}
	place, at := said["lowest judged voltage place"], said["lowest judged voltage time"]
	if i := strings.LastIndexByte(place, '.'); i > 0 && at != "" {
		fmt.Fprintf(out, "To follow the lowest voltage down: yearflow trace")
		if o.study != "" {
			fmt.Fprintf(out, " %s", o.study)
		}
		if o.caseName != "" {
			fmt.Fprintf(out, " --case %s", o.caseName)
		}
		if o.out != "" {
			fmt.Fprintf(out, " --positions %s", o.out)
		}
		fmt.Fprintf(out, " --node %s --at %s", place[:i], at)
	}
	fmt.Fprintln(out)
}
