package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"sync"

	"github.com/spf13/cobra"

	"yearflow/plots"
	"yearflow/sim"
	"yearflow/sim/results"
	"yearflow/sim/study"
	"yearflow/sim/tables"
)

// manyOptions are the options of the commands that run several cases.
type manyOptions struct {
	cases     []string
	out       string
	again     bool
	figures   bool
	csv, json string
}

func (o *manyOptions) flags(cmd *cobra.Command, what string) {
	f := cmd.Flags()
	f.StringVar(&o.out, "out", "", "the folder `DIR` of the document (default: results/"+what+" in the study's folder)")
	f.BoolVar(&o.again, "again", false, "run every case, also where its results are those of the inputs as they are")
	f.BoolVar(&o.figures, "figures", false, "draw the figures of each case's own results too (\"yearflow report\" draws them later)")
	f.StringVar(&o.json, "json", "", "write it to this `FILE` as JSON; - for standard output")
}

func compareCommand(c *console) *cobra.Command {
	var o manyOptions
	cmd := &cobra.Command{
		Use: "compare [STUDY] [--case NAME ...]", Short: "the settings evaluation: every case against the base, side by side, ranked",
		Long: `Runs the base and its cases, one on each core, and holds them side by side: what
differs in the settings sheets, hours and customer-hours outside the voltage ranges,
operations, energy, losses, demand and money; ranked by the weights of [compare] in
study.toml, with what each case buys and costs and a settings sheet for the field.

Results that come from the same inputs are taken as they are (--again runs them anew).
Without --case all cases of the study with the base's period and step are taken.

Exit status: 0 done; 1 steps were low or unsolved; 2 the input is wrong; 3 the machine
failed.`,
		Example: "  yearflow compare\n  yearflow compare --case lower-band --case wide-band",
		Args:    atMostOne("study"),
		RunE:    func(cmd *cobra.Command, args []string) error { return c.compare(cmd.Context(), args, &o) },
	}
	cmd.Flags().StringArrayVar(&o.cases, "case", nil, "the `NAME` of a case; may be given several times (default: all)")
	o.flags(cmd, "compare")
	cmd.Flags().StringVar(&o.csv, "csv", "", "write compare.csv to this `FILE` too; - for standard output")
	return cmd
}

func (c *console) compare(ctx context.Context, args []string, o *manyOptions) error {
	st, place, err := c.place(args)
	if err != nil {
		return err
	}
	cases, left, err := c.runCases(ctx, place, o.cases, o)
	if err != nil {
		return err
	}
	for _, l := range left {
		fmt.Fprintf(c.errs, "left out: case %s, %s\n", l.Case, l.Why)
	}
	if len(cases) == 1 {
		fmt.Fprintln(c.errs, "there is no case to compare the base with: a case is a folder below cases with tables that change those of the feeder")
	}
	cmp, err := study.Compare(cases, left)
	if err != nil {
		return inputError{err}
	}
	dir := o.out
	if dir == "" {
		dir = filepath.Join(st.dir, "results", "compare")
	}
	if err := cmp.Write(dir, place, drawDocument("compare.html", plots.CompareDocument)); err != nil {
		return documentError(err)
	}
	c.tellCompare(cmp, dir, o)
	for _, x := range cases {
		c.tellTrouble(x)
	}
	rows := cmp.Tables()[0].Rows
	return c.export(&instantOptions{csv: o.csv, json: o.json}, rows)
}

// place finds the study and where its results go.
func (c *console) place(args []string) (*opened, study.Place, error) {
	st, err := c.find(args)
	if err != nil {
		return nil, study.Place{}, err
	}
	return st, study.Place{FS: st.fs, Results: filepath.Join(st.dir, "results"), Demo: st.demo, Version: version}, nil
}

// runCases runs the base and the named cases with progress on the error stream.
func (c *console) runCases(ctx context.Context, place study.Place, names []string, o *manyOptions) ([]*study.Case, []study.LeftOut, error) {
	studies, left, err := study.Choose(place, names)
	if err != nil {
		return nil, nil, inputError{err}
	}
	bar := newSharedProgress(c.errs, len(studies)*studies[0].Settings.Period.Steps())
	settings := study.Settings{Again: o.again, Watch: bar.watch}
	settings.Figures = func(dir string) ([]string, results.WallTime, error) { return picturesInto(dir, o.figures) }
	cases, err := study.Run(ctx, place, studies, settings)
	bar.end()
	var faults tables.Faults
	if errors.As(err, &faults) {
		return nil, nil, inputError{err}
	}
	if err != nil {
		if m := machineOr(err); m != err {
			return nil, nil, m
		}
		return nil, nil, inputError{err}
	}
	for _, x := range cases {
		how := "run"
		if x.Reused {
			how = "as it is there: its inputs have not changed"
		}
		fmt.Fprintf(c.errs, "case %s: %s, %s\n", x.Name, x.Dir, how)
	}
	return cases, left, nil
}

