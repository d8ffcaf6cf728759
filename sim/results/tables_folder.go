package results

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"sort"
)

// tablesFormat is the version of the layout of a TablesFolder.
const tablesFormat = 1

// TablesFolder is the folder of a document made of several runs (compare, losses)
// while it is written: tables as CSV, figures, an HTML file, and last of all
// <kind>.json, which names what it was made from. Like a results folder it is written
// beside the old one and exchanged for it at the end, so it is whole or absent.
type TablesFolder struct {
	folder *folder
	kind   string
	files  []string
	closed bool
}

// TablesRecord is what <kind>.json says.
type TablesRecord struct {
	Format  int            `json:"format"`
	Kind    string         `json:"kind"`
	Version string         `json:"version"` // of the program
	Title   string         `json:"title"`
	Demo    bool           `json:"demo"`
	Zone    string         `json:"zone"`
	Period  string         `json:"period"`
	Start   string         `json:"start"`
	End     string         `json:"end"`
	Step    float64        `json:"step_seconds"`
	Cases   []TablesCase   `json:"cases"`
	Said    map[string]any `json:"said"` // what the document needs besides its tables
	// Files are the SHA-256 of the others, by name.
	Files map[string]string `json:"files_sha256"`
}

// TablesCase names a run that the tables were made from.
type TablesCase struct {
	Case   string            `json:"case"`
	Folder string            `json:"folder"` // name of its results folder
	Run    string            `json:"run_sha256"`
	Inputs map[string]string `json:"inputs_sha256"`
}

// CreateTables begins the folder dir of a kind of document. It refuses to take the
// place of anything but an older folder of the same kind.
func CreateTables(dir, kind string) (*TablesFolder, error) {
	entries, err := os.ReadDir(dir)
	if err == nil && len(entries) > 0 {
		if _, err := os.Stat(filepath.Join(dir, kind+".json")); err != nil {
			return nil, &Occupied{Dir: dir, Kind: kind}
		}
	}
	f, err := createFolder(dir)
	if err != nil {
		return nil, err
	}
	return &TablesFolder{folder: f, kind: kind}, nil
}

// Occupied is the error of a folder that holds something else.
type Occupied struct{ Dir, Kind string }

// Error says what would do instead.
func (o *Occupied) Error() string {
	return fmt.Sprintf("%s is not empty and holds no %s.json, and the new folder would replace it: name another with --out, such as %s", o.Dir, o.Kind, filepath.Join(o.Dir, o.Kind))
}

// Path is where the files are written until Finish.
func (t *TablesFolder) Path() string { return t.folder.temp }

// Table writes rows, the first of them the header, as a CSV file.
func (t *TablesFolder) Table(name string, rows [][]string) error {
	f, err := createFile(t.folder.temp, name)
	if err != nil {
		return err
	}
	if err := f.rows(rows); err != nil {
		return errors.Join(err, f.out.Close())
	}
	return f.finish()
}

// Abort removes what has been written; an older folder stays.
func (t *TablesFolder) Abort() error {
	if t.closed {
		return nil
	}
	t.closed = true
	return t.folder.abort()
}

// Record writes <kind>.json with the hashes of the files that are there by then; it may
// be called again after more have been added.
func (t *TablesFolder) Record(r TablesRecord) error {
	r.Format, r.Kind, r.Files = tablesFormat, t.kind, map[string]string{}
	root := t.folder.temp
	err := filepath.WalkDir(root, func(path string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		name, err := filepath.Rel(root, path)
		if err != nil {
			return err
		}
		if name = filepath.ToSlash(name); name == t.kind+".json" {
			return nil
		}
		r.Files[name], err = syncAndHash(root, name)
		return err
	})
	if err != nil {
		return fmt.Errorf("write %s: %w", t.kind, err)
	}
	data, err := json.MarshalIndent(r, "", "  ")
	if err != nil {
		return fmt.Errorf("write %s.json: %w", t.kind, err)
	}
	f, err := createFile(root, t.kind+".json")
	if err != nil {
		return err
	}
	f.row = append(append(f.row, data...), '\n')
	return f.finish()
}

// Finish puts the folder in its place. On an error the old one stays.
func (t *TablesFolder) Finish() error {
	if t.closed {
		return errClosed
	}
	t.closed = true
	if err := t.folder.exchange(); err != nil {
		return errors.Join(err, t.folder.abort())
	}
	return nil
}

