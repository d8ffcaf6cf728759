package study

import (
	"bufio"
	"bytes"
	"crypto/sha256"
	"encoding/csv"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"

	"yearflow/sim/results"
)

// tuneLog keeps what has been evaluated, so that a search that was stopped goes on and
// one with other aims or limits need not begin anew. A row is a candidate-year: the hash
// of the inputs it was run with, its settings, and all that was counted, to the bit.
// Rows of other inputs stay where they are and are not used. A row that was cut off is
// left out.
type tuneLog struct {
	mu     sync.Mutex
	file   *os.File
	inputs string
	known  map[string]*results.Sums
}

// sumFields are the columns of a log row in order.
func sumFields(s *results.Sums) (names []string, fields []any) {
	for _, f := range []struct {
		name  string
		field any
	}{
		{"customer-hours below A", &s.CustomersBelowA}, {"customer-hours above A", &s.CustomersAboveA},
		{"customer-hours below B", &s.CustomersBelowB}, {"customer-hours above B", &s.CustomersAboveB},
		{"source energy [kWh]", &s.SourceKWh}, {"load energy [kWh]", &s.LoadKWh}, {"generation energy [kWh]", &s.GenerationKWh},
		{"losses energy [kWh]", &s.LossesKWh}, {"peak demand [kW]", &s.PeakKW}, {"sum of monthly peaks [kW]", &s.MonthlyPeaksKW},
		{"lowest judged voltage [pu]", &s.LowestPU}, {"highest judged voltage [pu]", &s.HighestPU},
		{"tap operations", &s.TapOperations}, {"capacitor operations", &s.CapacitorOperations},
		{"device-hours at a stop [h]", &s.StopHours}, {"device-hours hunting [h]", &s.HuntingHours}, {"settling share [%]", &s.SettlingShare},
		{"steps", &s.Steps}, {"low steps", &s.Low}, {"unsolved steps", &s.Unsolved}, {"operations by device", &s.Operations}, {"steps that are ok", &s.Pattern},
	} {
		names, fields = append(names, f.name), append(fields, f.field)
	}
	return names, fields
}

func sumCells(s *results.Sums) (out []string) {
	_, fields := sumFields(s)
	for _, f := range fields {
		switch x := f.(type) {
		case *float64:
			out = append(out, strconv.FormatFloat(*x, 'g', -1, 64))
		case *int:
			out = append(out, strconv.Itoa(*x))
		case *uint64:
			out = append(out, strconv.FormatUint(*x, 16))
		case *[]int:
			parts := make([]string, len(*x))
			for i, n := range *x {
				parts[i] = strconv.Itoa(n)
			}
			out = append(out, strings.Join(parts, " "))
		}
	}
	return out
}

// parseSums reads what sumCells wrote; false where it cannot be that.
func parseSums(cells []string, devices int) (*results.Sums, bool) {
	s := &results.Sums{}
	_, fields := sumFields(s)
	if len(cells) != len(fields) {
		return nil, false
	}
	for i, f := range fields {
		var err error
		switch x := f.(type) {
		case *float64:
			*x, err = strconv.ParseFloat(cells[i], 64)
		case *int:
			*x, err = strconv.Atoi(cells[i])
		case *uint64:
			*x, err = strconv.ParseUint(cells[i], 16, 64)
		case *[]int:
			for _, part := range strings.Fields(cells[i]) {
				n, bad := strconv.Atoi(part)
				*x, err = append(*x, n), errors.Join(err, bad)
			}
			if len(*x) != devices {
				return nil, false
			}
		}
		if err != nil {
			return nil, false
		}
	}
	return s, true
}

