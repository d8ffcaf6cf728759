package study

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"reflect"
	"slices"
	"strconv"
	"strings"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// CaseFile is a file of a case's folder.
type CaseFile struct {
	Name string
	Data []byte
}

// makeCase writes the best as a case, names it, and reads it back: its year must be the
// one that the search found.
func (t *Tuning) makeCase(ctx context.Context, p Place, s *search) error {
	if !t.Improves() {
		return nil
	}
	t.CaseFiles = t.caseFiles()
	t.CaseName = freeName(p.FS, t.study.Cases, t.CaseFiles)
	dir, err := os.MkdirTemp("", "yearflow-case-*")
	if err != nil {
		return err
	}
	defer os.RemoveAll(dir)
	if err := writeCase(dir, t.CaseFiles); err != nil {
		return err
	}
	st, err := feeder.Open(withCase{p.FS, t.CaseName, os.DirFS(dir)}, t.CaseName)
	if err != nil {
		return fmt.Errorf("the best does not read back as a case: %w", err)
	}
	base, err := feeder.Open(p.FS, feeder.Base)
	if err != nil {
		return err
	}
	t.Sheet = &Sheet{Case: t.CaseName, Recommended: true, Rows: sheetRows(base.Model, st.Model)}
	e, err := sim.Prepare(st, sim.Options{Demo: p.Demo})
	if err != nil {
		return fmt.Errorf("the best does not read back as a case: %w", err)
	}
	totals := results.NewTotals(e.Plan)
	if _, err := e.Run(ctx, totals); err != nil {
		return err
	}
	if got := totals.Sums(); !reflect.DeepEqual(got, t.Best.Sums) {
		return fmt.Errorf("the case of the best does not give what the search found: remove the log and search again (--again); if it stays so, this is an error of the program (found %+v, read back %+v)", t.Best.Sums, got)
	}
	return nil
}

// freeName is tuned, or tuned-2, … where that is taken by another case.
func freeName(fsys fs.FS, taken []string, files []CaseFile) string {
	for n := 1; ; n++ {
		name := "tuned"
		if n > 1 {
			name += "-" + strconv.Itoa(n)
		}
		if !slices.ContainsFunc(taken, func(c string) bool { return strings.EqualFold(c, name) }) || holds(fsys, name, files) {
			return name
		}
	}
}

// holds tells whether a case has these files and no others.
func holds(fsys fs.FS, name string, files []CaseFile) bool {
	entries, err := fs.ReadDir(fsys, path.Join("cases", name))
	if err != nil || len(entries) != len(files) {
		return false
	}
	for _, f := range files {
		data, err := fs.ReadFile(fsys, path.Join("cases", name, f.Name))
		if err != nil || string(data) != string(f.Data) {
			return false
		}
	}
	return true
}

// WriteCase writes the case of the best into the study's folder, where it is not there
// yet. It never writes into a folder that is there.
func (t *Tuning) WriteCase(studyDir string) error {
	if t.CaseName == "" || holds(os.DirFS(studyDir), t.CaseName, t.CaseFiles) {
		return nil
	}
	cases := filepath.Join(studyDir, "cases")
	if err := os.MkdirAll(cases, 0o755); err != nil {
		return err
	}
	temp, err := os.MkdirTemp(cases, ".tuned-*")
	if err != nil {
		return err
	}
	defer os.RemoveAll(temp)
	whole := filepath.Join(temp, "case")
	if err := writeCase(whole, t.CaseFiles); err != nil {
		return err
	}
	return os.Rename(whole, filepath.Join(cases, t.CaseName)) // fails where a folder with files is there
}

func writeCase(dir string, files []CaseFile) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	for _, f := range files {
		if err := os.WriteFile(filepath.Join(dir, f.Name), f.Data, 0o644); err != nil {
			return err
		}
	}
	return nil
}

// caseFiles are the tables that make the best of the base, with case.toml.
func (t *Tuning) caseFiles() []CaseFile {
	var note strings.Builder
	fmt.Fprintf(&note, "# Written by yearflow tune: the best of %d candidate-years (seed %d).\n", t.Evaluated, t.Spec.Seed)
	fmt.Fprintf(&note, "# Score %s, of the base %s; less is better:", results.FigureText(t.Best.Score), results.FigureText(t.Base.Score))
	for i, w := range t.Spec.Aims {
		if i > 0 {
			note.WriteString(" +")
		}
		fmt.Fprintf(&note, " %s x %s", trimmed(w.Weight), w.Quantity)
	}
	note.WriteString("\n")
	if t.Best.Violation > 0 {
		fmt.Fprintf(&note, "# It does not keep all limits: %s.\n", strings.Join(t.Best.Broken, ", "))
	}
	fmt.Fprintf(&note, "title = %s\n", strconv.Quote(t.Title+": tuned settings"))
	out := []CaseFile{{"case.toml", []byte(note.String())}}
	if rows := t.caseRows(false); rows != nil {
		out = append(out, CaseFile{"regulator-settings.csv", csvOf(rows)})
	}
	if rows := t.caseRows(true); rows != nil {
		out = append(out, CaseFile{"capacitor-settings.csv", csvOf(rows)})
	}
	return out
}

