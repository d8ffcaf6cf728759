package main

import (
	"errors"
	"fmt"
	"io"
	"slices"

	"github.com/spf13/cobra"

	"yearflow/profiles"
	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

func checkCommand(c *console) *cobra.Command {
	var caseName, jsonFile, csvFile string
	cmd := &cobra.Command{
		Use: "check [STUDY]", Short: "reads everything; reports errors, odd values and assumptions",
		Long: `Reads the whole study and its cases, reports every error, everything that is possible
but implausible, and everything that was assumed for a blank cell, and prints what
the feeder is. Exit status 2 where there are errors.`,
		Example: "  yearflow check\n  yearflow check --case lower-band",
		Args:    atMostOne("study"),
		RunE:    func(_ *cobra.Command, args []string) error { return c.check(args, caseName, csvFile, jsonFile) },
	}
	cmd.Flags().StringVar(&caseName, "case", "", "check only the study with the case `NAME` over it (default: the study and every case)")
	cmd.Flags().StringVar(&csvFile, "csv", "", "write the findings to this `FILE`; - for standard output")
	cmd.Flags().StringVar(&jsonFile, "json", "", "write it to this `FILE` as JSON; - for standard output")
	return cmd
}

func (c *console) check(args []string, caseName, csvFile, jsonFile string) error {
	st, err := c.find(args)
	if err != nil {
		return err
	}
	out := c.quiet(csvFile, jsonFile)
	rows := [][]string{{"finding", "file", "line", "column", "text"}}
	add := func(kind string, fs []tables.Fault) {
		for _, f := range fs {
			rows = append(rows, []string{kind, f.Pos.File, place(f.Pos.Line), place(f.Pos.Column), f.Text})
		}
	}
	e, err := st.prepare(caseName)
	var all tables.Faults
	if err != nil {
		if !errors.As(err, &all) {
			return err
		}
		add("error", all)
	}
	if e != nil {
		c.describe(out, e)
		odd := append(append([]tables.Fault(nil), e.Warnings...), e.ReverseRisks()...)
		odd = append(odd, e.Study.Implausible()...)
		tables.Faults(odd).Sort()
		printFaults(out, "Odd, but possible", odd)
		add("warning", odd)
		var assumed []tables.Fault
		for _, a := range e.Study.Model.Assumed {
			assumed = append(assumed, tables.Fault{Pos: a.Pos, Text: a.What + " = " + a.Value})
		}
		printFaults(out, "Assumed for blank cells", assumed)
		add("assumed", assumed)
		var elsewhere []feeder.ProfileUse
		if caseName == "" {
			found := c.checkCases(out, st, e.Study.Cases, odd)
			elsewhere = found.uses
			add("warning", found.odd)
			all = append(all, found.wrong...)
			add("error", all)
		}
		unused := e.Unused(elsewhere...)
		printFaults(out, "Not known, or not used", unused)
		add("unused", unused)
		met, err := checkMeasured(out, st, e, caseName)
		if err != nil {
			return err
		}
		add("measured", met)
	}
	if len(all) == 0 {
		fmt.Fprintln(out, "no errors")
	} else {
		c.status = exitInput
	}
	if err := c.export(&instantOptions{csv: csvFile, json: jsonFile}, rows); err != nil {
		return err
	}
	if len(all) > 0 {
		return inputError{all.Err()}
	}
	return nil
}

func place(n int) string {
	if n == 0 {
		return ""
	}
	return fmt.Sprint(n)
}

// inCases is what laying the cases over a study finds.
type inCases struct {
	wrong tables.Faults
	odd   []tables.Fault      // risks of reverse modes that the study itself does not have
	uses  []feeder.ProfileUse // profiles that the cases name
}

// checkCases lays every case over the study; told is what has been said of the study.
func (c *console) checkCases(out io.Writer, st *opened, cases []string, told []tables.Fault) (found inCases) {
	if len(cases) == 0 {
		return found
	}
	fmt.Fprintln(out, "Cases")
	for _, name := range cases {
		e, err := st.prepare(name)
		var faults tables.Faults
		switch {
		case err == nil:
			fmt.Fprintf(out, "  %s: no errors\n", name)
			for _, f := range e.ReverseRisks() {
				if !slices.Contains(told, f) {
					fmt.Fprintf(out, "    %s\n", f.Error())
					found.odd = append(found.odd, f)
				}
			}
			found.uses = append(found.uses, e.Study.ProfileUses()...)
		case errors.As(err, &faults):
			fmt.Fprintf(out, "  %s: %s\n", name, count(len(faults), "error"))
			found.wrong = append(found.wrong, faults...)
		default:
			found.wrong.Add(tables.Pos{File: "cases/" + name}, "%v", err)
		}
	}
	fmt.Fprintln(out)
	return found
}

func printFaults(out io.Writer, title string, faults []tables.Fault) {
	if len(faults) == 0 {
		return
	}
	fmt.Fprintf(out, "%s (%d)\n", title, len(faults))
	for _, f := range faults {
		fmt.Fprintf(out, "  %s\n", f.Error())
	}
	fmt.Fprintln(out)
}

// describe prints what the feeder is.
func (c *console) describe(out io.Writer, e *sim.Engine) {
	s := e.Study
	p := s.Settings.Period
	fmt.Fprintf(out, "%s, case %s\n", s.Title, s.Case)
	fmt.Fprintf(out, "  period      %s to %s, %d steps of %g s\n", profiles.Format(p.Start, p.Zone), profiles.Format(p.End, p.Zone), p.Steps(), float64(p.Step)/1e9)
	d := s.Describe()
	fmt.Fprintf(out, "  feeder      %d nodes, %d node.phases, %s, %s\n", d.Nodes, d.NodePhases, count(d.Sources, "source"), count(d.Parts, "galvanic part"))
	fmt.Fprintf(out, "  sections    %d, %.3f km (%.3f mi)\n", d.Sections, d.LengthKM, d.LengthKM/kmPerMile)
	for _, k := range d.ByConstruction {
		fmt.Fprintf(out, "              %s (%s): %s, %.3f km\n", k.Name, k.Kind, count(k.Sections, "section"), k.LengthKM)
	}
	if d.Switches > 0 {
		fmt.Fprintf(out, "  switches    %d, of which %d open\n", d.Switches, d.SwitchesOpen)
	}
	fmt.Fprintf(out, "  banks       %s of %g kVA; %s (%s); %s of %g kvar, %d with a control\n", count(d.Transformers, "transformer"), d.TransformerKVA,
		count(d.Regulators, "regulator"), count(d.RegulatorUnits, "unit"), count(d.Capacitors, "capacitor"), d.CapacitorKVAR, d.Controlled)
	fmt.Fprintf(out, "  loads       %d, %.1f kW and %.1f kvar at profile 1, %g customers", d.Loads, d.LoadKW, d.LoadKVAR, d.Customers)
	if d.LoadsByEnergy > 0 {
		fmt.Fprintf(out, "; %d known by energy", d.LoadsByEnergy)
	}
	if d.LoadsByProfile > 0 {
		fmt.Fprintf(out, "; %d by a profile in kW", d.LoadsByProfile)
	}
	fmt.Fprintf(out, "\n  generators  %d, %g kVA\n", d.Generators, d.GeneratorKVA)
	fmt.Fprintln(out)
}