// openLog reads the log of a search and opens it for more rows; with again it begins
// anew. What stands in it is written anew without rows that were cut off.
func openLog(path, inputs string, devices int, again bool) (*tuneLog, error) {
	l := &tuneLog{inputs: inputs, known: map[string]*results.Sums{}}
	names, _ := sumFields(&results.Sums{})
	header := append([]string{"inputs", "settings"}, names...)
	rows := [][]string{header}
	data, err := os.ReadFile(path)
	switch {
	case errors.Is(err, fs.ErrNotExist) || again:
	case err != nil:
		return nil, err
	default:
		old, ok := readLog(data, header)
		if !ok {
			return nil, fmt.Errorf("%s is no log of a search of this version, and the search would write it anew: move it away or search with --again", path)
		}
		rows = append(rows, old...)
	}
	for _, r := range rows[1:] {
		if s, ok := parseSums(r[2:], devices); ok && r[0] == inputs {
			l.known[r[1]] = s
		}
	}
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return nil, err
	}
	var out bytes.Buffer
	w := csv.NewWriter(&out)
	if err := w.WriteAll(rows); err != nil {
		return nil, err
	}
	if err := os.WriteFile(path+".new", out.Bytes(), 0o644); err != nil {
		return nil, err
	}
	if err := os.Rename(path+".new", path); err != nil {
		return nil, err
	}
	l.file, err = os.OpenFile(path, os.O_APPEND|os.O_WRONLY, 0o644)
	return l, err
}

// readLog returns the whole rows; false where the file is something else.
func readLog(data []byte, header []string) (rows [][]string, ok bool) {
	in := bufio.NewReader(bytes.NewReader(data))
	for n := 0; ; n++ {
		line, err := in.ReadString('\n')
		if err != nil {
			return rows, n > 0 || line == ""
		}
		cells, err := csv.NewReader(strings.NewReader(line)).Read()
		switch {
		case n == 0 && !slices.Equal(cells, header):
			return nil, false
		case n > 0 && err == nil && len(cells) == len(header):
			rows = append(rows, cells)
		}
	}
}

// take looks a candidate up.
func (l *tuneLog) take(key string) (*results.Sums, bool) {
	l.mu.Lock()
	defer l.mu.Unlock()
	s, ok := l.known[key]
	return s, ok
}

// put adds a candidate and hands it to the system at once.
func (l *tuneLog) put(key string, s *results.Sums) error {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.known[key] = s
	var out bytes.Buffer
	w := csv.NewWriter(&out)
	if err := w.Write(append([]string{l.inputs, key}, sumCells(s)...)); err != nil {
		return err
	}
	w.Flush()
	_, err := l.file.Write(out.Bytes())
	return err
}

func (l *tuneLog) close() error { return l.file.Close() }

// inputsHash is one hash of all inputs and the program's version. [tune] of study.toml
// is left out: what is searched and why does not change what a candidate gives.
func inputsHash(fsys fs.FS, inputs map[string]string, version string) (string, error) {
	sum := sha256.New()
	fmt.Fprintf(sum, "yearflow %s\n", version)
	names := make([]string, 0, len(inputs))
	for n := range inputs {
		names = append(names, n)
	}
	slices.Sort(names)
	for _, n := range names {
		hash := inputs[n]
		if n == "study.toml" {
			data, err := fs.ReadFile(fsys, n)
			if err != nil {
				return "", err
			}
			h := sha256.Sum256(withoutTune(data))
			hash = hex.EncodeToString(h[:])
		}
		fmt.Fprintf(sum, "%s %s\n", hash, n)
	}
	return hex.EncodeToString(sum.Sum(nil))[:16], nil
}

// withoutTune cuts [tune] and [[tune.…]] out of a settings file. A line within them that
// begins with another bracket ends the cut: more is hashed then, never less.
func withoutTune(data []byte) []byte {
	var out []byte
	inside := false
	for line := range bytes.Lines(data) {
		if t := bytes.TrimSpace(line); bytes.HasPrefix(t, []byte("[")) {
			name := bytes.TrimLeft(t, "[ ")
			inside = bytes.HasPrefix(name, []byte("tune]")) || bytes.HasPrefix(name, []byte("tune."))
		}
		if !inside {
			out = append(out, line...)
		}
	}
	return out
}
