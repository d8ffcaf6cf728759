package results

import (
	"bytes"
	"encoding/json"
	"fmt"
	"maps"
	"os"
	"path/filepath"

	"yearflow/sim/tables"
)

// Rehash notes in run.json of the results folder dir the hashes of files that were
// written into it after the run: figures that were drawn again, and the report. names
// are below dir. run.json is exchanged whole; nothing else in it changes.
func Rehash(dir string, names []string) error {
	path := filepath.Join(dir, "run.json")
	data, err := os.ReadFile(path)
	if err != nil {
		return err
	}
	broken := func(text string) error {
		return tables.Faults{{Pos: tables.Pos{File: path}, Text: text + ": run the study again"}}
	}
	key := []byte(`  "results_sha256": `)
	at := bytes.LastIndex(data, key)
	if at < 0 {
		return broken("holds no hashes of the results")
	}
	at += len(key)
	dec := json.NewDecoder(bytes.NewReader(data[at:]))
	hashes := map[string]string{}
	if err := dec.Decode(&hashes); err != nil {
		return broken(fmt.Sprintf("the hashes of the results do not read (%v)", err))
	}
	rest := data[at+int(dec.InputOffset()):]
	before := maps.Clone(hashes)
	for _, name := range names {
		if hashes[name], err = syncAndHash(dir, name); err != nil {
			return err
		}
	}
	if maps.Equal(before, hashes) {
		return nil
	}
	list, err := json.MarshalIndent(hashes, "  ", "  ")
	if err != nil {
		return fmt.Errorf("write run.json: %w", err)
	}
	return exchangeFile(path, bytes.Join([][]byte{data[:at], list, rest}, nil))
}

// exchangeFile puts a file in the place of another when it is whole.
func exchangeFile(path string, data []byte) error {
	f, err := os.CreateTemp(filepath.Dir(path), ".run-*.json")
	if err != nil {
		return err
	}
	defer os.Remove(f.Name()) // it is gone after the renaming
	if _, err = f.Write(data); err == nil {
		err = f.Sync()
	}
	if err == nil {
		err = f.Chmod(0o644)
	}
	if e := f.Close(); err == nil {
		err = e
	}
	if err != nil {
		return fmt.Errorf("write %s: %w", filepath.Base(path), err)
	}
	return os.Rename(f.Name(), path)
}
