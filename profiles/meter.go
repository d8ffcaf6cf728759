package profiles

import (
	"io/fs"
	"runtime"
	"sort"
	"strings"
	"sync"
	"time"

	"yearflow/sim/tables"
)

// MeterBlock is one [[meters]] entry: files of interval data that are read alike.
//
// A long file has the columns `time`, `meter` and a value with its unit, [kWh] or
// [kW], and if wanted a reactive companion in [kvarh] or [kvar]; a wide file has
// `time` and a column `name [kWh]` for each meter. A name that ends in .gz, or a file
// that begins as one, is unpacked while it is read. A blank cell, or one that says NA,
// n/a, NaN or null, is a missing value.
type MeterBlock struct {
	Pos     tables.Pos     // of the entry, for faults
	Files   []string       // glob patterns below the study's folder
	Layout  string         // long (or blank) or wide
	Values  string         // interval (or blank) or register: a counter that is read at its stamp
	Stamped string         // start (or blank) or end of a value's interval; of no effect on registers
	Zone    *time.Location // of stamps without an offset; nil: UTC
	Unit    string         // of value columns whose header has none, such as "kWh"; blank: a unit is needed
	Net     bool           // the meters count what flows back as negative
}

// MeterRules are the numbers of validation, estimation and editing (VEE); the zero value
// works. The rules are those of the trade, after the Uniform Business Practices for
// metering of the Edison Electric Institute (2000; recalled from memory) and common
// practice; in this order:
//
//   - Rows are put in order. A repeated row is dropped; of two values for one time the
//     later row is kept, and told. Each meter has one step; a missing row or a blank
//     cell between its first and its last value is a gap.
//   - A register that falls has gone over its highest number, the next power of ten, if
//     that makes a rise of at most twice the largest other one; else it was set back, and
//     that interval is not known.
//   - A negative value is a fault of reading where the meter does not count what flows
//     back. More than one in a hundred is a fault of the file.
//   - Zeros for an hour (and two values) to seven days are a fault of the meter where
//     fewer than one in twenty of the like days has zero at those times, and zero is
//     less than a fifth of the meter's values; longer ones are listed and stay.
//   - One other value for six hours (and six values) is stuck where it lasts more than
//     four times the meter's usual longest run of a day.
//   - A spike is one of a day's two highest values, above 1.8 times the third, above
//     the like days by SpikeFactor times their range (tenth to ninetieth percentile, an
//     interval either side), and above the size of the service; where that is not known,
//     above five times what the meter exceeds in one of two hundred intervals.
//   - What is missing or found wrong is estimated: up to two hours by a straight line of
//     power between its neighbours; longer by the mean of like days (working days,
//     Saturdays, Sundays) at that time of day within four weeks; where there are none, by
//     the meter's mean for that kind of day and time, which MeterSet.Shape can replace by
//     a class's shape. Where a register knows a gap's energy the estimate is scaled to it.
//   - Reactive power has its gaps closed in the same way and is not judged.
//
// Days are those of the customers' clock, so that the days of 23 and 25 hours are whole.
// Holidays are not known: they count as the weekday that they are.
type MeterRules struct {
	// Zone is the customers' clock, by which days and weekdays are told. nil: the
	// zone of the meter's block.
	Zone *time.Location
	// Net names meters that count what flows back as negative, beside those of blocks
	// that say so.
	Net map[string]bool
	// ServiceKW is the size of a meter's service, in kW, where it is known: a spike
	// must exceed it.
	ServiceKW map[string]float64
	// KeepZeros leaves runs of zeros as they are, for a study of outages.
	KeepZeros bool
	// SpikeFactor is how many like-day ranges above the like-day values a spike
	// begins. Zero means 5; it must not be negative.
	SpikeFactor float64
}

const (
	longestLine  = 2 * hour // a gap up to this is closed by a straight line
	likeDays     = 28       // like days are looked for this many days either side
	spikeOfDay   = 1.8      // a spike is above this times the third-highest value of its day
	negativeMost = 0.01     // share of negative values above which they are no reading errors
	maxWarnings  = 200      // warnings that are told; the rest are counted
)

// Mended is a stretch of a meter that was edited, or found odd and left.
type Mended struct {
	Meter    string
	Rule     string // what was found and how it was mended: "gap, straight line"
	From, To int64
	Count    int     // of values, or rows
	Energy   float64 // kWh (kvarh of rules that begin with "kvar") that the edit added; 0 where nothing changed
}

