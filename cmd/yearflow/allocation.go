package main

import (
	"fmt"
	"path/filepath"
	"strconv"

	"yearflow/sim/results"
)

// tellAllocation warns of steps at which a measured total could not be shared over the
// loads as it was measured.
func (c *console) tellAllocation(folder *results.Folder, dir string) {
	for _, r := range folder.Summary {
		if r.Quantity != "allocation steps listed" {
			continue
		}
		if n, err := strconv.Atoi(r.Value); err == nil && n > 0 {
			fmt.Fprintf(c.errs, "warning: %s at which what was measured is not met by the allocated loads; see %s\n", count(n, "step"), filepath.Join(dir, "allocation.csv"))
		}
	}
}
