package sim_test

import (
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
)

// The published feeders agree on both paths, from their published taps and from neutral,
// as they are published and over a day of loads from 0.3 to 1.1 times that.
func TestPublishedFeedersBothWays(t *testing.T) {
	folders, err := filepath.Glob("../testdata/published/*/study.toml")
	if err != nil {
		t.Fatal(err)
	}
	four, err := filepath.Glob("../testdata/published/four-node/*/study.toml")
	if err != nil {
		t.Fatal(err)
	}
	if folders = append(folders, four...); len(folders) < 14 {
		t.Fatalf("%d published feeders", len(folders))
	}
	for _, file := range folders {
		dir := filepath.Dir(file)
		cases := []string{""}
		more, err := filepath.Glob(filepath.Join(dir, "cases", "*"))
		if err != nil {
			t.Fatal(err)
		}
		for _, c := range more {
			cases = append(cases, filepath.Base(c))
		}
		for _, c := range cases {
			t.Run(filepath.Base(dir)+" "+c, func(t *testing.T) {
				study := copied(t, os.DirFS(dir))
				sameRun(t, study, c)
				shaped(t, study)
				sameRun(t, study, c)
				sameFiles(t, folderOfCase(t, study, c, sim.Options{Reference: true}), folderOfCase(t, study, c, sim.Options{}), true)
			})
		}
	}
}

// copied takes a folder into memory.
func copied(t *testing.T, from fs.FS) fstest.MapFS {
	t.Helper()
	out := fstest.MapFS{}
	err := fs.WalkDir(from, ".", func(name string, d fs.DirEntry, err error) error {
		if err == nil && !d.IsDir() {
			out[name] = text(content(t, from, name))
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// shaped makes a published study one of 480 steps of three minutes, with loads that follow a
// curve.
func shaped(t *testing.T, study fstest.MapFS) {
	t.Helper()
	toml := content(t, study, "study.toml")
	for _, r := range [][2]string{{"end = 2025-01-01T01:00:00", "end = 2025-01-02"}, {`step = "1h"`, `step = "3min"`}, {"[run]\n", "[[profiles]]\nfiles = [\"profiles/*.csv\"]\ninterpolate = true\nrepeat = \"day\"\n[run]\n"}} {
		if strings.Count(toml, r[0]) != 1 {
			t.Fatalf("study.toml has %q not once", r[0])
		}
		toml = strings.Replace(toml, r[0], r[1], 1)
	}
	study["study.toml"] = text(toml)
	var loads, day strings.Builder
	add := ",profile"
	for line := range strings.Lines(content(t, study, "feeder/loads.csv")) {
		line = strings.TrimRight(line, "\r\n")
		if line != "" && !strings.HasPrefix(line, "#") {
			line += add
			add = ",day"
		}
		loads.WriteString(line + "\n")
	}
	study["feeder/loads.csv"] = text(loads.String())
	day.WriteString("time,day [pu]\n")
	for h := range 24 {
		fmt.Fprintf(&day, "2025-01-01T%02d:00,%.3f\n", h, 0.7-0.4*math.Cos(float64(h)/12*math.Pi)+0.05*math.Sin(float64(5*h)))
	}
	study["profiles/day.csv"] = text(day.String())
}
