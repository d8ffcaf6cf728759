package results

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"yearflow/sim/tables"
)

// drawn tells the files of a TablesFolder that are made from its tables.
func drawn(name string) bool {
	return strings.HasSuffix(name, ".html") || strings.HasPrefix(name, "figures/")
}

// CopyTables copies what the document of a kind in the folder dir is drawn from into the
// folder to: its tables, and a record that names them alone, so that it can be drawn there
// while the old document stays. What has become of the old document and its figures does
// not matter. The error is a tables.Faults where the folder is of another version, or a
// table is missing or not the one that was written.
func CopyTables(dir, kind, to string) (*TablesRecord, error) {
	r, err := readRecord(dir, kind)
	if err != nil {
		return nil, err
	}
	var faults tables.Faults
	copied := map[string]string{}
	for _, name := range slices.Sorted(maps.Keys(r.Files)) {
		if drawn(name) {
			continue
		}
		at := tables.Pos{File: filepath.Join(dir, filepath.FromSlash(name))}
		if !filepath.IsLocal(filepath.FromSlash(name)) {
			faults.Add(at, "lies outside the folder, but %s.json names it: run %s again", kind, kind)
			continue
		}
		data, err := os.ReadFile(at.File)
		if errors.Is(err, fs.ErrNotExist) {
			faults.Add(at, "is missing: this is half of a folder of %s; run %s again", kind, kind)
			continue
		}
		if err != nil {
			return nil, err
		}
		sum := sha256.Sum256(data)
		if copied[name] = hex.EncodeToString(sum[:]); copied[name] != r.Files[name] {
			faults.Add(at, "has changed since %s wrote it (its SHA-256 is not that of %s.json), and the document would no longer say what was computed: run %s again", kind, kind, kind)
			continue
		}
		if err := writeBelow(to, name, data); err != nil {
			return nil, err
		}
	}
	if err := faults.Err(); err != nil {
		return nil, err
	}
	own := *r
	own.Files = copied
	data, err := json.MarshalIndent(own, "", "  ")
	if err != nil {
		return nil, fmt.Errorf("copy %s.json: %w", kind, err)
	}
	return r, writeBelow(to, kind+".json", append(data, '\n'))
}

func writeBelow(dir, name string, data []byte) error {
	path := filepath.Join(dir, filepath.FromSlash(name))
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return err
	}
	return os.WriteFile(path, data, 0o644)
}

// readRecord reads <kind>.json; its faults say what would do instead.
func readRecord(dir, kind string) (*TablesRecord, error) {
	at := tables.Pos{File: filepath.Join(dir, kind+".json")}
	data, err := os.ReadFile(at.File)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, tables.Faults{{Pos: at, Text: fmt.Sprintf("is missing: this is no folder of %s, or half of one; run %s again", kind, kind)}}
	}
	if err != nil {
		return nil, err
	}
	var r TablesRecord
	dec := json.NewDecoder(bytes.NewReader(data))
	dec.UseNumber() // so that it is written again as it was
	if err := dec.Decode(&r); err != nil {
		return nil, tables.Faults{{Pos: at, Text: fmt.Sprintf("cannot be read (%v): run %s again", err, kind)}}
	}
	if r.Format != tablesFormat || r.Kind != kind {
		return nil, tables.Faults{{Pos: at, Text: fmt.Sprintf("format is %d of %q, this program reads %d of %q (the folder was written by version %q): run %s again", r.Format, r.Kind, tablesFormat, kind, r.Version, kind)}}
	}
	return &r, nil
}

// RehashTables notes in <kind>.json of the folder dir which files below it are drawn from
// its tables, and their hashes. The record is exchanged whole; nothing else in it changes.
// It returns those that were noted before and are no longer.
func RehashTables(dir, kind string, names []string) (left []string, err error) {
	r, err := readRecord(dir, kind)
	if err != nil {
		return nil, err
	}
	before := maps.Clone(r.Files)
	maps.DeleteFunc(r.Files, func(name, _ string) bool { return drawn(name) })
	for _, name := range names {
		if r.Files[name], err = syncAndHash(dir, name); err != nil {
			return nil, err
		}
	}
	for _, name := range slices.Sorted(maps.Keys(before)) {
		if _, still := r.Files[name]; !still {
			left = append(left, name)
		}
	}
	if maps.Equal(before, r.Files) {
		return left, nil
	}
	data, err := json.MarshalIndent(r, "", "  ")
	if err != nil {
		return left, fmt.Errorf("write %s.json: %w", kind, err)
	}
	return left, exchangeFile(filepath.Join(dir, kind+".json"), append(data, '\n'))
}
