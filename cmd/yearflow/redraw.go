package main

import (
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"os"
	"path/filepath"
	"strings"

	"yearflow/plots"
	"yearflow/sim/results"
)

// runRecord is the record of a run in its results folder.
const runRecord = "run.json"

// documentKind is a kind of document that stands in a folder of its own, with a record
// <kind>.json and a page <kind>.html, and how it is drawn from the folder's tables. runs is
// the folder in which the results folders of its runs are.
type documentKind struct {
	kind string
	draw func(dir, runs string) (*plots.Document, error)
}

// alone is a document that is drawn from its own tables and nothing else.
func alone(draw func(dir string) (*plots.Document, error)) func(dir, runs string) (*plots.Document, error) {
	return func(dir, _ string) (*plots.Document, error) { return draw(dir) }
}

// documentKinds are all of them.
func documentKinds() []documentKind {
	return []documentKind{
		{"compare", alone(plots.CompareDocument)},
		{"losses", alone(plots.LossesDocument)},
		{"impact", plots.ImpactDocument},
		{"hosting", plots.HostingDocument},
		{"tune", alone(plots.TuneDocument)},
	}
}

// kindWords lists their commands in a sentence.
func kindWords() string {
	var names []string
	for _, k := range documentKinds() {
		names = append(names, k.kind)
	}
	last := len(names) - 1
	return strings.Join(names[:last], ", ") + " or " + names[last]
}

// noRecord is the error of a folder that is neither of a run nor of a document.
func noRecord(dir string) error {
	records := make([]string, 0, 8)
	for _, k := range documentKinds() {
		records = append(records, k.kind+".json")
	}
	text := fmt.Sprintf("%s: is missing, and so is the record of every document (%s): %s is no results folder, or half of one", filepath.Join(dir, runRecord), strings.Join(records, ", "), dir)
	for _, below := range []string{dir, filepath.Join(dir, "results")} {
		for _, name := range append([]string{runRecord}, records...) {
			if found, err := fs.Glob(os.DirFS(below), "*/"+name); err == nil && len(found) > 0 {
				return wrongf("%s; did you mean %s?", text, filepath.Dir(filepath.Join(below, found[0])))
			}
		}
	}
	return wrongf("%s; run the command that writes it again", text)
}

// reportDocument draws a document in a folder of its own and exchanges page and figures
// for the old ones when all are there.
func (c *console) reportDocument(dir string, k documentKind) error {
	tmp, err := os.MkdirTemp(dir, ".figures-*")
	if err != nil {
		return machineError{err}
	}
	defer os.RemoveAll(tmp)
	record, err := results.CopyTables(dir, k.kind, tmp)
	if err != nil {
		return inputUnlessMachine(err)
	}
	page := k.kind + ".html"
	runs := c.runsOf(dir, record)
	if runs == "" {
		runs = tmp // where no run is
	}
	if err := drawDocument(page, func(d string) (*plots.Document, error) { return k.draw(d, runs) })(tmp); err != nil {
		return inputUnlessMachine(err)
	}
	figures, err := fs.Glob(os.DirFS(tmp), "figures/*")
	if err != nil {
		return machineError{err}
	}
	if len(figures) > 0 {
		if err := os.MkdirAll(filepath.Join(dir, "figures"), 0o755); err != nil {
			return machineError{err}
		}
	}
	names := append(figures, page) // the page last: it names the others
	for _, name := range names {
		if err := os.Rename(filepath.Join(tmp, name), filepath.Join(dir, name)); err != nil {
			return machineError{err}
		}
	}
	left, err := results.RehashTables(dir, k.kind, names)
	if err != nil {
		return inputUnlessMachine(err)
	}
	for _, name := range left {
		fmt.Fprintf(c.errs, "%s is no longer part of the document\n", filepath.Join(dir, name))
	}
	for _, name := range figures {
		c.printf("%s\n", name)
	}
	c.printf("report: %s\n", filepath.Join(dir, page))
	return nil
}

// inputUnlessMachine is an error of what stands in a folder, where the machine is not to
// blame.
func inputUnlessMachine(err error) error {
	var machine machineError
	if err = machineOr(err); errors.As(err, &machine) {
		return err
	}
	return inputError{err}
}

// runsOf is the folder in which the results folders of a document's runs are: the one that
// its own is in. It is blank where one of them is not there or comes from other inputs: the
// years of other runs do not belong into the document.
func (c *console) runsOf(dir string, r *results.TablesRecord) string {
	if r.Kind != "impact" && r.Kind != "hosting" {
		return ""
	}
	full, err := filepath.Abs(dir)
	if err != nil {
		return ""
	}
	runs := filepath.Dir(full)
	for _, x := range r.Cases {
		from, err := results.ReadOrigin(os.DirFS(filepath.Join(runs, x.Folder)))
		switch {
		case err != nil:
			fmt.Fprintf(c.errs, "%s is no results folder that this program reads: the document does without the figures of single runs\n", filepath.Join(filepath.Dir(dir), x.Folder))
			return ""
		case from.Version != r.Version || !maps.Equal(from.Inputs, x.Inputs):
			fmt.Fprintf(c.errs, "%s comes from other inputs, or another version of the program, than the document: it does without the figures of single runs\n", filepath.Join(filepath.Dir(dir), x.Folder))
			return ""
		}
	}
	return runs
}
