package plots

import (
	"bytes"
	"errors"
	"flag"
	"image"
	_ "image/png"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/fstest"
	"time"
)

var (
	regen = flag.Bool("regen", false, "rewrite the golden pictures; look at them before they are committed")
	look  = flag.String("look", "", "folder to write the figures of all variants to, at full resolution")
)

// kept collects figures in memory.
type kept map[string]*bytes.Buffer

type keptFile struct{ *bytes.Buffer }

func (keptFile) Close() error { return nil }

func (k kept) out(name string) (io.WriteCloser, error) {
	b := &bytes.Buffer{}
	k[name] = b
	return keptFile{b}, nil
}

// variants are runs of every shape that the figures have to bear.
func variants() map[string]invented {
	z := denver()
	at := func(y int, m time.Month, d int) time.Time { return time.Date(y, m, d, 0, 0, 0, 0, z) }
	v := map[string]invented{}
	add := func(name string, change func(*invented)) {
		g := year()
		change(&g)
		v[name] = g
	}
	add("year", func(g *invented) {})
	add("one-step", func(g *invented) { g.end, g.demo, g.coordinates = g.start.Add(time.Hour), false, false })
	add("day", func(g *invented) { // 25 hours
		g.start, g.end, g.step, g.longlat = at(2025, 11, 2), at(2025, 11, 3), 15*time.Minute, true
	})
	add("week", func(g *invented) {
		g.start, g.end, g.step, g.unsolvedRows = at(2025, 3, 7), at(2025, 3, 14), time.Minute, 400
	})
	add("zero", func(g *invented) { // no loads, no devices, no log of voltages
		g.zeroLoads, g.voltages, g.devices, g.end = true, false, false, at(2025, 3, 1)
	})
	add("ungrounded", func(g *invented) { g.ungrounded, g.end = true, at(2025, 4, 1) })
	add("three-years", func(g *invented) { g.end, g.step, g.trunk = at(2028, 1, 1), 6*time.Hour, 6 })
	add("measured-one", func(g *invented) { g.measured, g.end = 1, at(2025, 1, 20) })
	add("measured-none", func(g *invented) { g.measured, g.end = 0, at(2025, 1, 20) })
	add("nothing-solved", func(g *invented) { g.end, g.unsolvedRows = at(2025, 1, 3), 48 })
	add("huge", func(g *invented) { g.trunk, g.end = 1200, g.start.Add(6*time.Hour) })
	return v
}

// small is the run of the golden pictures.
func small() invented {
	g := year()
	g.end = g.start.AddDate(0, 3, 0)
	g.step, g.trunk = 3*time.Hour, 10
	return g
}

// TestEveryShape draws every variant: none fails, every figure says something in
// whole sentences, and has a picture of the right width.
func TestEveryShape(t *testing.T) {
	for name, g := range variants() {
		t.Run(name, func(t *testing.T) {
			if name == "year" && *look == "" {
				t.Skip("the benchmark draws it")
			}
			dpi := 60
			if *look != "" {
				dpi = 0
			}
			k := kept{}
			figures, err := Draw(g.write(), k.out, Options{DPI: dpi})
			if err != nil {
				t.Fatal(err)
			}
			want := len(Names())
			if g.measured == 0 {
				want--
			}
			if len(figures) != want {
				t.Errorf("%d figures, want %d", len(figures), want)
			}
			for _, f := range figures {
				if f.Title == "" || !strings.HasSuffix(f.Finding, ".") && !strings.HasSuffix(f.Finding, ".)") || !strings.Contains(f.Alt, f.Finding) {
					t.Errorf("%s: title %q, finding %q, alt %q", f.Name, f.Title, f.Finding, f.Alt)
				}
				if strings.Contains(f.Finding, "NaN") || strings.Contains(f.Finding, "Inf") || strings.Contains(f.Finding, "%!") {
					t.Errorf("%s: finding %q", f.Name, f.Finding)
				}
				img, _, err := image.Decode(bytes.NewReader(k[f.Name].Bytes()))
				if err != nil {
					t.Errorf("%s: %v", f.Name, err)
				} else if w := img.Bounds().Dx(); dpi == 60 && w != 402 { // 17 cm at 60 dots per inch: 401.6
					t.Errorf("%s is %d pixels wide, want 402", f.Name, w)
				}
				if *look != "" {
					keep(t, filepath.Join(*look, name), f.Name, k[f.Name].Bytes())
				}
			}
		})
	}
}

