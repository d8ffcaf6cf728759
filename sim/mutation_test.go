package sim_test

import (
	"context"
	"encoding/csv"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"path"
	"regexp"
	"runtime/debug"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"yearflow/sim"
	"yearflow/sim/demo"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
	"yearflow/sim/tables"
)

// table is a table of the demo with the lines that its rows stand on; row 0 is the
// header.
type table struct {
	file  string
	lines []string
	rows  [][]string
	at    []int // line of a row, from 1
}

// mutation is one cell of a table with something else in it.
type mutation struct {
	table    *table
	row, col int
	kind     string
	old, new string
}

func (m mutation) column() string { return m.table.rows[0][m.col] }
func (m mutation) line() int      { return m.table.at[m.row] }
func (m mutation) key() string    { return m.table.rows[m.row][0] }
func (m mutation) name() string {
	return strings.TrimSuffix(path.Base(m.table.file), ".csv")
}

func (m mutation) String() string {
	return fmt.Sprintf("%s:%d:%d (%s, row %q): %s, %q became %q", m.table.file, m.line(), m.col+1, m.column(), m.key(), m.kind, m.old, m.new)
}

// over is the study with the mutation laid over it.
func (m mutation) over(base fs.FS) overlay {
	o := laid(base)
	lines := slices.Clone(m.table.lines)
	cells := slices.Clone(m.table.rows[m.row])
	cells[m.col] = m.new
	lines[m.line()-1] = strings.Join(cells, ",")
	o.put(m.table.file, strings.Join(lines, "\n"))
	return o
}

// demoTables reads the tables of the demo's feeder.
func demoTables(t testing.TB, base fs.FS) []*table {
	t.Helper()
	entries, err := fs.ReadDir(base, "feeder")
	if err != nil {
		t.Fatal(err)
	}
	var out []*table
	for _, e := range entries {
		tb := &table{file: "feeder/" + e.Name()}
		tb.lines = strings.Split(content(t, base, tb.file), "\n")
		for i, l := range tb.lines {
			if l == "" || strings.HasPrefix(l, "#") {
				continue
			}
			row, err := csv.NewReader(strings.NewReader(l)).Read()
			if err != nil || strings.Join(row, ",") != l {
				t.Fatalf("%s:%d: the test cannot cut this line: %v", tb.file, i+1, err)
			}
			tb.rows, tb.at = append(tb.rows, row), append(tb.at, i+1)
		}
		out = append(out, tb)
	}
	return out
}

// mutate draws a table, a cell of it and what becomes of it.
func mutate(r *rand.Rand, all []*table) mutation {
	for {
		tb := all[r.IntN(len(all))]
		m := mutation{table: tb, row: 1 + r.IntN(len(tb.rows)-1), col: r.IntN(len(tb.rows[0]))}
		if r.IntN(20) == 0 {
			m.row = 0 // the header
		}
		m.old = tb.rows[m.row][m.col]
		x, err := strconv.ParseFloat(m.old, 64)
		form := func(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }
		kinds := []string{"empty", "another", "text", "NaN", "typo", "zero"}
		if err == nil && m.row > 0 {
			kinds = append(kinds, "another", "×10", "÷10", "negated", "×10", "÷10")
		}
		switch m.kind = kinds[r.IntN(len(kinds))]; m.kind {
		case "another":
			if m.row == 0 {
				m.new = tb.rows[0][r.IntN(len(tb.rows[0]))]
			} else {
				m.new = tb.rows[1+r.IntN(len(tb.rows)-1)][m.col]
			}
		case "text":
			m.new = "quux"
		case "NaN", "zero":
			m.new = map[string]string{"NaN": "NaN", "zero": "0"}[m.kind]
		case "typo":
			m.new = typo(r, m.old)
		case "×10":
			m.new = form(10 * x)
		case "÷10":
			m.new = form(x / 10)
		case "negated":
			m.new = form(-x)
		}
		if m.new != m.old {
			return m
		}
	}
}

// typo drops, doubles, exchanges or strikes a neighbouring key of one letter.
func typo(r *rand.Rand, s string) string {
	if s == "" {
		return "x"
	}
	b := []rune(s)
	i := r.IntN(len(b))
	switch r.IntN(4) {
	case 0:
		return string(b[:i]) + string(b[i+1:])
	case 1:
		return string(b[:i+1]) + string(b[i:])
	case 2:
		if i+1 < len(b) {
			b[i], b[i+1] = b[i+1], b[i]
		}
		return string(b)
	}
	if b[i] < 127 && b[i] >= '0' {
		b[i]++
	}
	return string(b)
}

