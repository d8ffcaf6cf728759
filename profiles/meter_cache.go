package profiles

import (
	"bufio"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"hash/crc32"
	"io"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"sync/atomic"
	"time"

	"yearflow/sim/tables"
)

// The cache of mended meters is one file for each way of reading (blocks, rules, names
// of files), numbers little-endian:
//
//	8 bytes   magic "yfmeters"
//	4 bytes   version
//	4 bytes   length of the header
//	          header: JSON, see cacheHeader
//	          edited stretches: meter u32, rule u32, from i64, to i64, count i64, energy f64
//	          values: of each meter real f32, then, if it has them, reactive f32
//	4 bytes   CRC-32 (Castagnoli) of all before
//
// It holds for files whose SHA-256 is that of the header. A file of unchanged size and
// time of modification, that was two seconds old when the cache was written, is taken
// for unchanged if eight blocks spread over it are.
const (
	cacheMagic   = "yfmeters"
	cacheVersion = 1
	mendedSize   = 40
	settled      = 2 * second
)

// fileStat tells whether a file has changed. Sampled is false where the file system has
// no time of modification or no random access.
type fileStat struct {
	Size, Time int64
	Sampled    bool
	Sample     [sha256.Size]byte
}

func statOf(f fs.File, st fs.FileInfo) fileStat {
	s := fileStat{Size: st.Size()}
	r, ok := f.(io.ReaderAt)
	if !ok || st.ModTime().IsZero() {
		return s
	}
	s.Time = st.ModTime().UnixNano()
	const blocks, size = 8, 4096
	sum := sha256.New()
	buf := make([]byte, size)
	for i := range int64(blocks) {
		n, err := r.ReadAt(buf, max(0, s.Size-size)*i/(blocks-1))
		if err != nil && err != io.EOF {
			return s
		}
		sum.Write(buf[:n])
	}
	s.Sampled = true
	copy(s.Sample[:], sum.Sum(nil))
	return s
}

type cacheFile struct {
	Name string
	Stat fileStat
	Sum  [sha256.Size]byte
}

type cacheMeter struct {
	Name          string
	Pos           tables.Pos
	Read, Edited  int
	Before, After float64
	Start, Step   int64
	Len           int
	Kvar          bool
	Zone          int // of the block, −1: of the rules
}

type cacheHeader struct {
	Key      string
	Files    []cacheFile
	Meters   []cacheMeter
	Warnings tables.Faults
	Rules    []string
	Mended   int
}

// meterCache is the cache of one call of OpenMeters; a blank path is none.
type meterCache struct {
	path, key string
	header    cacheHeader
	zones     []*time.Location // of the blocks, then that of the rules
}

// openCache finds the place of the cache for this way of reading.
func openCache(dir string, blocks []MeterBlock, rules MeterRules, files []meterFile) *meterCache {
	c := &meterCache{}
	if dir == "" {
		return c
	}
	type asked struct {
		Version int
		Blocks  []MeterBlock
		Zones   []string
		Names   []string
		Rules   MeterRules
	}
	a := asked{Version: cacheVersion, Rules: rules}
	for _, b := range blocks {
		c.zones = append(c.zones, b.Zone)
		a.Zones = append(a.Zones, b.Zone.String())
		b.Zone, b.Pos = nil, tables.Pos{}
		a.Blocks = append(a.Blocks, b)
	}
	c.zones = append(c.zones, rules.Zone)
	a.Zones = append(a.Zones, fmt.Sprint(rules.Zone != nil), rules.Zone.String())
	a.Rules.Zone = nil
	for _, f := range files {
		a.Names = append(a.Names, f.name)
		c.header.Files = append(c.header.Files, cacheFile{Name: f.name})
	}
	text, err := json.Marshal(a)
	if err != nil {
		return c // a number of the rules that is none: no cache
	}
	sum := sha256.Sum256(text)
	c.key = hex.EncodeToString(sum[:])
	c.path = filepath.Join(dir, "meters-"+c.key[:16]+".cache")
	return c
}

// note records what a file was when it was read.
func (c *meterCache) note(i int, stat fileStat, sum [sha256.Size]byte) {
	if c.path != "" {
		c.header.Files[i].Stat, c.header.Files[i].Sum = stat, sum
	}
}

// load returns the set of the cache, or nil where there is none that holds.
func (c *meterCache) load(fsys fs.FS) *MeterSet {
	if c.path == "" {
		return nil
	}
	f, err := os.Open(c.path)
	if err != nil {
		return nil
	}
	defer f.Close()
	st, err := f.Stat()
	if err != nil {
		return nil
	}
	r := &cacheReader{r: bufio.NewReaderSize(f, 1<<20)}
	h, ok := r.header(st.Size())
	if !ok || h.Key != c.key || len(h.Files) != len(c.header.Files) {
		return nil
	}
	if !unchanged(fsys, h.Files, st.ModTime().UnixNano()) {
		return nil
	}
	return r.set(h, c.zones)
}

