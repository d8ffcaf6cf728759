package main

import (
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strconv"

	"yearflow/profiles"
	"yearflow/sim"
)

// positionsOf reads --positions: settled, given, a results folder; left out (trace),
// the study's own results where they belong to the same inputs, else settled.
func (c *console) positionsOf(st *opened, e *sim.Engine, step int, o *instantOptions) (sim.Positions, error) {
	switch o.positions {
	case "settled":
		return sim.Positions{}, nil
	case "given":
		return sim.Positions{Given: true}, nil
	case "":
		dir := st.results(o.caseName)
		if _, err := os.Stat(filepath.Join(dir, "run.json")); err != nil {
			fmt.Fprintf(c.errs, "positions: settled on this step's inputs (no results in %s)\n", dir)
			return sim.Positions{}, nil
		}
		p, err := c.logged(st, e, step, dir)
		var in inputError
		if errors.As(err, &in) {
			fmt.Fprintf(c.errs, "positions: settled on this step's inputs (%v)\n", err)
			return sim.Positions{}, nil
		}
		if err == nil {
			fmt.Fprintf(c.errs, "positions: as logged in %s\n", dir)
		}
		return p, err
	}
	if info, err := os.Stat(o.positions); err != nil || !info.IsDir() {
		return sim.Positions{}, wrongf("--positions %s: want settled, given, or a results folder", o.positions)
	}
	return c.logged(st, e, step, o.positions)
}

// logged reads the positions at the end of a step from a results folder, which must
// come from the inputs as they are now.
func (c *console) logged(st *opened, e *sim.Engine, step int, dir string) (sim.Positions, error) {
	if err := st.sameInputs(e, dir); err != nil {
		return sim.Positions{}, err
	}
	return c.readPositions(e, step, filepath.Join(dir, "devices.csv"))
}

// sameInputs fails where the results in a folder are not those of the study and the
// case as they are now.
func (o *opened) sameInputs(e *sim.Engine, dir string) error {
	data, err := os.ReadFile(filepath.Join(dir, "run.json"))
	if err != nil {
		return wrongf("%s is no results folder: %v", dir, err)
	}
	var run struct {
		Case   string            `json:"case"`
		Inputs map[string]string `json:"inputs_sha256"`
	}
	if err := json.Unmarshal(data, &run); err != nil {
		return wrongf("%s: run.json cannot be read: %v", dir, err)
	}
	if run.Case != e.Study.Case {
		return wrongf("the results in %s are those of case %q, not of %q: name the case, or other results", dir, run.Case, e.Study.Case)
	}
	now, err := o.inputs(e)
	if err != nil {
		return err
	}
	for f, h := range now {
		if run.Inputs[f] != h {
			return wrongf("%s has changed since the results in %s were made: run again", f, dir)
		}
	}
	if len(run.Inputs) != len(now) {
		return wrongf("the results in %s were made from other files than the study has now: run again", dir)
	}
	return nil
}

// readPositions takes the positions of devices and the power of batteries from the
// rows that a step belongs to.
func (c *console) readPositions(e *sim.Engine, step int, file string) (sim.Positions, error) {
	var none sim.Positions
	m := e.Study.Model
	value, err := rowAt(e, step, file)
	if err != nil {
		return none, err
	}
	out := sim.Positions{Taps: make([]int, len(e.Plan.TapNames)), Closed: make([]bool, len(m.Capacitors))}
	for i, n := range e.Plan.TapNames {
		if out.Taps[i], err = whole(value, n, file); err != nil {
			return none, err
		}
	}
	for i := range m.Capacitors {
		v, err := whole(value, m.Capacitors[i].Name, file)
		if err != nil {
			return none, err
		}
		out.Closed[i] = v == 1
	}
	if len(m.Batteries) == 0 {
		return out, nil
	}
	file = filepath.Join(filepath.Dir(file), "storage.csv")
	if value, err = rowAt(e, step, file); err != nil {
		return none, err
	}
	for i := range m.Batteries {
		n := m.Batteries[i].Name + " [kW]"
		cell, ok := value[n]
		kW, err := strconv.ParseFloat(cell, 64)
		if cell == "" { // the step has no solution
			kW, err = 0, nil
		}
		if !ok || err != nil {
			return none, wrongf("%s, column %s: want a number, got %q", file, n, cell)
		}
		out.Storage = append(out.Storage, kW)
	}
	return out, nil
}

// whole reads a whole number of a row.
func whole(row map[string]string, column, file string) (int, error) {
	cell, ok := row[column]
	if !ok {
		return 0, wrongf("%s has no column %s", file, column)
	}
	v, err := strconv.Atoi(cell)
	if err != nil {
		return 0, wrongf("%s, column %s: want a whole number, got %q", file, column, cell)
	}
	return v, nil
}

// rowAt finds the row of a log that a step belongs to, by the names of its columns.
func rowAt(e *sim.Engine, step int, file string) (map[string]string, error) {
	f, err := os.Open(file)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, wrongf("%s is missing: run again", file)
	} else if err != nil {
		return nil, machineError{err}
	}
	defer f.Close()
	p := e.Study.Settings.Period
	at := p.Start + int64(step)*p.Step
	r := csv.NewReader(f)
	header, err := r.Read()
	if err != nil {
		return nil, wrongf("%s: %v", file, err)
	}
	var last []string
	for {
		row, err := r.Read()
		if err == io.EOF {
			break
		}
		if err != nil {
			return nil, wrongf("%s: %v", file, err)
		}
		t, err := profiles.ParseTime(row[0], p.Zone)
		if err != nil {
			return nil, wrongf("%s: %v", file, err)
		}
		if t > at {
			break
		}
		last = row
	}
	if last == nil {
		return nil, wrongf("%s has no row for that step", file)
	}
	value := map[string]string{}
	for i, h := range header[1:] {
		value[h] = last[i+1]
	}
	return value, nil
}
