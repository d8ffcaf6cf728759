package feeder_test

import (
	"encoding/hex"
	"errors"
	"io/fs"
	"os"
	"path"
	"regexp"
	"strings"
	"testing"
	"testing/fstest"
	"unicode/utf16"

	"yearflow/profiles"
	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/tables"
)

const badFolder = "../../testdata/bad"

// TestBrokenStudies opens each study of testdata/bad and compares the faults that are
// reported with those it asks for: no fewer, so that nothing is let through, and no
// more, so that one mistake is not reported again by all that stands on it.
func TestBrokenStudies(t *testing.T) {
	base := baseStudy(t)
	names, err := fs.Glob(os.DirFS(badFolder), "[0-9]*.txt")
	if err != nil {
		t.Fatal(err)
	}
	if len(names) < 60 {
		t.Fatalf("%d studies in %s, want 60 or more", len(names), badFolder)
	}
	for _, name := range names {
		t.Run(strings.TrimSuffix(name, ".txt"), func(t *testing.T) {
			text, err := os.ReadFile(path.Join(badFolder, name))
			if err != nil {
				t.Fatal(err)
			}
			b, err := parseBroken(string(text), base)
			if err != nil {
				t.Fatal(err)
			}
			b.check(t, b.open())
		})
	}
}

// broken is one study of testdata/bad, as its README describes them.
type broken struct {
	want     [][]string // for each fault, what its line holds; nothing: the study is good
	caseName string
	stage    string
	more     bool // further faults may follow from these
	files    fstest.MapFS
}

// open reads the study as far as its stage says, as a run does.
func (b broken) open() error {
	s, err := feeder.Open(b.files, b.caseName)
	if err != nil {
		return err
	}
	switch b.stage {
	case "profiles":
		return openProfiles(s)
	case "engine":
		_, err = sim.Prepare(s, sim.Options{})
	}
	return err
}

// openProfiles reads the profiles and lays all of them over the period, whether
// something names them or not.
func openProfiles(s *feeder.Study) error {
	var blocks []profiles.Block
	for _, b := range s.Settings.Profiles {
		blocks = append(blocks, profiles.Block{Pos: b.At, Files: b.Files, Stamped: b.Stamped,
			Interpolate: b.Interpolate, Repeat: b.Repeat, Zone: b.Zone})
	}
	set, err := profiles.Open(s.FS, blocks)
	if err != nil {
		return err
	}
	var all []*profiles.Series
	for _, name := range set.Names() {
		one, _ := set.Lookup(name)
		all = append(all, one)
	}
	p := s.Settings.Period
	_, err = profiles.NewSampler(profiles.Axis{Start: p.Start, End: p.End, Step: p.Step, Zone: p.Zone}, all)
	return err
}

func (b broken) check(t *testing.T, err error) {
	t.Helper()
	if err == nil {
		if len(b.want) > 0 {
			t.Errorf("no fault is reported, want %q", b.want)
		}
		return
	}
	var faults tables.Faults
	if !errors.As(err, &faults) {
		t.Fatalf("want tables.Faults, got %T: %v", err, err)
	}
	t.Log(err)
	missing := 0
	for _, want := range b.want {
		if !reported(faults, want) {
			missing++
			t.Errorf("no fault holds %q", want)
		}
	}
	if missing > 0 || len(faults) < len(b.want) || len(faults) > len(b.want) && !b.more {
		t.Errorf("want %d faults, got %d:\n%v", len(b.want), len(faults), faults)
	}
	for _, f := range faults {
		if f.Pos.File == "" || strings.Contains(f.Text, "\n") {
			t.Errorf("a fault needs a file, and one line: %q", f.Error())
		}
	}
}

func reported(faults tables.Faults, want []string) bool {
	for _, f := range faults {
		all := true
		for _, w := range want {
			all = all && strings.Contains(f.Error(), w)
		}
		if all {
			return true
		}
	}
	return false
}

// baseStudy reads the good study that the broken ones change.
func baseStudy(t *testing.T) fstest.MapFS {
	t.Helper()
	base := fstest.MapFS{}
	root := os.DirFS(path.Join(badFolder, "base"))
	err := fs.WalkDir(root, ".", func(name string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := fs.ReadFile(root, name)
		base[name] = &fstest.MapFile{Data: data}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return base
}

var section = regexp.MustCompile(`^-- (?:([a-z0-9]+) )?(\S+) --$`)

// parseBroken reads a file of testdata/bad and lays it over the base.
func parseBroken(text string, base fstest.MapFS) (broken, error) {
	b := broken{files: fstest.MapFS{}}
	for name, f := range base {
		b.files[name] = f
	}
	lines := strings.Split(strings.TrimSuffix(text, "\n"), "\n")
	i := 0
	for ; i < len(lines) && !section.MatchString(lines[i]); i++ {
		key, value, _ := strings.Cut(lines[i], ": ")
		switch key {
		case "want":
			if value != "ok" {
				b.want = append(b.want, strings.Split(value, " | "))
			}
		case "case":
			b.caseName = value
		case "more":
			b.more = value == "allowed"
		case "stage":
			b.stage = value
		default:
			return b, errors.New("unknown line in the head: " + lines[i])
		}
	}
	for i < len(lines) {
		m := section.FindStringSubmatch(lines[i])
		first := i + 1
		for i = first; i < len(lines) && !section.MatchString(lines[i]); i++ {
		}
		if err := b.apply(m[1], m[2], lines[first:i]); err != nil {
			return b, err
		}
	}
	return b, nil
}

// apply changes one file of the study.
func (b broken) apply(verb, name string, body []string) error {
	var old string
	if f := b.files[name]; f != nil {
		old = string(f.Data)
	}
	text := ""
	for _, l := range body {
		text += l + "\n"
	}
	put := func(s string) { b.files[name] = &fstest.MapFile{Data: []byte(s)} }
	switch verb {
	case "":
		put(text)
	case "append":
		put(old + text)
	case "delete":
		delete(b.files, name)
	case "bom":
		put("\xef\xbb\xbf" + old)
	case "crlf":
		put(strings.ReplaceAll(old, "\n", "\r\n"))
	case "utf16":
		s := []byte{0xff, 0xfe}
		for _, u := range utf16.Encode([]rune(old)) {
			s = append(s, byte(u), byte(u>>8))
		}
		put(string(s))
	case "hex":
		s, err := hex.DecodeString(strings.Join(body, ""))
		if err != nil {
			return err
		}
		put(string(s))
	case "edit":
		for _, l := range body {
			from, to, ok := strings.Cut(l, " =>")
			if !ok || strings.Count(old, from) != 1 {
				return errors.New("want a text that stands once in " + name + ", then =>: " + l)
			}
			old = strings.Replace(old, from, strings.TrimPrefix(to, " "), 1)
		}
		put(old)
	default:
		return errors.New("unknown section: " + verb)
	}
	return nil
}