// caseRows are the rows of a settings table: a row a device, a column a setting, only
// the cells that were searched. Blank reverse settings follow the forward ones, so
// where a mode has a use for them they are written as they stand.
func (t *Tuning) caseRows(capacitors bool) [][]string {
	header := []string{"regulator", "phase"}
	if capacitors {
		header = []string{"capacitor"}
	}
	keys := len(header)
	var rows [][]string
	put := func(x *target, column, cell string) {
		key := []string{x.device, x.phase}[:keys]
		c := slices.Index(header, column)
		if c < 0 {
			c = len(header)
			header = append(header, column)
		}
		r := slices.IndexFunc(rows, func(row []string) bool { return slices.Equal(row[:keys], key) })
		if r < 0 {
			r = len(rows)
			rows = append(rows, slices.Clone(key))
		}
		for len(rows[r]) <= c {
			rows[r] = append(rows[r], "")
		}
		rows[r][c] = cell
	}
	for i := range t.Spec.Knobs {
		k := &t.Spec.Knobs[i]
		for n := range k.targets {
			x := &k.targets[n]
			if x.capacitor != capacitors {
				continue
			}
			column := k.Setting
			if k.Unit != "" && k.Unit != "h" {
				column += " [" + k.Unit + "]"
			}
			put(x, column, k.cellOf(t.Best.Values[i]))
			if !capacitors {
				t.reverseCells(k, x, put)
			}
		}
	}
	if rows == nil {
		return nil
	}
	for i := range rows {
		for len(rows[i]) < len(header) {
			rows[i] = append(rows[i], "")
		}
	}
	return append([][]string{header}, rows...)
}

func (t *Tuning) reverseCells(k *Knob, x *target, put func(*target, string, string)) {
	s := t.study.Model.Regulators[x.bank].Units[x.unit].Settings
	switch s.Reverse {
	case feeder.ReverseOnly, feeder.ReverseFollow, feeder.ReverseStay:
	default:
		return
	}
	back := map[string]float64{"set": s.ReverseSet, "bandwidth": s.ReverseBandwidth, "delay": s.ReverseDelay, "ldc r": s.ReverseR, "ldc x": s.ReverseX}
	if v, ok := back[k.Setting]; ok {
		put(x, "reverse "+k.Setting+" ["+k.Unit+"]", cell(v))
	}
}

// csvOf writes rows whose cells are names and numbers.
func csvOf(rows [][]string) []byte {
	var out strings.Builder
	for _, row := range rows {
		for i, c := range row {
			if i > 0 {
				out.WriteByte(',')
			}
			if strings.ContainsAny(c, ",\"\n#") {
				c = `"` + strings.ReplaceAll(c, `"`, `""`) + `"`
			}
			out.WriteString(c)
		}
		out.WriteByte('\n')
	}
	return []byte(out.String())
}

// withCase is a study's folder with one more case.
type withCase struct {
	fs.FS
	name string
	dir  fs.FS
}

var _ fs.ReadDirFS = withCase{}

// Open opens a file of the study or of the case.
func (w withCase) Open(name string) (fs.File, error) {
	root := path.Join("cases", w.name)
	if name == root {
		return w.dir.Open(".")
	}
	if rest, ok := strings.CutPrefix(name, root+"/"); ok {
		return w.dir.Open(rest)
	}
	return w.FS.Open(name)
}

// ReadDir lists a folder.
func (w withCase) ReadDir(name string) ([]fs.DirEntry, error) {
	root := path.Join("cases", w.name)
	if name == root {
		return fs.ReadDir(w.dir, ".")
	}
	entries, err := fs.ReadDir(w.FS, name)
	if name != "cases" || err != nil && !errors.Is(err, fs.ErrNotExist) {
		return entries, err
	}
	if slices.ContainsFunc(entries, func(e fs.DirEntry) bool { return e.Name() == w.name }) {
		return entries, nil
	}
	info, err := fs.Stat(w.dir, ".")
	if err != nil {
		return nil, err
	}
	return append(entries, renamed{info, w.name}), nil
}

// renamed is a folder under another name.
type renamed struct {
	fs.FileInfo
	name string
}

func (n renamed) Name() string               { return n.name }
func (n renamed) Type() fs.FileMode          { return n.Mode().Type() }
func (n renamed) Info() (fs.FileInfo, error) { return n, nil }