// drawDocument writes a document and its figures into the folder that its tables are in.
func drawDocument(name string, make func(folder string) (*plots.Document, error)) func(dir string) error {
	return func(dir string) error {
		doc, err := make(dir)
		if err != nil {
			return err
		}
		f, err := os.Create(filepath.Join(dir, name))
		if err != nil {
			return err
		}
		err = doc.Write(f)
		return errors.Join(err, f.Close())
	}
}

// documentError tells the machine's errors from those of the input.
func documentError(err error) error {
	var occupied *results.Occupied
	if errors.As(err, &occupied) {
		return inputError{err}
	}
	return machineOr(err)
}

func (c *console) tellCompare(cmp *study.Comparison, dir string, o *manyOptions) {
	out := c.quiet(o.csv, o.json)
	fmt.Fprintf(out, "%s: settings evaluation in %s\n\n", cmp.Title, dir)
	c.tellRanking(out, cmp)
	shown := []string{"customer-hours outside A", "customer-hours outside B", "lowest judged voltage", "highest judged voltage", "operations",
		"losses energy", "source energy", "peak demand", "power factor at peak demand", "settling share", "cost of losses energy, peak demand and operations"}
	s := sheet{left: 1}
	head := []string{"quantity"}
	for _, x := range cmp.Cases {
		head = append(head, x.Name)
	}
	s.add(append(head, "unit")...)
	for _, name := range shown {
		if q := cmp.Quantity(name); q != nil {
			s.add(append(append([]string{q.Name}, q.Cells...), q.Unit)...)
		}
	}
	fmt.Fprintln(out)
	s.write(out)
	fmt.Fprintln(out)
	for _, x := range cmp.Sheets {
		word := "undominated"
		if x.Recommended {
			word = "the best-ranked"
		}
		fmt.Fprintf(out, "Settings sheet of %s (%s): %s\n", x.Case, word, filepath.Join(dir, "sheet-"+x.Case+".csv"))
	}
	fmt.Fprintf(out, "The document: %s\n", filepath.Join(dir, "compare.html"))
}

func (c *console) tellRanking(out io.Writer, cmp *study.Comparison) {
	s := sheet{left: 2}
	s.add("case", "undominated", "rank", "score")
	for _, r := range cmp.Ranking {
		rank, score, un := "-", "-", "no"
		if r.Rank > 0 {
			rank, score = fmt.Sprint(r.Rank), cell(r.Score, 2)
		}
		if r.Undominated {
			un = "yes"
		}
		s.add(r.Case, un, rank, score)
	}
	s.write(out)
	fmt.Fprint(out, "score = sum of weight times quantity, less is better:")
	for i, w := range cmp.Weights {
		if i > 0 {
			fmt.Fprint(out, ",")
		}
		fmt.Fprintf(out, " %v x %s", w.Weight, w.Quantity)
		if w.Unit != "1" {
			fmt.Fprintf(out, " [%s]", w.Unit)
		}
	}
	fmt.Fprintln(out)
}

// tellTrouble says of a case what a single run says, and sets the exit status.
func (c *console) tellTrouble(x *study.Case) {
	low, unsolved := 0, 0
	for _, s := range x.Results.Steps.Status {
		switch s {
		case results.Low:
			low++
		case results.Unsolved:
			unsolved++
		}
	}
	if low+unsolved > 0 {
		fmt.Fprintf(c.errs, "case %s: %s low, %s without a solution\n", x.Name, count(low, "row"), count(unsolved, "row"))
		c.status = exitFound
	}
}

// sharedProgress is a progress that several runs move on at once.
type sharedProgress struct {
	mu  sync.Mutex
	bar *progress
}

func newSharedProgress(w io.Writer, total int) *sharedProgress {
	return &sharedProgress{bar: newProgress(w, total)}
}

func (p *sharedProgress) watch(*study.Case, *sim.Engine) []sim.Recorder {
	return []sim.Recorder{&progressShare{of: p}}
}

func (p *sharedProgress) end() {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.bar.end()
}

// progressShare is one run's part in it. It hands on its steps by the 64: a lock a step
// would be felt.
type progressShare struct {
	of   *sharedProgress
	done int
}

var _ sim.Recorder = (*progressShare)(nil)

func (p *progressShare) Interval(*results.Interval) error { return nil }
func (p *progressShare) Action(*results.Action) error     { return nil }

func (p *progressShare) Step(s *results.Step) error {
	if p.done++; p.done%64 != 0 {
		return nil
	}
	p.of.mu.Lock()
	defer p.of.mu.Unlock()
	p.of.bar.done += 64
	p.of.bar.show()
	return nil
}