// Meter is one meter's checked and mended data: mean power over regular intervals.
// Values are kept as float32, 24 bits: closer (6e-8) than any meter measures.
type Meter struct {
	Name string
	Pos  tables.Pos // of its first row or column header
	// Read counts the values that were read, without blanks and repeated rows; the
	// series has Len values.
	Read int
	// Edited counts the values of real power that do not stand as they were read.
	Edited int
	// Before and After are the energies, kWh, of what was read and of the series.
	Before, After float64

	start, step int64
	values      []float32
	kvar        []float32 // nil: no companion
	zone        *time.Location
}

// Len returns the number of values.
func (m *Meter) Len() int { return len(m.values) }

// Value returns the mean of interval k, in kW.
func (m *Meter) Value(k int) float64 { return float64(m.values[k]) }

// Span returns the time that the meter covers, [start, end).
func (m *Meter) Span() (start, end int64) {
	return m.start, m.start + int64(len(m.values))*m.step
}

// StepLength returns the meter's step in nanoseconds.
func (m *Meter) StepLength() int64 { return m.step }

// Series returns the meter as a series in kW, with its companion in kvar where it has
// one. It makes new values of 8 bytes each.
func (m *Meter) Series() *Series {
	g := grid{start: m.start, stamp: m.start, step: m.step, n: len(m.values), zone: m.zone}
	s := newSeries(m.Name, unit{"kW", 0, 1, 1}, m.Pos, g, widened(m.values))
	if m.kvar != nil {
		s.Kvar = newSeries(m.Name, unit{"kvar", 0, 1, 1}, m.Pos, g, widened(m.kvar))
	}
	return s
}

func widened(values []float32) []float64 {
	out := make([]float64, len(values))
	for k, v := range values {
		out[k] = float64(v)
	}
	return out
}

// MeterSet is every meter of a study.
type MeterSet struct {
	// Mended lists every edited stretch, by meter, rule and time.
	Mended []Mended
	// Warnings tell what is odd and was not, or could not be, mended by a rule.
	Warnings tables.Faults
	// Cached tells that the set was read from the cache.
	Cached bool

	meters []*Meter
	index  map[string]int
	files  []string
}

// Meters returns all meters, sorted by name.
func (s *MeterSet) Meters() []*Meter { return s.meters }

// Lookup returns the meter of that name.
func (s *MeterSet) Lookup(name string) (*Meter, bool) {
	i, ok := s.index[name]
	if !ok {
		return nil, false
	}
	return s.meters[i], true
}

// Files returns the names of all files that were read, sorted.
func (s *MeterSet) Files() []string { return append([]string(nil), s.files...) }

func (s *MeterSet) sortFiles() { sort.Strings(s.files) }

// Totals returns Mended summed by meter and rule: From and To are the first and the
// last time.
func (s *MeterSet) Totals() []Mended {
	var out []Mended
	for _, m := range s.Mended {
		if n := len(out); n > 0 && out[n-1].Meter == m.Meter && out[n-1].Rule == m.Rule {
			last := &out[n-1]
			last.From, last.To = min(last.From, m.From), max(last.To, m.To)
			last.Count += m.Count
			last.Energy += m.Energy
			continue
		}
		out = append(out, m)
	}
	return out
}

// OpenMeters reads, checks and mends all meters of all blocks. Everything wrong that
// no rule mends comes back together as tables.Faults. cacheDir is a folder of the
// machine for a copy of the result, made where it is not there; blank: none. It may be
// deleted at any time, and a copy that is damaged, or of files that have changed since,
// is passed over and written anew.
//
// Reading takes 12 bytes of memory a value (registers 16), the result 4.
func OpenMeters(fsys fs.FS, blocks []MeterBlock, cacheDir string, rules MeterRules) (*MeterSet, error) {
	var faults tables.Faults
	files := listMeters(fsys, blocks, &faults)
	if rules.SpikeFactor < 0 || rules.SpikeFactor != rules.SpikeFactor {
		faults.Add(tables.Pos{}, "the spike factor is %v; want 0 (which means 5) or more", rules.SpikeFactor)
	}
	if len(faults) > 0 {
		return nil, faults.Err()
	}
	cache := openCache(cacheDir, blocks, rules, files)
	if s := cache.load(fsys); s != nil {
		return s, nil
	}
	contents := readMeters(fsys, files)
	for i := range contents {
		faults = append(faults, contents[i].faults...)
		cache.note(i, contents[i].stat, contents[i].sum)
	}
	list := merge(contents, &faults)
	if len(faults) > 0 {
		return nil, faults.Err()
	}
	s := &MeterSet{index: make(map[string]int)}
	for _, f := range files {
		s.files = append(s.files, f.name)
	}
	s.sortFiles()
	for i := range contents {
		s.Warnings = append(s.Warnings, contents[i].warnings...)
	}
	s.finish(list, files, rules, &faults)
	if len(faults) > 0 {
		return nil, limited(faults, maxWarnings).Err()
	}
	s.Warnings.Sort()
	s.Warnings = limited(s.Warnings, maxWarnings)
	if problem := cache.store(s); problem != "" {
		s.Warnings.Add(tables.Pos{File: cacheDir}, "%s", problem)
	}
	return s, nil
}

