package demo

import (
	"io/fs"
	"testing"
)

// The whole study travels in the binary, so it must stay small.
func TestSize(t *testing.T) {
	var size int64
	err := fs.WalkDir(Study(), ".", func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		info, err := d.Info()
		size += info.Size()
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	if size < 1e6 || size > 4<<20 {
		t.Errorf("the study has %d bytes; want a year of profiles in less than 4 MiB", size)
	}
}
