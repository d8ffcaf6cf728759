package main

import (
	"context"
	"errors"
	"fmt"
	"path/filepath"

	"github.com/spf13/cobra"

	"yearflow/plots"
	"yearflow/sim/results"
	"yearflow/sim/study"
	"yearflow/sim/tables"
)

// lossOptions are the options of losses.
type lossOptions struct {
	manyOptions
	caseName string
	samples  int
}

func lossesCommand(c *console) *cobra.Command {
	var o lossOptions
	cmd := &cobra.Command{
		Use: "losses [STUDY] [--case NAME]", Short: "the annual loss estimate: energy and money of losses, by month, kind and place",
		Long: `Runs the study's period and writes the annual loss estimate: kWh and money of losses by
month, kind and element; loss factor and equivalent hours, exact and by the usual
formulas; marginal losses and the value of a kW saved at each place; present worth; and
with --case what a case (another conductor, capacitor, phase or transformer) saves.

The year is run in any case, since losses by element and month stand in no results
folder; the results folder of the base (and of the case) is written as "run" does.

Exit status: 0 done; 1 steps were low or unsolved; 2 the input is wrong; 3 the machine
failed.`,
		Example: "  yearflow losses\n  yearflow losses --case no-compensation",
		Args:    atMostOne("study"),
		RunE:    func(cmd *cobra.Command, args []string) error { return c.losses(cmd.Context(), args, &o) },
	}
	f := cmd.Flags()
	f.StringVar(&o.caseName, "case", "", "the `NAME` of a case whose saving is told against the base")
	f.IntVar(&o.samples, "samples", 0, "about how many `STEPS` marginal losses are worked out at (default 288, fewer on a large feeder; -1: none)")
	f.StringVar(&o.out, "out", "", "the folder `DIR` of the document (default: results/losses in the study's folder)")
	f.BoolVar(&o.figures, "figures", false, "draw the figures of the results folders too (\"yearflow report\" draws them later)")
	f.StringVar(&o.csv, "csv", "", "write losses-by-kind.csv to this `FILE` too; - for standard output")
	f.StringVar(&o.json, "json", "", "write it to this `FILE` as JSON; - for standard output")
	return cmd
}

func (c *console) losses(ctx context.Context, args []string, o *lossOptions) error {
	if o.samples < -1 {
		return wrongf("--samples %d: want a number of steps, 0 for the default, or -1 for no marginal losses", o.samples)
	}
	st, place, err := c.place(args)
	if err != nil {
		return err
	}
	e, err := st.prepare("") // its faults are told before anything runs, and its steps are counted
	if err != nil {
		return err
	}
	runs := 1
	if o.caseName != "" {
		runs = 2
	}
	bar := newSharedProgress(c.errs, runs*e.Steps())
	s := study.LossSettings{Settings: study.Settings{Watch: bar.watch}, Case: o.caseName, Samples: o.samples}
	s.Figures = func(dir string) ([]string, results.WallTime, error) { return picturesInto(dir, o.figures) }
	l, err := study.Losses(ctx, place, s)
	bar.end()
	var faults tables.Faults
	if errors.As(err, &faults) {
		return inputError{err}
	}
	if err != nil {
		if m := machineOr(err); m != err || errors.Is(err, context.Canceled) {
			return m
		}
		return inputError{err}
	}
	dir := o.out
	if dir == "" {
		dir = filepath.Join(st.dir, "results", "losses")
	}
	if err := l.Write(dir, place, drawDocument("losses.html", plots.LossesDocument)); err != nil {
		return documentError(err)
	}
	files := l.Tables()
	c.tellLosses(l, files, dir, o)
	for _, x := range l.Cases {
		c.tellTrouble(x)
	}
	return c.export(&instantOptions{csv: o.csv, json: o.json}, tableNamed(files, "losses-by-kind.csv"))
}

func tableNamed(files []study.NamedTable, name string) [][]string {
	for _, t := range files {
		if t.Name == name {
			return t.Rows
		}
	}
	return nil
}

func (c *console) tellLosses(l *study.LossEstimate, files []study.NamedTable, dir string, o *lossOptions) {
	out := c.quiet(o.csv, o.json)
	fmt.Fprintf(out, "%s: annual loss estimate in %s\n\n", l.Title, dir)
	show := func(name string, rows int) {
		s := sheet{left: 1}
		for i, r := range tableNamed(files, name) {
			if i > rows {
				break
			}
			s.add(r...)
		}
		s.write(out)
		fmt.Fprintln(out)
	}
	show("losses-by-kind.csv", 10)
	w := sheet{left: 1}
	for _, r := range tableNamed(files, "worth.csv")[1:] {
		w.add(r[0], r[1], r[2])
	}
	w.write(out)
	fmt.Fprintln(out)
	if len(l.Cases) > 1 {
		fmt.Fprintf(out, "What case %s saves:\n", l.Cases[1].Name)
		show("saving.csv", 10)
	}
	fmt.Fprintf(out, "The document: %s\n", filepath.Join(dir, "losses.html"))
}
