package main

import (
	"context"
	"fmt"
	"path/filepath"
	"sync"

	"github.com/spf13/cobra"

	"yearflow/plots"
	"yearflow/sim/feeder"
	"yearflow/sim/study"
)

func hostingCommand(c *console) *cobra.Command {
	var o manyOptions
	cmd := &cobra.Command{
		Use: "hosting [STUDY]", Short: "how much more DER each place and the feeder can take, over the year",
		Long: `Looks, for places of the feeder and for all of them together, for the smallest size
of a grid that breaks a criterion: each size is run over every step of the period with
the controls acting, and held against limits of voltage, rapid voltage change, loading,
unbalance and operations beside the base. Then customers adopt in random order, some
hundred times, and the share of the orders that violate a limit is told by installed kW.

[hosting] in study.toml says where, what and how large:

  [hosting]
  places = ["n12", "n40"]     # default: 8 three-phase nodes by distance, and those with generators
  kind = "solar"
  profile = "sun"             # output per unit of rating; default: that of the largest generator of the kind
  "power factor" = 1          # negative: absorbing; or function = "NAME" of inverter-functions.csv
  grid = [250, 500, 1000]     # kW; default: 5 to 100 % of the peak demand
  criteria = { "loading" = 100, "rise of operations" = "off" }
  seed = 1
  runs = 200                  # of the roll-out
  "per customer" = 5          # kW that a customer adopts
  levels = 20

Exit status: 0 done; 1 steps of the base were low or unsolved; 2 the input is wrong; 3
the machine failed.`,
		Example: "  yearflow hosting",
		Args:    atMostOne("study"),
		RunE:    func(cmd *cobra.Command, args []string) error { return c.hosting(cmd.Context(), args, &o) },
	}
	o.flags(cmd, "hosting")
	cmd.Flags().StringVar(&o.csv, "csv", "", "write hosting.csv to this `FILE` too; - for standard output")
	return cmd
}

func (c *console) hosting(ctx context.Context, args []string, o *manyOptions) error {
	st, place, err := c.place(args)
	if err != nil {
		return err
	}
	cases, _, err := c.runCases(ctx, place, []string{feeder.Base}, o)
	if err != nil {
		return err
	}
	var mu sync.Mutex
	bar := newProgress(c.errs, 1)
	bar.what = "part"
	h, err := study.MakeHosting(ctx, place, cases[0], study.HostingSettings{Progress: func(done, total int) {
		mu.Lock()
		defer mu.Unlock()
		bar.total, bar.done = total, max(bar.done, done)
		bar.show()
	}})
	bar.end()
	if err != nil {
		return studyError(err)
	}
	dir := o.out
	if dir == "" {
		dir = filepath.Join(st.dir, "results", "hosting")
	}
	if err := h.Write(dir, place, drawDocument("hosting.html", func(d string) (*plots.Document, error) { return plots.HostingDocument(d, place.Results) })); err != nil {
		return documentError(err)
	}
	c.tellHosting(h, dir, o)
	c.tellTrouble(cases[0])
	return c.export(&instantOptions{csv: o.csv, json: o.json}, h.Tables()[0].Rows)
}

func (c *console) tellHosting(h *study.Hosting, dir string, o *manyOptions) {
	out := c.quiet(o.csv, o.json)
	fmt.Fprintf(out, "%s: hosting capacity in %s\n\n", h.Title, dir)
	s := sheet{left: 1}
	s.add("place", "km", "keeps kW", "breaks at kW", "value", "limit", "unit", "criterion")
	dash := func(x string) string {
		if x == "" {
			return "-"
		}
		return x
	}
	for _, p := range h.Places {
		s.add(p.Place, dash(cell(p.DistanceKM, 2)), cell(p.Keeps, 0), dash(cell(p.Breaks, 0)), dash(cell(p.Value, 2)), dash(cell(p.Limit, 2)), dash(p.Unit), dash(p.First))
	}
	s.write(out)
	r := h.Rollout
	if r.Why != "" {
		fmt.Fprintf(out, "\nNo roll-out: %s\n", r.Why)
	} else {
		fmt.Fprintf(out, "\nRoll-out of %g kW a customer in %d random orders (seed %d):\n", r.PerCustomer, len(r.Deployments), r.Seed)
		for _, l := range r.Levels {
			fmt.Fprintf(out, "  %6.0f kW: %5.1f %% of the runs violate\n", l.KW, l.Share)
		}
	}
	fmt.Fprintf(out, "\nThe document: %s\n", filepath.Join(dir, "hosting.html"))
}