// mutableDemo is the demo from noon to six of a hot July day, its profiles cut to that
// day, so that a run is short.
func mutableDemo(t testing.TB) overlay {
	t.Helper()
	o := laid(demo.Study())
	toml := content(t, o, "study.toml")
	toml = regexp.MustCompile(`(?m)^start = 2025.*$`).ReplaceAllString(toml, "start = 2025-07-15T12:00:00")
	toml = regexp.MustCompile(`(?m)^end = 2026.*$`).ReplaceAllString(toml, "end = 2025-07-15T18:00:00")
	o.put("study.toml", toml)
	for _, file := range []string{"profiles/loads.csv", "profiles/weather.csv"} {
		var keep []string
		for _, l := range strings.Split(content(t, o, file), "\n") {
			if strings.HasPrefix(l, "#") || strings.HasPrefix(l, "time") || strings.HasPrefix(l, "2025-07-15") {
				keep = append(keep, l)
			}
		}
		if len(keep) < 25 {
			t.Fatalf("%s: only %d lines of the day", file, len(keep))
		}
		o.put(file, strings.Join(keep, "\n")+"\n")
	}
	return o
}

// outcome is what a run came to: every voltage (p.u., by step and node.phase), every
// position and every load, or the faults that kept it from running.
type outcome struct {
	faults tables.Faults
	other  error
	values map[string]complex128
	panics string
}

// collect is a Recorder that keeps the end of every step and holds it to the balance of
// power.
type collect struct {
	e      *sim.Engine
	values map[string]complex128
}

func (c *collect) Interval(*results.Interval) error { return nil }
func (c *collect) Action(*results.Action) error     { return nil }

func (c *collect) Step(s *results.Step) error {
	c.values[fmt.Sprintf("%d status", s.Start)] = complex(float64(s.Status), 0)
	if s.Status == results.Unsolved {
		return nil
	}
	n := c.e.Plan.Network
	for u, v := range s.Last.V {
		if x := n.Unknowns[u]; x.Node >= 0 {
			if cmplx.IsNaN(v) || cmplx.IsInf(v) {
				return fmt.Errorf("a solved step has the voltage %v at %s", v, x.Name)
			}
			c.values[fmt.Sprintf("%d %s", s.Start, x.Name)] = v / complex(x.Nominal, 0)
		}
	}
	for i, tap := range s.Last.Taps {
		c.values[fmt.Sprintf("%d %s", s.Start, c.e.Plan.TapNames[i])] = complex(float64(tap), 0)
	}
	r := read(c.e, &sim.Instant{State: s.Last})
	c.values[fmt.Sprintf("%d losses", s.Start)] = r.Losses / 1e6
	size := cmplx.Abs(r.Source) + cmplx.Abs(r.Load) + cmplx.Abs(r.Generation) + cmplx.Abs(r.Capacitors) + cmplx.Abs(r.Losses)
	if off := cmplx.Abs(r.Source + r.Generation + r.Capacitors - r.Load - r.Losses); !(off <= 1e-6*size) {
		return fmt.Errorf("the powers of a solved step are %g VA out of balance, of %g VA", off, size)
	}
	return nil
}

