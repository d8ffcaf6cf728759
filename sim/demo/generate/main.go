// Generate writes the generated part of the demonstration study: the street plan
// of Quillwater 1204 as tables, and the profiles of its year and of one week by the
// minute. Run it from the top of the module:
//
//	go run ./sim/demo/generate [-into sim/demo/study]
//
// It overwrites feeder/{nodes,sections,transformers,loads,generators}.csv and
// profiles/. The other tables, study.toml and the cases are kept by hand and are
// not touched.
//
// The feeder is written down in streets.go (where lines and cables run) and
// services.go (who is served, and what they take). The homes and small shops behind
// single-phase transformers stand at the ends of triplex services, so that the voltage
// judged is that at the meter; drops.go derives them. The profiles follow from a
// weather of seeded chance (weather.go), the sun's path and the modules' tilt
// (sun.go) and the habits of five classes of customer (habits.go). Everything is a
// continuous function of time, so that the hours of the year and the minutes of the
// week come from the same weather and the same habits; a value is the mean over its
// interval. Chance comes from PCG generators with fixed seeds: the same
// program writes the same bytes on the same kind of processor.
package main

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
	_ "time/tzdata" // the zone must not depend on the machine
)

func main() {
	into := flag.String("into", filepath.Join("sim", "demo", "study"), "folder of the study")
	flag.Parse()
	if err := write(*into); err != nil {
		fmt.Fprintln(os.Stderr, "generate:", err)
		os.Exit(1)
	}
}

// write writes every generated file below dir.
func write(dir string) error {
	files, err := generate()
	if err != nil {
		return err
	}
	for _, f := range files {
		path := filepath.Join(dir, filepath.FromSlash(f.name))
		if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
			return err
		}
		if err := os.WriteFile(path, f.content, 0o666); err != nil {
			return err
		}
	}
	return nil
}

// A file is one generated file; its name is relative to the study's folder.
type file struct {
	name    string
	content []byte
}

// generate makes all files, in a fixed order.
func generate() ([]file, error) {
	tables, err := feederTables()
	if err != nil {
		return nil, err
	}
	series, err := profileFiles()
	if err != nil {
		return nil, err
	}
	return append(tables, series...), nil
}
