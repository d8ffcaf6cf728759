package plots

import (
	"bytes"
	"fmt"
	"io"
	"io/fs"

	"golang.org/x/sync/errgroup"

	"yearflow/sim/results"
)

// Options of Draw. The zero value draws every figure at 200 dots per inch on two
// workers.
type Options struct {
	// DPI is the resolution; every figure is 17 cm wide. 40 to 1200; 0 means 200.
	DPI int
	// Only names the figures to draw (without .png); nil means all.
	Only []string
	// Workers is how many figures are drawn at once; 0 means 2. The bytes do not
	// depend on it.
	Workers int
}

// Figure is one picture that was written.
type Figure struct {
	Name    string // of the file, such as "losses.png"
	Title   string
	Finding string // what it shows, one or two sentences computed from the data
	Alt     string // for those who do not see it
	PNG     []byte // what was written
}

// drawing is a figure before its page is written.
type drawing struct {
	name  string
	paint func(*survey, *style) (*page, Figure)
	// has tells whether the run has what the figure shows; nil: every run has.
	has func(*survey) bool
}

// drawings are all figures in the order of a report.
var drawings = [...]drawing{
	{name: "voltage-lowest-year", paint: drawLowestYear},
	{name: "voltage-highest-year", paint: drawHighestYear},
	{name: "voltage-distance", paint: drawDistance},
	{name: "voltage-envelope", paint: drawEnvelope},
	{name: "voltage-duration", paint: drawDuration},
	{name: "taps", paint: drawTaps},
	{name: "operations", paint: drawOperations},
	{name: "losses", paint: drawLosses},
	{name: "loading", paint: drawLoading},
	{name: "map", paint: drawMap},
	{name: "power", paint: drawPower},
	{name: "measured", paint: drawMeasured, has: hasMeasured},
}

// Names returns the names of all figures, without .png, in the order of a report; a run
// without measurements has not the one of them.
func Names() []string {
	var names []string
	for _, d := range drawings {
		names = append(names, d.name)
	}
	return names
}

// Draw draws the figures of the results folder dir, each as a PNG that is written to
// what out returns for its name (and closed; out is called in order, never at once), and returns what they say in the order
// of a report; one of measurements only where the run had any. It fails where the folder does not read (results.ReadFolder), on an
// unknown name, and where out or a writer fails.
func Draw(dir fs.FS, out func(name string) (io.WriteCloser, error), o Options) ([]Figure, error) {
	f, err := results.ReadFolder(dir)
	if err != nil {
		return nil, err
	}
	return DrawFolder(f, out, o)
}

// DrawFolder is Draw for a folder that has been read.
func DrawFolder(f *results.Folder, out func(name string) (io.WriteCloser, error), o Options) ([]Figure, error) {
	if o.DPI == 0 {
		o.DPI = 200
	}
	if o.DPI < 40 || o.DPI > 1200 {
		return nil, fmt.Errorf("figures of %d dots per inch: want 40 to 1200", o.DPI)
	}
	if o.Workers <= 0 {
		o.Workers = 2
	}
	chosen, err := choose(o.Only)
	if err != nil {
		return nil, err
	}
	s, err := newSurvey(f)
	if err != nil {
		return nil, err
	}
	chosen = there(s, chosen)
	st := newStyle(o.DPI)
	figures := make([]Figure, len(chosen))
	pictures := make([]bytes.Buffer, len(chosen))
	var g errgroup.Group
	g.SetLimit(o.Workers)
	for i, d := range chosen {
		g.Go(func() error {
			p, fig := d.paint(s, st)
			fig.Name = d.name + ".png"
			figures[i] = fig
			return p.writeTo(&pictures[i])
		})
	}
	if err := g.Wait(); err != nil {
		return nil, fmt.Errorf("figures: %w", err)
	}
	for i := range figures {
		figures[i].PNG = pictures[i].Bytes()
		if err := write(out, figures[i].Name, figures[i].PNG); err != nil {
			return nil, fmt.Errorf("figure %s: %w", figures[i].Name, err)
		}
	}
	return figures, nil
}

// there leaves out figures of what the run did not have, such as measurements.
func there(s *survey, chosen []drawing) []drawing {
	var out []drawing
	for _, d := range chosen {
		if d.has == nil || d.has(s) {
			out = append(out, d)
		}
	}
	return out
}

func write(out func(string) (io.WriteCloser, error), name string, data []byte) error {
	w, err := out(name)
	if err != nil {
		return err
	}
	if _, err := w.Write(data); err != nil {
		w.Close()
		return err
	}
	return w.Close()
}

func choose(only []string) ([]drawing, error) {
	if only == nil {
		return drawings[:], nil
	}
	var chosen []drawing
	for _, name := range only {
		found := false
		for _, d := range drawings {
			if d.name == name {
				chosen, found = append(chosen, d), true
			}
		}
		if !found {
			return nil, fmt.Errorf("no figure is named %q: there are %v", name, Names())
		}
	}
	return chosen, nil
}
