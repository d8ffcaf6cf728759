package study

import (
	"context"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// sharedFeeder is the small feeder with loads that share a measured head, kinds of load that
// answer the voltage, and two cases.
func sharedFeeder() fstest.MapFS {
	f := smallFeeder()
	file := func(s string) *fstest.MapFile { return &fstest.MapFile{Data: []byte(s)} }
	f["study.toml"] = file(string(f["study.toml"].Data) + "[allocation]\nat = \"source\"\nreal = \"head\"\npower_factor = 0.95\n")
	head := "time,head [kW]\n"
	for h := range 48 {
		head += fmt.Sprintf("2025-03-%02dT%02d:00,%g\n", 1+h/24, h%24, 1500+700*math.Sin(float64(h)/4))
	}
	f["profiles/head.csv"] = file(head)
	f["feeder/loads.csv"] = file("load,node,phases,connected [kVA],power factor,zip,profile,customers\nL1,L,ABC,3000,0.92,impedance,day,200\nL2,y,12,30,0.95,current,day,5\n")
	f["cases/plant/generators.csv"] = file("generator,node,phases,kind,rating [kVA],real [kW]\nG,L,ABC,other,600,500\n")
	delete(f, "cases/heavy/case.toml")
	return f
}

// Cases that share the walk of their base give the bytes of those that each walk it, and so
// do they run side by side.
func TestCasesShareTheWalkOfTheirBase(t *testing.T) {
	p := placed(t, sharedFeeder())
	studies, _, err := Choose(p, []string{"wide", "plant", "same"})
	if err != nil {
		t.Fatal(err)
	}
	shared, err := Run(context.Background(), p, studies, Settings{Workers: 3})
	if err != nil {
		t.Fatal(err)
	}
	for i, c := range shared {
		alone := p
		alone.Results = t.TempDir()
		// A walk of its own: the engine is prepared without a base.
		e, err := sim.Prepare(studies[i], sim.Options{})
		if err != nil {
			t.Fatal(err)
		}
		dir := filepath.Join(alone.Results, c.Name)
		w, err := results.Create(dir, e.Plan)
		if err != nil {
			t.Fatal(err)
		}
		out, err := e.Run(context.Background(), w)
		if err != nil {
			t.Fatal(err)
		}
		if err := w.Finish(out, results.RunInfo{Version: p.Version, Inputs: c.Inputs, Warnings: e.Warnings}); err != nil {
			t.Fatal(err)
		}
		seen := 0
		err = filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
			if err != nil || d.IsDir() || !strings.HasSuffix(path, ".csv") {
				return err
			}
			seen++
			want, err := os.ReadFile(path)
			if err != nil {
				return err
			}
			got, err := os.ReadFile(filepath.Join(c.Dir, d.Name()))
			if string(got) != string(want) {
				t.Errorf("case %s: %s differs from that of a walk of its own", c.Name, d.Name())
			}
			return err
		})
		if err != nil || seen < 8 {
			t.Errorf("case %s: %d tables compared (%v)", c.Name, seen, err)
		}
	}
}

// An instant beside a run has the loads of the run: a probe at the positions of the run
// finds the run's voltages, to twice the tolerance of a solution.
func TestAnInstantHasTheLoadsOfTheWalk(t *testing.T) {
	p := placed(t, sharedFeeder())
	st, err := feeder.Open(p.FS, "plant")
	if err != nil {
		t.Fatal(err)
	}
	var w baseWalks
	ctx := context.Background()
	e, err := w.prepare(ctx, variant(st, "one", nil), false)
	if err != nil {
		t.Fatal(err)
	}
	probe, err := w.prepare(ctx, variant(st, "other", nil), false)
	if err != nil {
		t.Fatal(err)
	}
	if len(w.walked) != 1 {
		t.Errorf("%d walks for two engines of one case", len(w.walked))
	}
	step := 0
	if _, err := e.Run(ctx, stepRecorder(func(s *results.Step) error {
		in, err := probe.Held(step, sim.Positions{Taps: s.Last.Taps, Closed: s.Last.Closed}, s.Last.V)
		if err != nil {
			return err
		}
		for i := range probe.Meter().Points {
			x := &probe.Meter().Points[i]
			if d := math.Abs(x.PU(in.State.V) - x.PU(s.Last.V)); d > 2e-8 {
				t.Errorf("step %d, %s: the probe is %g p.u. off the run", step, x.Name, d)
			}
		}
		step++
		return nil
	})); err != nil {
		t.Fatal(err)
	}
	if step != 48 {
		t.Errorf("%d steps", step)
	}
}
