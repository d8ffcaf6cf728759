package main

import (
	"fmt"
	"io"
	"math"
	"math/cmplx"
	"strings"

	"github.com/spf13/cobra"

	"yearflow/profiles"
	"yearflow/sim"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// instantOptions are the options of the commands that look at one instant.
type instantOptions struct {
	at, caseName, positions, node string
	csv, json                     string
}

func (o *instantOptions) flags(cmd *cobra.Command, positions string) {
	f := cmd.Flags()
	f.StringVar(&o.at, "at", "", "the `TIME` to look at, such as 2025-07-18T17:00; a time inside a step means that step (default: the first step)")
	f.StringVar(&o.caseName, "case", "", "the `NAME` of a case (default: the study as it stands)")
	f.StringVar(&o.positions, "positions", positions, "`WHERE` the devices stand: settled (their controls bring them to rest), given (as in the tables), or a results folder (as logged there at that step)")
	f.StringVar(&o.csv, "csv", "", "write the table to this `FILE`; - for standard output")
	f.StringVar(&o.json, "json", "", "write it to this `FILE` as JSON; - for standard output")
}

func solveCommand(c *console) *cobra.Command {
	var o instantOptions
	cmd := &cobra.Command{
		Use: "solve [STUDY]", Short: "one instant: node voltages, flows, losses",
		Long: `Solves one instant: voltages of all nodes, flows and losses of all elements.
With --node it prints the balance of one node as the nodal equation has it.`,
		Example: "  yearflow solve --at 2025-07-18T17:00\n  yearflow solve --at 2025-07-18T17:00 --csv -",
		Args:    atMostOne("study"),
		RunE:    func(_ *cobra.Command, args []string) error { return c.solve(args, &o) },
	}
	o.flags(cmd, "settled")
	cmd.Flags().StringVar(&o.node, "node", "", "print the balance of this `NODE`")
	return cmd
}

// instant opens the study and solves.
func (c *console) instant(args []string, o *instantOptions) (*sim.Engine, *sim.Instant, error) {
	st, err := c.find(args)
	if err != nil {
		return nil, nil, err
	}
	e, err := st.prepare(o.caseName)
	if err != nil {
		return nil, nil, err
	}
	c.warn(e.Warnings)
	if o.node != "" {
		if _, ok := e.Study.Model.NodeIndex(o.node); !ok {
			return nil, nil, c.noNode(e, o.node)
		}
	}
	step, err := stepAt(e, o.at)
	if err != nil {
		return nil, nil, err
	}
	p, err := c.positionsOf(st, e, step, o)
	if err != nil {
		return nil, nil, err
	}
	in, err := e.Solve(step, p)
	if err != nil {
		return nil, nil, inputError{err}
	}
	if in.State == nil {
		fmt.Fprintf(c.errs, "%s: no solution: neither the fixed point nor Newton's method arrives; the voltage that moved most in the last iteration is that of %s (%.3g p.u.). Look at the loads behind it, at their size and at the impedances on the way.\n",
			stamp(e, in.Start), in.Where, in.Change)
	}
	for _, name := range in.StillMoving {
		fmt.Fprintf(c.errs, "warning: %s had not come to rest after 24 h of event time\n", name)
	}
	if in.Status != results.OK {
		c.status = exitFound
	}
	return e, in, nil
}

func (c *console) solve(args []string, o *instantOptions) error {
	e, in, err := c.instant(args, o)
	if err != nil {
		return err
	}
	if in.State == nil {
		return nil
	}
	if in.Status == results.Low {
		fmt.Fprintf(c.errs, "%s: low: a load at %s stands below 0.7 p.u. and is not served as asked\n", stamp(e, in.Start), in.Where)
	}
	out := c.quiet(o.csv, o.json)
	if o.node != "" {
		return c.balance(out, e, o)
	}
	rows := [][]string{{"node", "phase", "voltage [kV]", "voltage [pu]", "V120 [V]", "angle [deg]"}}
	volts := e.Voltages()
	for _, v := range volts {
		rows = append(rows, []string{v.Node, v.Phase, cell(v.KV, 6), cell(v.PU, 6), cell(v.V120, 4), cell(v.Angle, 4)})
	}
	c.printInstant(out, e, in, volts)
	return c.export(o, rows)
}

// export writes the table of a command to the files that were asked for.
func (c *console) export(o *instantOptions, rows [][]string) error {
	if o.csv != "" {
		if err := c.saveCSV(o.csv, rows); err != nil {
			return err
		}
	}
	if o.json != "" {
		return c.saveJSON(o.json, records(rows))
	}
	return nil
}

func (c *console) printInstant(out io.Writer, e *sim.Engine, in *sim.Instant, volts []sim.VoltageRow) {
	s := e.Study
	meter := e.Meter()
	r := meter.NewReading()
	meter.Read(in.State, r)
	fmt.Fprintf(out, "%s, case %s, %s: %s (%s, %s)\n\n", s.Title, s.Case, profiles.Format(in.Start, s.Settings.Period.Zone), in.Status, in.Path, count(in.Iterations, "iteration"))
	t := sheet{left: 1}
	t.add("", "kW", "kvar")
	power := func(name string, v complex128) { t.add(name, cell(real(v)/1000, 4), cell(imag(v)/1000, 4)) }
	power("source", r.Source)
	power("generation", r.Generation)
	t.add("capacitors", "", cell(imag(r.Capacitors)/1000, 4))
	power("load", r.Load)
	power("losses", r.Losses)
	for k := range r.ByKind {
		power("  "+results.LossKind(k).String(), r.ByKind[k])
	}
	t.write(out)
	fmt.Fprintln(out)
	nodes := sheet{left: 1}
	nodes.add("node", "phase", "kV", "p.u.", "V120", "deg")
	for _, v := range volts {
		nodes.add(v.Node, v.Phase, cell(v.KV, 5), cell(v.PU, 6), cell(v.V120, 3), cell(v.Angle, 4))
	}
	nodes.write(out)
	fmt.Fprintln(out)
	flows := sheet{left: 4}
	flows.add("element", "kind", "from", "to", "A or 1 [A]", "B or 2 [A]", "C [A]", "kW", "kvar", "loss [kW]", "taps")
	for _, f := range e.Flows() {
		if math.IsNaN(f.Amperes[0]) && math.IsNaN(f.Amperes[1]) && math.IsNaN(f.Amperes[2]) {
			f.Amperes[0], f.Amperes[1] = f.Amperes[3], f.Amperes[4] // legs
		}
		taps := strings.Trim(fmt.Sprint(f.Taps), "[]")
		flows.add(f.Name, f.Kind, f.From, f.To, cell(f.Amperes[0], 4), cell(f.Amperes[1], 4), cell(f.Amperes[2], 4), cell(f.KW, 4), cell(f.KVAR, 4), cell(f.LossKW, 4), taps)
	}
	flows.write(out)
	closed := sheet{left: 2}
	for i, k := range s.Model.Capacitors {
		state := "open"
		if in.State.Closed[i] {
			state = "closed"
		}
		closed.add("capacitor "+k.Name, state)
	}
	if len(closed.rows) > 0 {
		fmt.Fprintln(out)
		closed.write(out)
	}
}

// complexText writes a complex number as a + jb.
func complexText(v complex128, decimals int) string {
	sign := "+"
	im := imag(v)
	if im < 0 {
		sign, im = "-", -im
	}
	im = math.Abs(im) // no −0
	return fmt.Sprintf("%s %s j%.*f", cell(real(v), decimals), sign, decimals, im)
}

// balance prints the nodal equation of a node.
func (c *console) balance(out io.Writer, e *sim.Engine, o *instantOptions) error {
	bs, err := e.Balance(o.node)
	if err != nil {
		return c.noNode(e, o.node)
	}
	rows := [][]string{{"phase", "part", "element", "kind", "neighbour", "at", "g [S]", "b [S]", "voltage [kV]", "angle [deg]", "current [A]", "current angle [deg]", "real [kW]", "reactive [kvar]"}}
	for _, b := range bs {
		fmt.Fprintf(out, "node %s, phase %s: %.6f kV at %.4f deg (%.6f p.u.)\n", o.node, b.Phase, cmplx.Abs(b.V)/1000, deg(b.V), cmplx.Abs(b.V)/b.Base)
		t := sheet{left: 3}
		t.add("  element", "to", "voltage of", "admittance [S]", "kV", "deg", "Y·V [A]", "current [A]", "deg", "kW", "kvar")
		for _, el := range b.Elements {
			for _, x := range el.Terms {
				t.add("  "+el.Kind+" "+el.Name, el.Neighbour, x.At, complexText(x.Y, 7), cell(cmplx.Abs(x.V)/1000, 6), cell(deg(x.V), 4), cell(cmplx.Abs(x.Y*x.V), 4), "", "", "", "")
				rows = append(rows, []string{b.Phase, "admittance", el.Name, el.Kind, el.Neighbour, x.At, number(real(x.Y)), number(imag(x.Y)), cell(cmplx.Abs(x.V)/1000, 6), cell(deg(x.V), 4), cell(cmplx.Abs(x.Y*x.V), 4), cell(deg(x.Y*x.V), 4), "", ""})
			}
			note := ""
			if len(el.Terms) == 0 {
				note = "ideal"
			}
			t.add("  "+el.Kind+" "+el.Name, el.Neighbour, "sum", note, "", "", "", cell(cmplx.Abs(el.Current), 4), cell(deg(el.Current), 4), cell(real(el.Power)/1000, 4), cell(imag(el.Power)/1000, 4))
			rows = append(rows, []string{b.Phase, "element", el.Name, el.Kind, el.Neighbour, "", "", "", "", "", cell(cmplx.Abs(el.Current), 4), cell(deg(el.Current), 4), cell(real(el.Power)/1000, 4), cell(imag(el.Power)/1000, 4)})
		}
		add := func(part string, s complex128, decimals int) {
			t.add("  "+part, "", "", "", "", "", "", "", "", cell(real(s)/1000, decimals), cell(imag(s)/1000, decimals))
			rows = append(rows, []string{b.Phase, part, "", "", "", "", "", "", "", "", "", "", cell(real(s)/1000, decimals), cell(imag(s)/1000, decimals)})
		}
		add("load", b.Load, 4)
		add("less generation", -b.Gen, 4)
		add("less source", -b.Source, 4)
		add("sum (must be nothing)", b.Sum, 9)
		t.write(out)
		fmt.Fprintln(out)
	}
	return c.export(o, rows)
}

func deg(v complex128) float64 { return cmplx.Phase(v) * 180 / 3.141592653589793 }

func number(v float64) string { return fmt.Sprintf("%.9g", v) }

func (c *console) noNode(e *sim.Engine, name string) error {
	var names []string
	for i := range e.Study.Model.Nodes {
		names = append(names, e.Study.Model.Nodes[i].Name)
	}
	return wrongf("no node named %q%s", name, tables.Hint(name, names))
}