// limited keeps the first most faults and says how many there are more.
func limited(list tables.Faults, most int) tables.Faults {
	if len(list) <= most {
		return list
	}
	list.Sort()
	more := len(list) - most
	list = list[:most]
	list.Add(tables.Pos{File: list[most-1].Pos.File}, "and %d more of this kind", more)
	return list
}

// meterFile is a file and the block that names it.
type meterFile struct {
	name  string
	block *MeterBlock
}

func listMeters(fsys fs.FS, blocks []MeterBlock, faults *tables.Faults) []meterFile {
	var files []meterFile
	taken := make(map[string]int)
	for k := range blocks {
		b := &blocks[k]
		checkMeterBlock(b, faults)
		for _, pattern := range b.Files {
			names, problem := match(fsys, pattern)
			if problem != "" {
				faults.Add(b.Pos, "files %q: %s", pattern, problem)
			}
			for _, name := range names {
				first, ok := taken[name]
				if !ok {
					taken[name] = k
					files = append(files, meterFile{name, b})
				} else if first != k {
					faults.Add(b.Pos, "%s is named by the block of meters at %s too; name it in one", name, blocks[first].Pos)
				}
			}
		}
	}
	return files
}

func checkMeterBlock(b *MeterBlock, faults *tables.Faults) {
	check := func(key, value string, words ...string) {
		for _, w := range words {
			if value == w || value == "" {
				return
			}
		}
		faults.Add(b.Pos, "%s = %q: want %s", key, value, strings.Join(words, " or "))
	}
	check("layout", b.Layout, "long", "wide")
	check("values", b.Values, "interval", "register")
	check("stamped", b.Stamped, "start", "end")
	if b.Unit != "" {
		if _, ok := meterUnitOf(b.Unit); !ok {
			faults.Add(b.Pos, "unit = %q: want one of %s", b.Unit, wantMeterUnits)
		}
	}
	if len(b.Files) == 0 {
		faults.Add(b.Pos, "the block of meters names no files; want files = [\"meters/*.csv\"]")
	}
}

// readMeters reads all files, in parallel; the result is in their order.
func readMeters(fsys fs.FS, files []meterFile) []meterContent {
	contents := make([]meterContent, len(files))
	inParallel(len(files), func() func(int) {
		return func(i int) { contents[i] = readMeterFile(fsys, files[i], int32(i)) }
	})
	return contents
}

// inParallel calls the functions that begin returns, one a worker, for 0 to n−1.
func inParallel(n int, begin func() func(int)) {
	var wg sync.WaitGroup
	next := make(chan int)
	for range min(runtime.GOMAXPROCS(0), n) {
		wg.Add(1)
		go func() {
			defer wg.Done()
			do := begin()
			for i := range next {
				do(i)
			}
		}()
	}
	for i := range n {
		next <- i
	}
	close(next)
	wg.Wait()
}

// finish makes the meters from their rows.
func (s *MeterSet) finish(list []*store, files []meterFile, rules MeterRules, faults *tables.Faults) {
	sort.Slice(list, func(i, j int) bool { return list[i].name < list[j].name })
	results := make([]mending, len(list))
	inParallel(len(list), func() func(int) {
		w := newMender(files, rules)
		return func(i int) {
			results[i] = w.mend(list[i])
			list[i].real.chunks, list[i].reactive.chunks = nil, nil
		}
	})
	for i := range results {
		r := &results[i]
		*faults = append(*faults, r.faults...)
		s.Warnings = append(s.Warnings, r.warnings...)
		if r.meter == nil {
			continue
		}
		s.index[r.meter.Name] = len(s.meters)
		s.meters = append(s.meters, r.meter)
		s.Mended = append(s.Mended, r.mended...)
	}
}
