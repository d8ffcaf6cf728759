package main

import (
	"fmt"
	"math/cmplx"

	"github.com/spf13/cobra"

	"yearflow/profiles"
)

func traceCommand(c *console) *cobra.Command {
	var o instantOptions
	cmd := &cobra.Command{
		Use: "trace [STUDY] --node N [--at TIME]", Short: "from the source to a node, element by element",
		Long: `Walks from the source to a node: of every element on the way its current, what it
does to the voltage on the 120 V base, its loss and its tap. Where the study has
results, devices stand as logged there at that step; else their controls bring them
to rest.`,
		Example: "  yearflow trace --node cotton5-s --at 2025-08-09T18:00",
		Args:    atMostOne("study"),
		RunE:    func(_ *cobra.Command, args []string) error { return c.trace(args, &o) },
	}
	o.flags(cmd, "")
	cmd.Flags().StringVar(&o.node, "node", "", "the `NODE` to walk to (required)")
	return cmd
}

func (c *console) trace(args []string, o *instantOptions) error {
	if o.node == "" {
		return wrongf("trace needs --node: the node to walk to")
	}
	e, in, err := c.instant(args, o)
	if err != nil {
		return err
	}
	if in.State == nil {
		return nil
	}
	way, err := e.Trace(o.node)
	if err != nil {
		return c.noNode(e, o.node)
	}
	out := c.quiet(o.csv, o.json)
	fmt.Fprintf(out, "%s, case %s, %s: from the source to %s\n\n", e.Study.Title, e.Study.Case, profiles.Format(in.Start, e.Study.Settings.Period.Zone), o.node)
	t := sheet{left: 4}
	t.add("element", "kind", "to", "phase", "current [A]", "deg", "V120", "change", "loss [kW]", "tap")
	rows := [][]string{{"element", "kind", "from", "to", "phase", "current [A]", "angle [deg]", "V120 [V]", "change [V]", "loss [kW]", "tap"}}
	for _, r := range way {
		for i, p := range r.Phases {
			loss, tap, name, kind, to := "", "", "", "", ""
			if i == 0 {
				loss, name, kind, to = cell(r.LossKW, 4), r.Name, r.Kind, r.To
			}
			if p.Tap != nil {
				tap = fmt.Sprintf("%+d", *p.Tap)
			}
			change := cell(p.Change, 4)
			if p.Change > 0 {
				change = "+" + change
			}
			t.add(name, kind, to, p.Phase.String(), cell(cmplx.Abs(p.Current), 4), cell(deg(p.Current), 4), cell(p.V120, 4), change, loss, tap)
			rows = append(rows, []string{r.Name, r.Kind, r.From, r.To, p.Phase.String(), cell(cmplx.Abs(p.Current), 4), cell(deg(p.Current), 4), cell(p.V120, 4), cell(p.Change, 4), loss, tap})
		}
	}
	t.write(out)
	return c.export(o, rows)
}
