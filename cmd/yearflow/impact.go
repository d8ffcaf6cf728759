package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"sync"

	"github.com/spf13/cobra"

	"yearflow/plots"
	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/study"
	"yearflow/sim/tables"
)

func impactCommand(c *console) *cobra.Command {
	var o manyOptions
	var name string
	cmd := &cobra.Command{
		Use: "impact [STUDY] --case NAME", Short: "the DER impact report: the base, the case with its units, the difference",
		Long: `Runs the base and a case that adds generators or batteries (or changes them), and
reports over the whole period what the units do: voltage with the controls acting and
held, rapid voltage change at the sudden loss and return of units, unbalance, reverse
power, loading, losses, operations, curtailment and the usual screens; each criterion
with its limit, the source of the limit, verdict and margin. Remedies (power factor,
inverter functions, smaller size, dispatch, settings) are run as cases of their own.

Exit status: 0 done; 1 steps were low or unsolved; 2 the input is wrong; 3 the machine
failed.`,
		Example: "  yearflow impact --case more-solar",
		Args:    atMostOne("study"),
		RunE:    func(cmd *cobra.Command, args []string) error { return c.impact(cmd.Context(), args, name, &o) },
	}
	cmd.Flags().StringVar(&name, "case", "", "the `NAME` of the case with the units")
	o.flags(cmd, "impact-<case>")
	cmd.Flags().StringVar(&o.csv, "csv", "", "write impact.csv to this `FILE` too; - for standard output")
	return cmd
}

func (c *console) impact(ctx context.Context, args []string, name string, o *manyOptions) error {
	if name == "" || name == feeder.Base {
		return wrongf("impact needs --case NAME, a case that adds generators or batteries to the base: put their rows into cases/NAME/generators.csv")
	}
	st, place, err := c.place(args)
	if err != nil {
		return err
	}
	cases, _, err := c.runCases(ctx, place, []string{name}, o)
	if err != nil {
		return err
	}
	bar := &lateProgress{w: c.errs}
	im, err := study.MakeImpact(ctx, place, cases, study.ImpactSettings{Begin: bar.begin, Watch: bar.watch})
	bar.end()
	if err != nil {
		return studyError(err)
	}
	dir := o.out
	if dir == "" {
		dir = filepath.Join(st.dir, "results", "impact-"+name)
	}
	if err := im.Write(dir, place, drawDocument("impact.html", func(d string) (*plots.Document, error) { return plots.ImpactDocument(d, place.Results) })); err != nil {
		return documentError(err)
	}
	c.tellImpact(im, dir, o)
	for _, x := range cases {
		c.tellTrouble(x)
	}
	return c.export(&instantOptions{csv: o.csv, json: o.json}, im.Tables()[0].Rows)
}

// studyError tells what the input is guilty of from what the machine is.
func studyError(err error) error {
	var faults tables.Faults
	var none *study.NoUnits
	if errors.As(err, &faults) || errors.As(err, &none) {
		return inputError{err}
	}
	if m := machineOr(err); m != err {
		return m
	}
	return inputError{err}
}

func (c *console) tellImpact(im *study.Impact, dir string, o *manyOptions) {
	out := c.quiet(o.csv, o.json)
	fmt.Fprintf(out, "%s: impact of case %s in %s\n\n", im.Title, im.Case, dir)
	s := sheet{left: 1}
	s.add("criterion", "base", "with DER", "limit", "margin", "unit", "verdict")
	for _, r := range im.Criteria {
		if r.Verdict == study.NoLimit {
			continue
		}
		limit := results.FigureText(r.Limit)
		if r.AtLeast {
			limit = ">= " + limit
		}
		s.add(r.Name, results.FigureText(r.Base), results.FigureText(r.With), limit, results.FigureText(r.Margin), r.Unit, verdictText(r))
	}
	s.write(out)
	fmt.Fprintln(out)
	for _, r := range im.Screens {
		fmt.Fprintf(out, "screen, %s: rating against %s: %s %% of %s kW (limit %s %%): %s\n", r.Section, r.Screen, results.FigureText(r.WithShare), results.FigureText(r.Reference), results.FigureText(r.Limit), r.Verdict)
	}
	fmt.Fprintf(out, "\nThe document: %s\n", filepath.Join(dir, "impact.html"))
}

// verdictText says a failure that the base has too.
func verdictText(r study.Criterion) string {
	if r.Verdict == study.Fails && r.BaseVerdict == study.Fails {
		return "fail, as the base does"
	}
	return r.Verdict.String()
}

// lateProgress is a shared progress whose length is known only when the work begins.
type lateProgress struct {
	w  io.Writer
	mu sync.Mutex
	of *sharedProgress
}

func (p *lateProgress) begin(steps int) {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.of = newSharedProgress(p.w, steps)
}

func (p *lateProgress) watch() sim.Recorder { return &progressShare{of: p.of} }

func (p *lateProgress) end() {
	if p.of != nil {
		p.of.end()
	}
}
