package main

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"yearflow/plots"
	"yearflow/profiles"
	"yearflow/sim"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

func reportCommand(c *console) *cobra.Command {
	return &cobra.Command{
		Use: "report FOLDER", Short: "draws the figures and the report again, from the folder of a run or a document alone",
		Long: `Draws the figures and the HTML report of a results folder again, from its tables alone:
of a run (results/base), or of a document of ` + kindWords() + `
(results/compare). What the folder is, its record says (run.json, compare.json, ...). The
old report stays until the new one is whole. A table that is missing or has changed since it
was written is told, and nothing is drawn.

Figures of the years of single runs, in the documents of impact and hosting, come from the
results folders of these runs, beside the document's; where they are not there, or not of the
same inputs, the document does without them.

Exit status: 0 done; 2 the folder is none, half of one, or of another version; 3 the machine
failed.`,
		Example: "  yearflow run\n  yearflow report results/base\n  yearflow compare --case lower-band\n  yearflow report results/compare",
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) != 1 {
				return wrongf("report takes one results folder, such as results/base")
			}
			return nil
		},
		RunE: func(_ *cobra.Command, args []string) error { return c.report(args[0]) },
	}
}

// report finds out what a folder is and draws its report anew.
func (c *console) report(dir string) error {
	if info, err := os.Stat(dir); err != nil || !info.IsDir() {
		return wrongf("there is no results folder %q", dir)
	}
	if _, err := os.Stat(filepath.Join(dir, runRecord)); err == nil {
		return c.reportRun(dir)
	}
	for _, k := range documentKinds() {
		if _, err := os.Stat(filepath.Join(dir, k.kind+".json")); err == nil {
			return c.reportDocument(dir, k)
		}
	}
	return noRecord(dir)
}

// reportRun draws beside the old figures and report and exchanges them when all are there.
func (c *console) reportRun(dir string) error {
	_, err := results.ReadFolder(os.DirFS(dir))
	if err == nil {
		err = plots.Intact(os.DirFS(dir))
	}
	if err != nil {
		var faults tables.Faults
		if !errors.As(err, &faults) {
			return inputError{fmt.Errorf("%s is no whole results folder: %w", dir, err)}
		}
		for i := range faults {
			faults[i].Pos.File = filepath.Join(dir, faults[i].Pos.File)
		}
		return inputError{faults}
	}
	tmp, err := os.MkdirTemp(dir, ".figures-*")
	if err != nil {
		return machineError{err}
	}
	defer os.RemoveAll(tmp)
	figures, err := picture(os.DirFS(dir), tmp, true)
	if err != nil {
		return machineOr(err)
	}
	if err := os.MkdirAll(filepath.Join(dir, "figures"), 0o755); err != nil {
		return machineError{err}
	}
	names := []string{reportFile}
	for _, f := range figures {
		names = append(names, "figures/"+f.Name)
	}
	for _, name := range names {
		if err := os.Rename(filepath.Join(tmp, name), filepath.Join(dir, name)); err != nil {
			return machineError{err}
		}
	}
	// Drawn by another version, or after a run that drew none: they are other files now.
	if err := results.Rehash(dir, names); err != nil {
		return machineOr(err)
	}
	printFigures(c, figures)
	c.printf("report: %s\n", filepath.Join(dir, reportFile))
	return nil
}

func printFigures(c *console, figures []plots.Figure) {
	for _, f := range figures {
		c.printf("figures/%s: %s\n", f.Name, f.Finding)
	}
}

func stamp(e *sim.Engine, t int64) string { return profiles.Format(t, e.Study.Settings.Period.Zone) }
