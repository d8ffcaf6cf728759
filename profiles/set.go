package profiles

import (
	"io/fs"
	"path"
	"runtime"
	"sort"
	"strings"
	"sync"
	"time"

	"yearflow/sim/tables"
)

// Block is one [[profiles]] entry: files that are read alike.
type Block struct {
	Pos         tables.Pos     // of the entry, for faults
	Files       []string       // glob patterns below the study's folder
	Stamped     string         // start (or blank), end or instant; instant without Interpolate is start
	Interpolate bool           // straight lines between stamps
	Repeat      string         // none (or blank), day, week or year
	Zone        *time.Location // of stamps without an offset and of repeating; nil: UTC
}

// Set is every series of a study. It is not changed after Open.
type Set struct {
	names  []string
	series map[string]*Series
	files  []string
}

// Open reads all files of all blocks. Everything wrong with them comes back
// together as tables.Faults. A pattern with wildcards may match nothing; a plain
// name must exist.
func Open(fsys fs.FS, blocks []Block) (*Set, error) {
	var faults tables.Faults
	files := list(fsys, blocks, &faults)
	type content struct {
		series []*Series
		faults tables.Faults
	}
	contents := make([]content, len(files))
	var wg sync.WaitGroup
	free := make(chan struct{}, runtime.GOMAXPROCS(0))
	for i, f := range files {
		wg.Add(1)
		free <- struct{}{}
		go func() {
			defer func() { <-free; wg.Done() }()
			contents[i].series, contents[i].faults = readFile(fsys, f.name, f.block)
		}()
	}
	wg.Wait()
	s := &Set{series: make(map[string]*Series)}
	for i, c := range contents {
		s.files = append(s.files, files[i].name)
		faults = append(faults, c.faults...)
		for _, one := range c.series {
			if other, ok := s.series[one.Name]; ok {
				faults.Add(one.Pos, "the name %q is taken by %s; give each profile one name", one.Name, other.Pos)
				continue
			}
			s.series[one.Name] = one
			s.names = append(s.names, one.Name)
		}
	}
	sort.Strings(s.files)
	return s, faults.Err()
}

// listed is a file and the block that names it.
type listed struct {
	name  string
	block Block
}

// list finds the files of the blocks, in their order.
func list(fsys fs.FS, blocks []Block, faults *tables.Faults) []listed {
	var files []listed
	taken := make(map[string]int)
	for k, b := range blocks {
		checkBlock(b, faults)
		for _, pattern := range b.Files {
			names, problem := match(fsys, pattern)
			if problem != "" {
				faults.Add(b.Pos, "files %q: %s", pattern, problem)
			}
			for _, name := range names {
				first, ok := taken[name]
				if !ok {
					taken[name] = k
					files = append(files, listed{name, b})
				} else if first != k {
					faults.Add(b.Pos, "%s is named by the block of profiles at %s too; name it in one", name, blocks[first].Pos)
				}
			}
		}
	}
	return files
}

func checkBlock(b Block, faults *tables.Faults) {
	switch b.Stamped {
	case "", "start", "end", "instant":
	default:
		faults.Add(b.Pos, "stamped = %q: want start, end or instant", b.Stamped)
	}
	switch b.Repeat {
	case "", "none", "day", "week", "year":
	default:
		faults.Add(b.Pos, "repeat = %q: want none, day, week or year", b.Repeat)
	}
}

// match returns the files of a pattern.
func match(fsys fs.FS, pattern string) (names []string, problem string) {
	clean := path.Clean(pattern)
	if pattern == "" || !fs.ValidPath(clean) || strings.Contains(pattern, "\\") {
		return nil, "want a path below the study's folder with forward slashes, such as profiles/*.csv"
	}
	names, err := fs.Glob(fsys, clean)
	switch {
	case err != nil:
		return nil, "not a pattern; want a path such as profiles/*.csv"
	case len(names) == 0 && !strings.ContainsAny(clean, "*?["):
		return nil, "there is no such file"
	}
	return names, ""
}

// Names returns the names of all series in the order of blocks, files and columns.
// A [kvar] companion goes by the name of its [kW] series.
func (s *Set) Names() []string { return append([]string(nil), s.names...) }

// Lookup returns the series of that name.
func (s *Set) Lookup(name string) (*Series, bool) {
	one, ok := s.series[name]
	return one, ok
}

// Files returns the names of all files that were read, sorted.
func (s *Set) Files() []string { return append([]string(nil), s.files...) }
