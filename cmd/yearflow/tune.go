package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"yearflow/plots"
	"yearflow/sim/results"
	"yearflow/sim/study"
	"yearflow/sim/tables"
)

// tuneOptions are the options of tune.
type tuneOptions struct {
	out       string
	again     bool
	budget    int
	seed      uint64
	csv, json string
}

func tuneCommand(c *console) *cobra.Command {
	var o tuneOptions
	cmd := &cobra.Command{
		Use: "tune [STUDY]", Short: "searches settings inside given bounds; writes the best as a case",
		Long: `Searches set voltages, bandwidths, delays, line-drop compensation and the set points of
capacitors inside the bounds of [tune] in study.toml, for its aims and within its limits.
Every candidate is judged on the whole period. Without [tune] settings the set voltages
of all regulators are searched, 2 V either way in half volts, for customer-hours outside
range A, losses and operations.

The best is written as a case of the study (cases/tuned, or tuned-2, ... : a case that is
there is never touched; of the demo results/tune/case), with a settings sheet, how flat
the optimum is and which settings matter. What has been evaluated stands in a log beside
the folder: a search that was stopped goes on where it was (--again begins anew).

Exit status: 0 done; 1 no candidate keeps all limits; 2 the input is wrong; 3 the machine
failed.`,
		Example: "  yearflow tune --budget 40\n  yearflow tune --seed 2",
		Args:    atMostOne("study"),
		RunE:    func(cmd *cobra.Command, args []string) error { return c.tune(cmd.Context(), args, &o) },
	}
	f := cmd.Flags()
	f.StringVar(&o.out, "out", "", "the folder `DIR` of the document (default: results/tune in the study's folder)")
	f.BoolVar(&o.again, "again", false, "forget the log and evaluate every candidate anew")
	f.IntVar(&o.budget, "budget", 0, "how many candidate-`YEARS` are evaluated at most, the base among them (default: that of [tune], else 200)")
	f.Uint64Var(&o.seed, "seed", 0, "the `NUMBER` that the search draws from (default: that of [tune], else 1)")
	f.StringVar(&o.csv, "csv", "", "write tune.csv to this `FILE` too; - for standard output")
	f.StringVar(&o.json, "json", "", "write it to this `FILE` as JSON; - for standard output")
	return cmd
}

func (c *console) tune(ctx context.Context, args []string, o *tuneOptions) error {
	if o.budget < 0 {
		return wrongf("--budget %d: want a number of candidate-years above 0", o.budget)
	}
	st, place, err := c.place(args)
	if err != nil {
		return err
	}
	dir := o.out
	if dir == "" {
		dir = filepath.Join(place.Results, "tune")
	}
	dir = filepath.Clean(dir)
	if entries, err := os.ReadDir(dir); err == nil && len(entries) > 0 { // told before the work, not after it
		if _, err := os.Stat(filepath.Join(dir, "tune.json")); err != nil {
			return documentError(&results.Occupied{Dir: dir, Kind: "tune"})
		}
	}
	log := dir + "-log.csv"
	t, err := study.Tune(ctx, place, study.TuneSettings{Log: log, Again: o.again, Budget: o.budget, Seed: o.seed, Watch: c.watchTune})
	var faults tables.Faults
	switch {
	case errors.Is(err, context.Canceled):
		fmt.Fprintf(c.errs, "what has been evaluated stands in %s: the same command goes on from there\n", log)
		return err
	case errors.As(err, &faults):
		return inputError{err}
	case err != nil:
		return machineOr(err)
	}
	if err := t.Write(dir, place, drawDocument("tune.html", plots.TuneDocument)); err != nil {
		return documentError(err)
	}
	where := filepath.Join(dir, "case")
	if !st.demo && t.CaseName != "" {
		if err := t.WriteCase(st.dir); err != nil {
			return machineOr(err)
		}
		where = filepath.Join(st.dir, "cases", t.CaseName)
	}
	c.tellTune(c.quiet(o.csv, o.json), t, dir, where)
	return c.export(&instantOptions{csv: o.csv, json: o.json}, t.Tables()[0].Rows)
}

// watchTune says how far a search is, a line a batch.
func (c *console) watchTune(evaluated, budget int, base, best *study.Point) {
	fmt.Fprintf(c.errs, "%d of at most %d candidate-years", evaluated, budget)
	if best != nil {
		fmt.Fprintf(c.errs, ", best score %s, of the base %s", cell(best.Score, 2), cell(base.Score, 2))
	}
	fmt.Fprintln(c.errs)
}

func (c *console) tellTune(out io.Writer, t *study.Tuning, dir, where string) {
	fmt.Fprintf(out, "%s: settings searched, %s; %s\n", t.Title, count(t.Evaluated, "candidate-year"), t.Stopped)
	fmt.Fprintf(out, "Document and tables in %s\n\n", dir)
	tables := map[string][][]string{}
	for _, x := range t.Tables() {
		tables[x.Name] = x.Rows
	}
	s := sheet{left: 1}
	s.add("quantity", "base", "best", "unit", "weight")
	for i, r := range tables["tune.csv"] {
		if i == 1 || i > 1 && r[6] != "" || i > 1 && r[9] != "" {
			s.add(r[0], r[2], r[3], unitForPeople(r[1]), r[6])
		}
	}
	s.write(out)
	if t.Best == nil {
		fmt.Fprintf(out, "\nNo candidate within the bounds was evaluated.\nThe document: %s\n", filepath.Join(dir, "tune.html"))
		return
	}
	fmt.Fprintf(out, "\nsetting by setting, the one that matters most first; flat: as good as the best\n(%s), the others held\n\n", t.FlatText())
	s = sheet{left: 1}
	s.add("setting", "base", "best", "range of score", "step down", "step up", "flat from", "to")
	for _, r := range t.Sensitivities {
		row := tables["settings.csv"][r.Index+1]
		line := tables["sensitivity.csv"]
		for _, l := range line[1:] {
			if l[1] == row[0] && l[2] == row[1] && l[3] == row[2] {
				s.add(r.Knob.Name(), row[7], row[8], cell(r.Range, 2), cell(r.Down, 2), cell(r.Up, 2), l[9], l[10])
			}
		}
	}
	s.write(out)
	fmt.Fprintf(out, "\n%s as good as the best (it is one of them).\n", count(t.Good(), "candidate"))
	if t.Best.Violation > 0 {
		fmt.Fprintln(c.errs, "no candidate keeps all limits; the one that breaks them least is shown")
		c.status = exitFound
	}
	if t.CaseName == "" {
		fmt.Fprintln(out, "No candidate is better than the base: no case is written.")
	} else {
		fmt.Fprintf(out, "The best as a case: %s. Its settings sheet: %s\n", where, filepath.Join(dir, "sheet.csv"))
	}
	fmt.Fprintf(out, "The document: %s\n", filepath.Join(dir, "tune.html"))
}
