package feeder

import (
	"errors"
	"math"
	"testing"
	"testing/fstest"

	"yearflow/sim/tables"
)

// sound checks what holds of every study that opens, whatever stood in its files.
func sound(t *testing.T, s *Study, err error) {
	t.Helper()
	if err != nil {
		var faults tables.Faults
		if !errors.As(err, &faults) || len(faults) == 0 {
			t.Fatalf("the error is no list of faults: %v", err)
		}
		for _, f := range faults {
			if f.Pos.File == "" || f.Text == "" {
				t.Errorf("a fault without a place or a text: %q", f.Error())
			}
		}
		return
	}
	m := s.Model
	for i, n := range m.Nodes {
		if !(n.Nominal > 0) || math.IsInf(n.Nominal, 0) || len(n.Phases) == 0 || i > 0 && m.Nodes[i-1].Name >= n.Name {
			t.Errorf("node %+v", n)
		}
	}
	for _, x := range m.Sections {
		if !(x.LengthKM > 0) || len(x.Phases) > m.Constructions[x.Construction].Matrices.N {
			t.Errorf("section %+v", x)
		}
	}
	for _, x := range m.Transformers {
		if !(x.R >= 0) || !(x.X >= 0) || x.R+x.X == 0 || !(x.TapKV > 0) {
			t.Errorf("transformer %+v", x)
		}
	}
	for _, x := range m.Loads {
		if len(x.Phases)+len(x.Pairs) == 0 {
			t.Errorf("load %+v", x)
		}
	}
	if p := s.Settings.Period; p.Zone == nil || p.Step <= 0 || p.End <= p.Start {
		t.Errorf("period %+v", p)
	}
	s.Describe()
	s.ProfileUses()
}

// FuzzSettings opens the small study with any bytes as its study.toml.
func FuzzSettings(f *testing.F) {
	f.Add(small()["study.toml"].Data)
	f.Add([]byte(period + "[run]\nvoltages = [\"n2.A\"]\n[limits]\nrange = { low = 0.95, high = 1.05 }\n[prices]\nenergy = 0.1\n"))
	f.Add([]byte("[[profiles]]\nfiles = [\"a\"]\n[[profiles]]\n[compare]\nx = {y = [1, {z = 1979-05-27}]}\n"))
	f.Add([]byte("period.start = 2025-01-01T00:00:00\nperiod.end = 2025-01-02\nperiod.zone = \"UTC\""))
	f.Fuzz(func(t *testing.T, data []byte) {
		s, err := Open(with(small(), "study.toml", " "+string(data)), "")
		sound(t, s, err)
	})
}

// FuzzTables opens the small study with any bytes as one of its tables, of the base
// or of a case.
func FuzzTables(f *testing.F) {
	names := tableNames()
	for i, n := range names {
		if file := small()["feeder/"+n+".csv"]; file != nil {
			f.Add(byte(i), false, file.Data)
			f.Add(byte(i), true, file.Data)
		}
	}
	f.Fuzz(func(t *testing.T, which byte, inCase bool, data []byte) {
		name, caseName := "feeder/", ""
		if inCase {
			name, caseName = "cases/c/", "c"
		}
		fsys := with(small())
		fsys[name+names[int(which)%len(names)]+".csv"] = &fstest.MapFile{Data: data}
		s, err := Open(fsys, caseName)
		sound(t, s, err)
	})
}