func keep(t *testing.T, dir, name string, data []byte) {
	t.Helper()
	if err := os.MkdirAll(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, name), data, 0o644); err != nil {
		t.Fatal(err)
	}
}

// TestGoldenPictures holds the figures of a small run against pictures that were
// looked at. Text is drawn by the same rasteriser everywhere, so that only rounding
// may differ: no more than a pixel in a thousand by more than a few levels.
func TestGoldenPictures(t *testing.T) {
	k := kept{}
	if _, err := Draw(small().write(), k.out, Options{DPI: 45}); err != nil {
		t.Fatal(err)
	}
	for _, name := range Names() {
		name += ".png"
		path := filepath.Join("testdata", "golden", name)
		if *regen {
			keep(t, filepath.Dir(path), name, k[name].Bytes())
			continue
		}
		want, err := os.ReadFile(path)
		if err != nil {
			t.Error(err)
			continue
		}
		if differ, all := differing(t, k[name].Bytes(), want); differ*1000 > all {
			t.Errorf("%s: %d of %d pixels differ from %s; look at both, then -regen", name, differ, all, path)
		}
	}
}

// differing counts the pixels that differ by more than 8 of 255 in a channel.
func differing(t *testing.T, a, b []byte) (differ, all int) {
	t.Helper()
	p, _, err := image.Decode(bytes.NewReader(a))
	if err != nil {
		t.Fatal(err)
	}
	q, _, err := image.Decode(bytes.NewReader(b))
	if err != nil {
		t.Fatal(err)
	}
	r := p.Bounds()
	all = r.Dx() * r.Dy()
	if r != q.Bounds() {
		return all, all
	}
	far := func(x, y uint32) bool { return max(x, y)-min(x, y) > 8<<8 }
	for y := r.Min.Y; y < r.Max.Y; y++ {
		for x := r.Min.X; x < r.Max.X; x++ {
			r1, g1, b1, _ := p.At(x, y).RGBA()
			r2, g2, b2, _ := q.At(x, y).RGBA()
			if far(r1, r2) || far(g1, g2) || far(b1, b2) {
				differ++
			}
		}
	}
	return differ, all
}

// TestGoldenComparisonSees makes sure that the comparison can fail.
func TestGoldenComparisonSees(t *testing.T) {
	k, l := kept{}, kept{}
	g := small()
	o := Options{DPI: 45, Only: []string{"losses"}}
	if _, err := Draw(g.write(), k.out, o); err != nil {
		t.Fatal(err)
	}
	g.demo = false // only the small tag goes away
	if _, err := Draw(g.write(), l.out, o); err != nil {
		t.Fatal(err)
	}
	if differ, all := differing(t, k["losses.png"].Bytes(), l["losses.png"].Bytes()); differ*1000 <= all {
		t.Errorf("without the tag only %d of %d pixels differ", differ, all)
	}
}

func TestSameBytes(t *testing.T) {
	want := kept{}
	if _, err := Draw(small().write(), want.out, Options{DPI: 60, Workers: 1}); err != nil {
		t.Fatal(err)
	}
	shuffled := small()
	shuffled.shuffle = 99
	for name, c := range map[string]struct {
		dir fs.FS
		o   Options
	}{
		"again":                {small().write(), Options{DPI: 60, Workers: 1}},
		"eight workers":        {small().write(), Options{DPI: 60, Workers: 8}},
		"rows in other orders": {shuffled.write(), Options{DPI: 60}},
	} {
		got := kept{}
		if _, err := Draw(c.dir, got.out, c.o); err != nil {
			t.Fatal(err)
		}
		for _, n := range Names() {
			if !bytes.Equal(got[n+".png"].Bytes(), want[n+".png"].Bytes()) {
				t.Errorf("%s: %s has other bytes", name, n)
			}
		}
	}
}