// ReadTables reads the record of such a folder and checks that its files are those
// that were written. The error says what is missing or of another version.
func ReadTables(fsys fs.FS, kind string) (*TablesRecord, error) {
	name := kind + ".json"
	data, err := fs.ReadFile(fsys, name)
	if err != nil {
		return nil, fmt.Errorf("%s: %w: this is no folder of %s, or half of one; run %s again", name, err, kind, kind)
	}
	var r TablesRecord
	if err := json.Unmarshal(data, &r); err != nil {
		return nil, fmt.Errorf("%s cannot be read (%w): run %s again", name, err, kind)
	}
	if r.Format != tablesFormat || r.Kind != kind {
		return nil, fmt.Errorf("%s: format is %d of %q, this program reads %d of %q (the folder was written by version %q): run %s again", name, r.Format, r.Kind, tablesFormat, kind, r.Version, kind)
	}
	names := make([]string, 0, len(r.Files))
	for f := range r.Files {
		names = append(names, f)
	}
	sort.Strings(names)
	for _, f := range names {
		sum, err := hashFile(fsys, f)
		if err != nil {
			return nil, fmt.Errorf("%s: %w: half of a folder; run %s again", f, err, kind)
		}
		if sum != r.Files[f] {
			return nil, fmt.Errorf("%s has changed since it was written: run %s again", f, kind)
		}
	}
	return &r, nil
}

func hashFile(fsys fs.FS, name string) (string, error) {
	f, err := fsys.Open(name)
	if err != nil {
		return "", err
	}
	defer f.Close()
	sum := sha256.New()
	if _, err := io.Copy(sum, f); err != nil {
		return "", err
	}
	return hex.EncodeToString(sum.Sum(nil)), nil
}

// Origin is what run.json says of where a results folder comes from.
type Origin struct {
	Version string
	Case    string
	Inputs  map[string]string // SHA-256 of every input file
	Results map[string]string // and of every result file
	Run     string            // of run.json itself
}

// ReadOrigin reads it; a folder of another format is an error.
func ReadOrigin(fsys fs.FS) (*Origin, error) {
	data, err := fs.ReadFile(fsys, "run.json")
	if err != nil {
		return nil, err
	}
	var j struct {
		Format  int               `json:"format"`
		Version string            `json:"version"`
		Case    string            `json:"case"`
		Inputs  map[string]string `json:"inputs_sha256"`
		Results map[string]string `json:"results_sha256"`
	}
	if err := json.Unmarshal(data, &j); err != nil {
		return nil, fmt.Errorf("run.json: %w", err)
	}
	if j.Format != runFormat {
		return nil, fmt.Errorf("run.json: format is %d, this program reads %d (written by version %q)", j.Format, runFormat, j.Version)
	}
	sum := sha256.Sum256(data)
	return &Origin{Version: j.Version, Case: j.Case, Inputs: j.Inputs, Results: j.Results, Run: hex.EncodeToString(sum[:])}, nil
}

// Intact checks that the named result files are those that the run wrote.
func (o *Origin) Intact(fsys fs.FS, names ...string) error {
	for _, n := range names {
		sum, err := hashFile(fsys, n)
		if err != nil {
			return err
		}
		if sum != o.Results[n] {
			return fmt.Errorf("%s has changed since the run wrote it", n)
		}
	}
	return nil
}

// FigureText writes a power, a current, an energy or a share as the result files have
// it: four decimals, and as many more as six significant digits take; nothing for NaN.
func FigureText(x float64) string { return string(appendFigure(nil, x)) }

// PUText writes a voltage in p.u. as the result files have it.
func PUText(x float64) string { return string(appendPU(nil, x)) }

// ElementLoss is what one element loses, by name and kind in the words of losses.csv.
type ElementLoss struct {
	Element string
	Kind    LossKind
}

// ElementLosses lists the rows of losses.csv, in their order.
func (m *Meter) ElementLosses() []ElementLoss {
	out := make([]ElementLoss, len(m.losses))
	for i, r := range m.losses {
		out[i] = ElementLoss{r.element, r.kind}
	}
	return out
}

// ElementPower returns what every element lost at the instant that was read, W, in
// the order of Meter.ElementLosses. It must not be changed.
func (r *Reading) ElementPower() []float64 { return r.loss }
