package main

import (
	"bytes"
	"io/fs"
	"testing"

	"yearflow/sim/demo"
)

// The study that travels in the binary is what this program writes, byte by byte.
func TestStudyIsGenerated(t *testing.T) {
	files, err := generate()
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		got, err := fs.ReadFile(demo.Study(), f.name)
		if err != nil {
			t.Fatal(err)
		}
		if !bytes.Equal(got, f.content) {
			t.Errorf("%s differs from what is generated, first at byte %d; run go run ./sim/demo/generate", f.name, firstDifference(got, f.content))
		}
	}
}

func firstDifference(a, b []byte) int {
	n := min(len(a), len(b))
	for i := range n {
		if a[i] != b[i] {
			return i
		}
	}
	return n
}