// unchanged compares all files, in parallel, with what they were.
func unchanged(fsys fs.FS, files []cacheFile, written int64) bool {
	var changed atomic.Bool
	inParallel(len(files), func() func(int) {
		return func(i int) {
			if !changed.Load() && !sameFile(fsys, files[i], written) {
				changed.Store(true)
			}
		}
	})
	return !changed.Load()
}

func sameFile(fsys fs.FS, was cacheFile, written int64) bool {
	f, err := fsys.Open(was.Name)
	if err != nil {
		return false
	}
	defer f.Close()
	st, err := f.Stat()
	if err != nil || st.Size() != was.Stat.Size {
		return false
	}
	now := statOf(f, st)
	if was.Stat.Sampled && now == was.Stat && now.Time+settled < written {
		return true
	}
	sum := sha256.New()
	if _, err := io.Copy(sum, f); err != nil {
		return false
	}
	return [sha256.Size]byte(sum.Sum(nil)) == was.Sum
}

// cacheReader reads a cache and sums what it reads.
type cacheReader struct {
	r   io.Reader
	crc uint32
	buf []byte
}

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// next returns the next n bytes, valid until the next call.
func (r *cacheReader) next(n int) ([]byte, bool) {
	r.buf = room(r.buf, n)
	if _, err := io.ReadFull(r.r, r.buf); err != nil {
		return nil, false
	}
	r.crc = crc32.Update(r.crc, castagnoli, r.buf)
	return r.buf, true
}

// header reads the header of a cache of size bytes and checks that it is as long as
// its header says.
func (r *cacheReader) header(size int64) (h cacheHeader, ok bool) {
	b, ok := r.next(16)
	if !ok || string(b[:8]) != cacheMagic || binary.LittleEndian.Uint32(b[8:]) != cacheVersion {
		return h, false
	}
	n := int64(binary.LittleEndian.Uint32(b[12:]))
	if n > size {
		return h, false
	}
	b, ok = r.next(int(n))
	if !ok || json.Unmarshal(b, &h) != nil || h.Mended < 0 || int64(h.Mended) > size {
		return h, false
	}
	want := 16 + n + int64(h.Mended)*mendedSize + 4
	for _, m := range h.Meters {
		if m.Len < 1 || int64(m.Len) > size || m.Step < minute || m.Step > hour {
			return h, false
		}
		want += 4 * int64(m.Len)
		if m.Kvar {
			want += 4 * int64(m.Len)
		}
	}
	return h, want == size
}

// set reads what follows the header.
func (r *cacheReader) set(h cacheHeader, zones []*time.Location) *MeterSet {
	s := &MeterSet{Cached: true, Warnings: h.Warnings, index: make(map[string]int)}
	for _, f := range h.Files {
		s.files = append(s.files, f.Name)
	}
	s.sortFiles()
	if h.Mended > 0 {
		s.Mended = make([]Mended, h.Mended)
	}
	for i := range s.Mended {
		b, ok := r.next(mendedSize)
		if !ok {
			return nil
		}
		meter, rule := binary.LittleEndian.Uint32(b), binary.LittleEndian.Uint32(b[4:])
		if int64(meter) >= int64(len(h.Meters)) || int64(rule) >= int64(len(h.Rules)) {
			return nil
		}
		s.Mended[i] = Mended{
			Meter: h.Meters[meter].Name, Rule: h.Rules[rule],
			From: int64(binary.LittleEndian.Uint64(b[8:])), To: int64(binary.LittleEndian.Uint64(b[16:])),
			Count: int(binary.LittleEndian.Uint64(b[24:])), Energy: math.Float64frombits(binary.LittleEndian.Uint64(b[32:])),
		}
	}
	for _, one := range h.Meters {
		m := &Meter{Name: one.Name, Pos: one.Pos, Read: one.Read, Edited: one.Edited, Before: one.Before, After: one.After,
			start: one.Start, step: one.Step, zone: time.UTC}
		k := one.Zone
		if k < 0 {
			k = len(zones) - 1
		}
		if k < len(zones) && zones[k] != nil {
			m.zone = zones[k]
		}
		var ok bool
		if m.values, ok = r.values(one.Len); !ok {
			return nil
		}
		if one.Kvar {
			if m.kvar, ok = r.values(one.Len); !ok {
				return nil
			}
		}
		s.index[m.Name] = len(s.meters)
		s.meters = append(s.meters, m)
	}
	crc := r.crc
	b, ok := r.next(4)
	if !ok || binary.LittleEndian.Uint32(b) != crc {
		return nil
	}
	return s
}

func (r *cacheReader) values(n int) ([]float32, bool) {
	b, ok := r.next(4 * n)
	if !ok {
		return nil, false
	}
	out := make([]float32, n)
	for k := range out {
		out[k] = math.Float32frombits(binary.LittleEndian.Uint32(b[4*k:]))
	}
	return out, true
}
