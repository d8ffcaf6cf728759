package main

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"yearflow/sim/demo"
)

func demoCommand(c *console) *cobra.Command {
	return &cobra.Command{
		Use: "demo [DIR]", Short: "writes the demo study, ready to edit",
		Example: "  yearflow demo my-feeder\n  yearflow check my-feeder",
		Args:    atMostOne("folder"),
		RunE: func(_ *cobra.Command, args []string) error {
			dir := "demo"
			if len(args) > 0 {
				dir = args[0]
			}
			return c.writeDemo(dir)
		},
	}
}

// writeDemo writes the demo beside its place and moves it there, so that it is whole
// or absent; a folder that holds anything is left alone.
func (c *console) writeDemo(dir string) error {
	entries, err := os.ReadDir(dir)
	switch {
	case err == nil && len(entries) > 0:
		return wrongf("%q is there already and not empty: name a new folder", dir)
	case err != nil && !errors.Is(err, fs.ErrNotExist):
		return wrongf("%q cannot take a study: %v", dir, err)
	}
	parent := filepath.Dir(filepath.Clean(dir))
	if err := os.MkdirAll(parent, 0o755); err != nil {
		return machineError{err}
	}
	tmp, err := os.MkdirTemp(parent, ".yearflow-demo-*")
	if err != nil {
		return machineError{err}
	}
	defer os.RemoveAll(tmp)
	whole := filepath.Join(tmp, "study")
	if err := os.CopyFS(whole, demo.Study()); err != nil {
		return machineError{fmt.Errorf("write the demo: %w", err)}
	}
	if entries != nil || err == nil {
		_ = os.Remove(dir) // an empty folder makes way
	}
	if err := os.Rename(whole, dir); err != nil {
		return machineError{fmt.Errorf("write the demo: %w", err)}
	}
	c.printf("The demo study is in %s. Next:\n\n  yearflow check %s\n  yearflow run %s\n", dir, dir, dir)
	return nil
}
