package main

import (
	"io"
	"os"
	"path/filepath"
	"testing"

	"yearflow/sim/feeder"
)

func TestRunWritesAStudy(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "s")
	if err := run([]string{"-size", "s", "-days", "2", "-step", "1h", "-inputs", "hours", dir}, io.Discard); err != nil {
		t.Fatal(err)
	}
	st, err := feeder.Open(os.DirFS(dir), "")
	if err != nil {
		t.Fatal(err)
	}
	if n := st.Settings.Period.Steps(); n != 48 || len(st.Model.Nodes) != 131 {
		t.Errorf("%d steps on %d nodes, want 48 on 131", n, len(st.Model.Nodes))
	}
}

func TestRunSaysWhatIsWrong(t *testing.T) {
	full := t.TempDir()
	if err := os.WriteFile(filepath.Join(full, "x"), nil, 0o666); err != nil {
		t.Fatal(err)
	}
	for _, args := range [][]string{{}, {"-size", "XL", "d"}, {"-inputs", "days", "d"}, {"-days", "-3", "d"}, {full}} {
		if err := run(args, io.Discard); err == nil {
			t.Errorf("%q: no error", args)
		}
	}
}