// attempt reads, prepares and runs a study.
func attempt(ctx context.Context, study fs.FS) (out outcome) {
	defer func() {
		if p := recover(); p != nil {
			out.panics = fmt.Sprintf("%v\n%s", p, debug.Stack())
		}
	}()
	wrong := func(err error) outcome {
		if !errors.As(err, &out.faults) {
			out.other = err
		}
		return out
	}
	st, err := feeder.Open(study, "")
	if err != nil {
		return wrong(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		return wrong(err)
	}
	c := &collect{e, map[string]complex128{}}
	if _, err := e.Run(ctx, c); err != nil {
		return wrong(err)
	}
	out.values = c.values
	return out
}

// differ is the largest difference between two runs, p.u. (a tap counts as one).
func differ(a, b map[string]complex128) float64 {
	worst := 0.0
	if len(a) != len(b) {
		return math.Inf(1)
	}
	for k, v := range a {
		w, ok := b[k]
		if !ok {
			return math.Inf(1)
		}
		worst = math.Max(worst, cmplx.Abs(v-w))
	}
	return worst
}

// idle are columns that act on no voltage, tap or loss: names of rows that nothing else
// names, places on the map, counts and remarks. Where renaming moves the order of
// stamping, the last bits may move.
func idle(m mutation) bool {
	switch m.column() {
	case "note", "x [m]", "y [m]", "area", "customers":
		return true
	case "rating [A]":
		return m.name() == "switches"
	case "kind":
		return m.name() == "generators"
	case "load", "generator", "transformer", "section", "switch":
		return true
	}
	return false
}

// busy are columns in which another number acts on every run of the demo.
func busy(m mutation) bool {
	if _, err := strconv.ParseFloat(m.old, 64); err != nil {
		return false
	}
	switch m.name() + " " + m.column() {
	case "loads real [kW]", "loads power factor", "sections length [m]", "source short circuit 3ph [MVA]",
		"transformers impedance [%]", "transformers load loss [W]", "transformers no-load loss [W]", "transformers exciting current [%]",
		"generators rating [kVA]":
		return true
	}
	return strings.HasPrefix(m.name(), "zip")
}

// mentions tells whether a text names a thing: in quotes or as a word.
func mentions(text, name string) bool {
	if name == "" {
		return false
	}
	if strings.Contains(text, strconv.Quote(name)) {
		return true
	}
	if len(name) < 2 { // only in a list
		return regexp.MustCompile(`(: |, | and )` + regexp.QuoteMeta(name) + `(,|;| and |$)`).MatchString(text)
	}
	return regexp.MustCompile(`(^|[^\w.])` + regexp.QuoteMeta(name) + `($|[^\w])`).MatchString(text)
}

// judge says what is wrong with what a mutation came to, or nothing.
func (m mutation) judge(out outcome, base map[string]complex128) string {
	switch {
	case out.panics != "":
		return "panic: " + out.panics
	case out.other != nil:
		return "an error without a place: " + out.other.Error()
	case out.faults != nil:
		return m.named(out.faults)
	}
	d := differ(out.values, base)
	switch {
	case idle(m) && d > 1e-9:
		return fmt.Sprintf("the cell acts on nothing, and the results moved by %g", d)
	case busy(m) && d == 0:
		return "the cell acts, and the results did not move"
	}
	return ""
}

// named holds an error to naming the cell, or what stood or stands in it or in the key
// of its row.
func (m mutation) named(faults tables.Faults) string {
	_, numeric := strconv.ParseFloat(m.old, 64)
	place := regexp.MustCompile(fmt.Sprintf(`%s:%d\b`, regexp.QuoteMeta(m.table.file), m.line()))
	here, column, related := false, false, false
	for _, f := range faults {
		if f.Pos.File == m.table.file && f.Pos.Line == m.line() {
			here = true
			column = column || f.Pos.Column == m.col+1
		}
		related = related || place.MatchString(f.Text) || mentions(f.Text, m.old) || mentions(f.Text, m.new) || mentions(f.Text, m.key())
	}
	if numeric == nil && m.row > 0 && (m.kind == "text" || m.kind == "NaN") && !column {
		return "a number was replaced by a word, and no fault names the cell:\n" + faults.Error()
	}
	// A header that lost its last cell is told of at the first row that still has it.
	if m.row == 0 && faults[0].Pos.File == m.table.file && mentions(faults[0].Text, "header") {
		related = true
	}
	if !here && !related && !m.follows(faults) {
		return "no fault names the row or what stands in it:\n" + faults.Error()
	}
	return ""
}

// follows tells of consequences that are reported where they are seen and not where they
// come from: what hangs on a misnamed end is cut off from the source (of a long list
// the first names are told), and what hangs on a phase that was taken away lacks it at
// the same node.
func (m mutation) follows(faults tables.Faults) bool {
	for _, f := range faults {
		switch m.name() {
		case "sections", "switches", "transformers", "regulators":
			if strings.HasPrefix(f.Text, "no path leads from a source to: ") && strings.Contains(f.Text, " more") && slices.Contains([]string{"node", "from", "to"}, m.column()) {
				return true
			}
			ends := m.table.rows[m.row][1:3]
			if m.column() == "phases" && strings.Contains(f.Text, "but no path leads from there to phase") && (mentions(f.Text, ends[0]) || mentions(f.Text, ends[1])) {
				return true
			}
		}
	}
	return false
}

// A thousand single cells of the demo's tables, each replaced by something else: an
// error that names the cell or what follows of it, or a run whose results move only
// where the cell acts. None panics, none hangs.
func TestMutations(t *testing.T) {
	const shards = 10
	each := 100
	if testing.Short() {
		each = 10
	}
	base := mutableDemo(t)
	all := demoTables(t, base)
	start := attempt(context.Background(), base)
	if start.values == nil {
		t.Fatal(start)
	}
	counts := make([]map[string]int, shards)
	t.Run("shards", func(t *testing.T) {
		for shard := range shards {
			counts[shard] = map[string]int{}
			t.Run(strconv.Itoa(shard), func(t *testing.T) {
				t.Parallel()
				r := rand.New(rand.NewPCG(2025, uint64(shard)))
				for range each {
					m := mutate(r, all)
					ctx, stop := context.WithTimeout(context.Background(), 20*time.Second)
					done := make(chan outcome, 1)
					go func() { done <- attempt(ctx, m.over(base)) }()
					select {
					case out := <-done:
						if wrong := m.judge(out, start.values); wrong != "" {
							t.Errorf("%v\n\t%s", m, strings.ReplaceAll(wrong, "\n", "\n\t"))
						}
						switch {
						case out.values == nil:
							counts[shard]["refused"]++
						case differ(out.values, start.values) == 0:
							counts[shard]["without effect"]++
						default:
							counts[shard]["with effect"]++
						}
					case <-time.After(25 * time.Second):
						t.Errorf("%v\n\thangs", m)
					}
					stop()
				}
			})
		}
	})
	total := map[string]int{}
	for _, c := range counts {
		for k, n := range c {
			total[k] += n
		}
	}
	t.Logf("%v", total)
	for _, k := range []string{"refused", "without effect", "with effect"} {
		if total[k] < each/2 {
			t.Errorf("only %d mutations %s: the test has lost its grip", total[k], k)
		}
	}
}

// The values and keys of study.toml, one at a time: each gives an error with a line of
// the file, or a run.
func TestSettingsMutations(t *testing.T) {
	base := mutableDemo(t)
	lines := strings.Split(content(t, base, "study.toml"), "\n")
	entry := regexp.MustCompile(`^(\w+)( = )([^#]*?)(\s*#.*)?$`)
	r := rand.New(rand.NewPCG(2025, 77))
	refused, ran := 0, 0
	for i, l := range lines {
		parts := entry.FindStringSubmatch(l)
		if parts == nil {
			continue
		}
		key, value := parts[1], parts[3]
		for _, next := range []string{key + " = ", key + ` = ""`, key + ` = "quux"`, key + " = nan", key + " = 0", key + " = -" + value, key + " = 1e300", key + " = 10" + value,
			key + " = [" + value + "]", key + " = " + typo(r, value), typo(r, key) + " = " + value, typo(r, l), l + "\n" + l, key + " = true", key + " = 1979-05-27", "", "[" + key + "]"} {
			o := laid(base)
			changed := slices.Clone(lines)
			changed[i] = next
			o.put("study.toml", strings.Join(changed, "\n"))
			ctx, stop := context.WithTimeout(context.Background(), 20*time.Second)
			out := attempt(ctx, o)
			stop()
			switch {
			case out.panics != "" || out.other != nil:
				t.Errorf("study.toml:%d: %q: %v%s", i+1, next, out.other, out.panics)
			case out.faults == nil:
				ran++
			default:
				refused++
				named := false
				for _, f := range out.faults {
					// A doubled line is told of at its second, a missing one at its table.
					named = named || f.Pos.File == "study.toml" && (f.Pos.Line == i+1 || f.Pos.Line == i+2) || strings.Contains(f.Text, key) || mentions(f.Text, strings.Trim(value, `"`)) ||
						strings.HasSuffix(next, "1979-05-27") && strings.Contains(f.Text, "1979-05-27")
				}
				if !named {
					t.Errorf("study.toml:%d: %q: no fault names the line or the key:\n\t%v", i+1, next, strings.ReplaceAll(out.faults.Error(), "\n", "\n\t"))
				}
			}
		}
	}
	t.Logf("%d refused, %d ran", refused, ran)
	if refused < 50 || ran < 20 {
		t.Error("the test has lost its grip")
	}
}
