package profiles

import (
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strconv"
	"strings"
	"testing"
	"time"
)

// keptMeters is a folder with two meters that need mending, and a cache.
func keptMeters(t *testing.T) (dir, cache string, open func(MeterRules) *MeterSet) {
	t.Helper()
	dir = t.TempDir()
	cache = filepath.Join(dir, "not", "yet", "there")
	text := "time,A [kW],A [kvar],B [kW]\n"
	for k, v := range veeValues(20, hour, 1) {
		row := Format(veeStart+int64(k)*hour, nil)[:16] + ","
		switch {
		case k == 50:
			row += ",0.5,2"
		case k == 70:
			row += "1e6,,-1"
		default:
			row += ftoa(v) + "," + ftoa(v/3) + "," + ftoa(2*v)
		}
		text += row + "\n"
	}
	writeFile(t, filepath.Join(dir, "m.csv"), text)
	blocks := []MeterBlock{{Files: []string{"m.csv"}, Layout: "wide", Zone: zone(t, "America/Denver")}}
	return dir, cache, func(rules MeterRules) *MeterSet {
		t.Helper()
		s, err := OpenMeters(os.DirFS(dir), blocks, cache, rules)
		if err != nil {
			t.Fatal(err)
		}
		return s
	}
}

func ftoa(v float64) string { return strconv.FormatFloat(v, 'f', -1, 64) }

func writeFile(t *testing.T, name, text string) {
	t.Helper()
	if err := os.WriteFile(name, []byte(text), 0o666); err != nil {
		t.Fatal(err)
	}
}

// sameSet compares everything but where the set comes from.
func sameSet(t *testing.T, a, b *MeterSet) {
	t.Helper()
	if !reflect.DeepEqual(a.Mended, b.Mended) || !reflect.DeepEqual(a.Warnings, b.Warnings) || !reflect.DeepEqual(a.files, b.files) || len(a.meters) != len(b.meters) {
		t.Fatalf("got %+v %v %v, want %+v %v %v", a.Mended, a.Warnings, a.files, b.Mended, b.Warnings, b.files)
	}
	for i, m := range a.meters {
		if !reflect.DeepEqual(m, b.meters[i]) {
			t.Fatalf("meter %s: %+v, want %+v", m.Name, m, b.meters[i])
		}
		if x, _ := b.Lookup(m.Name); x != b.meters[i] {
			t.Fatalf("meter %s is not found", m.Name)
		}
	}
}

// TestMeterCache: what the cache gives is what was read; it holds while the files and
// the rules are the same, by content, and a damaged one is passed over and mended.
func TestMeterCache(t *testing.T) {
	dir, cache, open := keptMeters(t)
	first := open(MeterRules{})
	if first.Cached || len(first.Mended) != 4 {
		t.Fatalf("first: cached %v, mended %+v", first.Cached, first.Mended)
	}
	again := open(MeterRules{})
	if !again.Cached {
		t.Fatal("the second run read the files")
	}
	sameSet(t, again, first)
	files, err := filepath.Glob(filepath.Join(cache, "*"))
	if err != nil || len(files) != 1 {
		t.Fatalf("the cache holds %v, %v", files, err)
	}
	if other := open(MeterRules{ServiceKW: map[string]float64{"A": 1e7}}); other.Cached || len(other.Mended) != 3 {
		t.Errorf("other rules: cached %v, mended %+v", other.Cached, other.Mended)
	}
	whole, err := os.ReadFile(files[0])
	if err != nil {
		t.Fatal(err)
	}
	name := filepath.Join(dir, "m.csv")
	text, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	old := time.Unix(1_600_000_000, 0)
	t.Run("touched", func(t *testing.T) {
		if err := os.Chtimes(name, old, old); err != nil {
			t.Fatal(err)
		}
		if !open(MeterRules{}).Cached {
			t.Error("a file of another time and the same content was read again")
		}
	})
	t.Run("changed", func(t *testing.T) {
		writeFile(t, name, strings.Replace(string(text), ",2\n", ",3\n", 1)) // as long as before
		s := open(MeterRules{})
		if s.Cached || reflect.DeepEqual(s.meters[1].values, first.meters[1].values) {
			t.Error("a changed file came from the cache")
		}
		if err := os.WriteFile(name, text, 0o666); err != nil {
			t.Fatal(err)
		}
		if open(MeterRules{}).Cached {
			t.Error("the file that was changed back came from the cache of the other")
		}
	})
	t.Run("unchanged by its time", func(t *testing.T) {
		if err := os.Chtimes(name, old, old); err != nil {
			t.Fatal(err)
		}
		if err := os.Remove(files[0]); err != nil {
			t.Fatal(err)
		}
		if open(MeterRules{}).Cached || !open(MeterRules{}).Cached {
			t.Error("the cache was deleted and is not written anew")
		}
	})
	for k := 0; k < len(whole); k += 1 + len(whole)/97 {
		spoilt := append([]byte(nil), whole...)
		spoilt[k] ^= 0x10
		if err := os.WriteFile(files[0], spoilt, 0o666); err != nil {
			t.Fatal(err)
		}
		s := open(MeterRules{})
		if s.Cached {
			t.Fatalf("byte %d of %d is wrong and the cache was taken", k, len(whole))
		}
		sameSet(t, s, first)
	}
	for _, n := range []int{0, 3, 16, len(whole) / 2, len(whole) - 1} {
		if err := os.WriteFile(files[0], whole[:n], 0o666); err != nil {
			t.Fatal(err)
		}
		if open(MeterRules{}).Cached {
			t.Fatalf("a cache cut at %d was taken", n)
		}
	}
	if left, _ := filepath.Glob(filepath.Join(cache, "*.new")); len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
}

// TestMeterCacheCannotBeWritten: the run goes on and says so.
func TestMeterCacheCannotBeWritten(t *testing.T) {
	dir, _, _ := keptMeters(t)
	blocks := []MeterBlock{{Files: []string{"m.csv"}, Layout: "wide"}}
	s, err := OpenMeters(os.DirFS(dir), blocks, filepath.Join(dir, "m.csv"), MeterRules{})
	if err != nil || len(s.meters) != 2 || len(s.Warnings) != 1 || !strings.Contains(s.Warnings[0].Text, "cannot be kept for the next run") {
		t.Errorf("got %v, %v", s, err)
	}
}

// FuzzMeterCache: no cache file panics or is taken for what it is not.
func FuzzMeterCache(f *testing.F) {
	c := &meterCache{path: "x", key: "k", zones: make([]*time.Location, 2)}
	s := &MeterSet{index: map[string]int{"A": 0}, Mended: []Mended{{"A", "gap", 1, 2, 1, math.Pi}}}
	s.meters = []*Meter{{Name: "A", step: hour, values: []float32{1, 2}, kvar: []float32{3, 4}, zone: time.UTC}}
	var b strings.Builder
	if err := c.encode(&b, s); err != nil {
		f.Fatal(err)
	}
	f.Add([]byte(b.String()))
	f.Add([]byte(cacheMagic))
	f.Fuzz(func(t *testing.T, data []byte) {
		r := &cacheReader{r: strings.NewReader(string(data))}
		h, ok := r.header(int64(len(data)))
		if !ok {
			return
		}
		if got := r.set(h, c.zones); got != nil && len(got.meters) != len(h.Meters) {
			t.Fatalf("%d meters of %d", len(got.meters), len(h.Meters))
		}
	})
}
