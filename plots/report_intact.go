package plots

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"io"
	"io/fs"
	"maps"
	"path"
	"slices"

	"yearflow/sim/tables"
)

// Intact tells which tables of a results folder are no longer what its run.json names by
// hash: a report of them would be of a run that never was. Figures and the report itself
// may be drawn again and are not looked at. Its error is a tables.Faults.
func Intact(folder fs.FS) error {
	record, err := ReadRecord(folder)
	if err != nil {
		return err
	}
	var faults tables.Faults
	for _, name := range slices.Sorted(maps.Keys(record.Results)) {
		if e := path.Ext(name); e != ".csv" && e != ".parquet" {
			continue
		}
		sum, err := hashOf(folder, name)
		switch {
		case errors.Is(err, fs.ErrNotExist):
			faults = append(faults, tables.Fault{Pos: tables.Pos{File: name}, Text: "is missing: this is half of a results folder; run the study again"})
		case err != nil:
			return err
		case sum != record.Results[name]:
			faults = append(faults, tables.Fault{Pos: tables.Pos{File: name}, Text: "has changed since it was written: it is not what run.json names by hash; run the study again"})
		}
	}
	if len(faults) > 0 {
		return faults
	}
	return nil
}

func hashOf(folder fs.FS, name string) (string, error) {
	f, err := folder.Open(name)
	if err != nil {
		return "", err
	}
	defer f.Close()
	h := sha256.New()
	if _, err := io.Copy(h, f); err != nil {
		return "", err
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}
