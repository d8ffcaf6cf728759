package plots

import (
	"bytes"
	"io"
	"os"
	"path/filepath"
	"testing"
	"time"
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

// look writes the figures where a person can see them: PLOTS_LOOK=dir go test -run Look.
func TestLook(t *testing.T) {
	dir := os.Getenv("PLOTS_LOOK")
	if dir == "" {
		t.Skip("PLOTS_LOOK names no folder")
	}
	z := denver()
	small := year()
	for name, g := range variants() {
		_ = small
		k := kept{}
		begin := time.Now()
		figs, err := Draw(g.write(), k.out, Options{})
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		t.Log(name, time.Since(begin), z)
		sub := filepath.Join(dir, name)
		if err := os.MkdirAll(sub, 0o755); err != nil {
			t.Fatal(err)
		}
		for _, f := range figs {
			t.Log(f.Name, f.Finding)
			if err := os.WriteFile(filepath.Join(sub, f.Name), k[f.Name].Bytes(), 0o644); err != nil {
				t.Fatal(err)
			}
		}
	}
}

func variants() map[string]invented {
	z := denver()
	at := func(y int, m time.Month, d int) time.Time { return time.Date(y, m, d, 0, 0, 0, 0, z) }
	v := map[string]invented{"year": year()}
	g := year()
	g.end, g.demo, g.coordinates = g.start.Add(time.Hour), false, false
	v["one-step"] = g
	g = year()
	g.start, g.end, g.step = at(2025, 11, 2), at(2025, 11, 3), 15*time.Minute
	g.longlat = true
	v["day"] = g
	g = year()
	g.start, g.end, g.step = at(2025, 3, 7), at(2025, 3, 14), time.Minute
	g.unsolvedRows = 400
	v["week"] = g
	g = year()
	g.zeroLoads, g.voltages, g.devices, g.end = true, false, false, at(2025, 3, 1)
	v["zero"] = g
	return v
}
