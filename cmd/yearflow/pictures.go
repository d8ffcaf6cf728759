package main

import (
	"bytes"
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"time"

	"yearflow/plots"
	"yearflow/sim/results"
)

// reportFile is the report of a run in its results folder.
const reportFile = "report.html"

// picturesInto draws the figures of a results folder into it, where they are wanted,
// and writes its report. It returns the names of what it wrote.
func picturesInto(dir string, figures bool) ([]string, results.WallTime, error) {
	start := time.Now()
	drawn, err := picture(os.DirFS(dir), dir, figures)
	names := []string{reportFile}
	for _, f := range drawn {
		names = append(names, "figures/"+f.Name)
	}
	part := "report"
	if figures {
		part = "figures and report"
	}
	return names, results.WallTime{Part: part, Seconds: time.Since(start).Seconds()}, err
}

// picture draws the figures of a results folder, where they are wanted, into the folder
// figures of another, and writes its report there.
func picture(folder fs.FS, to string, figures bool) ([]plots.Figure, error) {
	f, err := results.ReadFolder(folder)
	if err != nil {
		return nil, err
	}
	var drawn []plots.Figure
	if figures {
		at := filepath.Join(to, "figures")
		if err := os.MkdirAll(at, 0o755); err != nil {
			return nil, err
		}
		drawn, err = plots.DrawFolder(f, func(name string) (io.WriteCloser, error) {
			return os.Create(filepath.Join(at, name))
		}, plots.Options{})
		if err != nil {
			return nil, err
		}
	}
	var page bytes.Buffer
	if err := plots.WriteReport(&page, folder, f, drawn); err != nil {
		return nil, err
	}
	w, err := os.Create(filepath.Join(to, reportFile))
	if err != nil {
		return nil, err
	}
	_, err = w.Write(page.Bytes())
	return drawn, errors.Join(err, w.Close())
}
