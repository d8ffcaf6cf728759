package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"yearflow/sim"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// checkMeasured prints how the model met its measurements and which phases they
// contradict. That takes a run: it is read from the results, where they are those of
// the study as it is now, and else a run is asked for.
func checkMeasured(out io.Writer, st *opened, e *sim.Engine, caseName string) ([]tables.Fault, error) {
	ms := e.Study.Model.Measurements
	if len(ms) == 0 {
		return nil, nil
	}
	fmt.Fprintln(out, "Measurements")
	defer fmt.Fprintln(out)
	dir := st.results(caseName)
	if _, err := os.Stat(filepath.Join(dir, "run.json")); err != nil {
		fmt.Fprintf(out, "  %s, held against the model by a run: run first, then check compares phases too\n", fmt.Sprintf("%d measured series", len(ms)))
		return nil, nil
	}
	err := st.sameInputs(e, dir)
	var in inputError
	if errors.As(err, &in) {
		fmt.Fprintf(out, "  %s; run again, then check compares phases too (%v)\n", fmt.Sprintf("%d measured series", len(ms)), err)
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	folder, err := results.ReadFolder(os.DirFS(dir))
	if err != nil {
		return nil, inputError{fmt.Errorf("%s is no whole results folder: %w", dir, err)}
	}
	fmt.Fprintf(out, "  %s\n", folder.Met())
	var found []tables.Fault
	for i := range folder.Swaps {
		s := &folder.Swaps[i]
		f := tables.Fault{Text: s.Text()}
		for k := range ms {
			if ms[k].Place == s.Place && ms[k].Phase == s.Phase {
				f.Pos = ms[k].At
				break
			}
		}
		found = append(found, f)
		fmt.Fprintf(out, "  %s\n", f.Error())
	}
	if len(found) == 0 {
		fmt.Fprintf(out, "  no measured voltage is clearly more like another phase than like its own\n")
	}
	return found, nil
}
