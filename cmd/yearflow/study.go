package main

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"sort"

	"github.com/spf13/pflag"

	"yearflow/profiles"
	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

type flagOf = pflag.Flag

// opened is a study as a command finds it.
type opened struct {
	fs   fs.FS
	dir  string // its folder; blank for the demo
	demo bool
}

// find returns the study that an argument names; left out, it is the current folder
// where that holds a study.toml, else the demo, which is said on the first line.
func (c *console) find(args []string) (*opened, error) {
	dir := ""
	if len(args) > 0 {
		dir = args[0]
		info, err := os.Stat(dir)
		switch {
		case errors.Is(err, fs.ErrNotExist):
			return nil, wrongf("there is no folder %q: a study is a folder with a study.toml in it (\"yearflow demo %s\" writes one)", dir, dir)
		case err != nil:
			return nil, machineError{err}
		case !info.IsDir():
			return nil, wrongf("%q is a file: name the folder of the study", dir)
		}
		if _, err := os.Stat(filepath.Join(dir, "study.toml")); err != nil {
			return nil, wrongf("%q holds no study.toml: name the folder of a study", dir)
		}
	} else if _, err := os.Stat("study.toml"); err == nil {
		dir = "."
	}
	if dir == "" {
		fmt.Fprintln(c.errs, "study: the demo (no study named, and no study.toml in this folder)")
		return &opened{fs: demo.Study(), demo: true}, nil
	}
	return &opened{fs: os.DirFS(dir), dir: dir}, nil
}

// results is the folder of a case's results.
func (o *opened) results(caseName string) string {
	if caseName == "" {
		caseName = feeder.Base
	}
	return filepath.Join(o.dir, "results", caseName)
}

// prepare reads a study and makes an engine of it.
func (o *opened) prepare(caseName string) (*sim.Engine, error) {
	return o.prepareWith(caseName, sim.Options{})
}

// prepareWith does the same with options of a run.
func (o *opened) prepareWith(caseName string, options sim.Options) (*sim.Engine, error) {
	st, err := feeder.Open(o.fs, caseName)
	if err != nil {
		return nil, inputError{err}
	}
	options.Demo = o.demo
	if !o.demo {
		options.Cache = filepath.Join(o.dir, "results", ".meters")
	}
	e, err := sim.Prepare(st, options)
	if err != nil {
		return nil, inputError{err}
	}
	return e, nil
}

// inputs returns the hash of every file that the study was read from.
func (o *opened) inputs(e *sim.Engine) (map[string]string, error) {
	files := append(append([]string(nil), e.Study.Files...), e.ProfileFiles()...)
	sort.Strings(files)
	out := make(map[string]string, len(files))
	for _, f := range files {
		data, err := fs.ReadFile(o.fs, f)
		if err != nil {
			return nil, machineError{fmt.Errorf("read %s: %w", f, err)}
		}
		sum := sha256.Sum256(data)
		out[f] = hex.EncodeToString(sum[:])
	}
	return out, nil
}

// stepAt returns the step that a time names; blank is the first.
func stepAt(e *sim.Engine, text string) (int, error) {
	if text == "" {
		return 0, nil
	}
	p := e.Study.Settings.Period
	t, err := profiles.ParseTime(text, p.Zone)
	if err != nil {
		return 0, wrongf("--at %s: %v", text, err)
	}
	step, ok := e.StepAt(t)
	if !ok {
		return 0, wrongf("--at %s lies outside the period, %s to %s", text, profiles.Format(p.Start, p.Zone), profiles.Format(p.End, p.Zone))
	}
	return step, nil
}

// warn prints what is odd.
func (c *console) warn(faults []tables.Fault) {
	for _, f := range faults {
		fmt.Fprintf(c.errs, "warning: %s\n", f.Error())
	}
}