// TestDrawsWhatTheWriterWrote draws the golden folder of the results package.
func TestDrawsWhatTheWriterWrote(t *testing.T) {
	k := kept{}
	figures, err := Draw(os.DirFS("../sim/results/testdata/tiny"), k.out, Options{DPI: 60})
	if err != nil {
		t.Fatal(err)
	}
	if len(figures) != len(Names())-1 {
		t.Errorf("%d figures, want %d", len(figures), len(Names())-1) // it measured nothing
	}
}

var errDisk = errors.New("disk is full")

type fullFile struct{ closed *int }

func (fullFile) Write([]byte) (int, error) { return 0, errDisk }
func (f fullFile) Close() error            { *f.closed++; return nil }

func TestFailures(t *testing.T) {
	k := kept{}
	good := small().write()
	if _, err := Draw(fstest.MapFS{}, k.out, Options{}); err == nil || !strings.Contains(err.Error(), "run.json") {
		t.Errorf("an empty folder: %v", err)
	}
	if _, err := Draw(good, k.out, Options{Only: []string{"piechart"}}); err == nil || !strings.Contains(err.Error(), `"piechart"`) || !strings.Contains(err.Error(), "losses") {
		t.Errorf("an unknown figure: %v", err)
	}
	if _, err := Draw(good, k.out, Options{DPI: 9999}); err == nil || !strings.Contains(err.Error(), "9999") {
		t.Errorf("a huge resolution: %v", err)
	}
	closed := 0
	_, err := Draw(good, func(string) (io.WriteCloser, error) { return fullFile{&closed}, nil }, Options{DPI: 60, Only: []string{"losses"}})
	if !errors.Is(err, errDisk) || !strings.Contains(err.Error(), "losses.png") || closed != 1 {
		t.Errorf("a full disk: %v, closed %d times", err, closed)
	}
	if _, err := Draw(good, func(string) (io.WriteCloser, error) { return nil, errDisk }, Options{DPI: 60}); !errors.Is(err, errDisk) {
		t.Errorf("no file: %v", err)
	}
	// voltages.csv of another run
	broken := small().write()
	lines := strings.SplitAfter(string(broken["voltages.csv"].Data), "\n")
	broken["voltages.csv"] = &fstest.MapFile{Data: []byte(strings.Join(append(lines[:5:5], lines[6:]...), ""))}
	if _, err := Draw(broken, k.out, Options{DPI: 60}); err == nil || !strings.Contains(err.Error(), "voltages.csv") {
		t.Errorf("a missing row of voltages: %v", err)
	}
	// An unsolved run and names that want quoting must not stop anything.
	odd := small().write()
	for name, f := range odd {
		odd[name] = &fstest.MapFile{Data: []byte(strings.ReplaceAll(string(f.Data), "h08-1", `"h, ""08"" 1"`))}
	}
	for _, name := range []string{"steps.csv", "voltages.csv"} {
		odd[name] = &fstest.MapFile{Data: []byte(strings.NewReplacer(`"h, ""08"" 1".C`, `"h, ""08"" 1.C"`, `"h, ""08"" 1".B`, `"h, ""08"" 1.B"`, `"h, ""08"" 1".A`, `"h, ""08"" 1.A"`).Replace(string(odd[name].Data)))}
	}
	if _, err := Draw(odd, k.out, Options{DPI: 60}); err != nil {
		t.Errorf("names with commas and quotes: %v", err)
	}
}
