package profiles

import (
	"bufio"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"hash/crc32"
	"io"
	"math"
	"os"
	"path/filepath"
	"time"
)

// store writes the set to the cache, whole or not at all. problem says why it could
// not; the set is none the worse for it.
func (c *meterCache) store(s *MeterSet) (problem string) {
	if c.path == "" {
		return ""
	}
	if err := c.write(s); err != nil {
		return fmt.Sprintf("the checked meters cannot be kept for the next run: %v", reason(err))
	}
	return ""
}

func (c *meterCache) write(s *MeterSet) error {
	dir := filepath.Dir(c.path)
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return err
	}
	f, err := os.CreateTemp(dir, filepath.Base(c.path)+".*.new")
	if err != nil {
		return err
	}
	done := false
	defer func() {
		if !done {
			f.Close()
			os.Remove(f.Name())
		}
	}()
	if err := c.encode(f, s); err != nil {
		return err
	}
	if err := f.Sync(); err != nil {
		return err
	}
	if err := f.Close(); err != nil {
		return err
	}
	if err := os.Rename(f.Name(), c.path); err != nil {
		return err
	}
	done = true
	return nil
}

// summed sums what passes through it.
type summed struct {
	w   io.Writer
	crc uint32
}

func (s *summed) Write(p []byte) (int, error) {
	s.crc = crc32.Update(s.crc, castagnoli, p)
	return s.w.Write(p)
}

func (c *meterCache) encode(f io.Writer, s *MeterSet) error {
	h := c.headerOf(s)
	rules := make(map[string]uint32, len(h.Rules))
	for i, rule := range h.Rules {
		rules[rule] = uint32(i)
	}
	text, err := json.Marshal(h)
	if err != nil {
		return err
	}
	sum := &summed{w: f}
	w := bufio.NewWriterSize(sum, 1<<20)
	b := append(make([]byte, 0, 64), cacheMagic...)
	b = binary.LittleEndian.AppendUint32(b, cacheVersion)
	b = binary.LittleEndian.AppendUint32(b, uint32(len(text)))
	w.Write(b) // a bufio.Writer keeps its error for Flush
	w.Write(text)
	for _, m := range s.Mended {
		b = binary.LittleEndian.AppendUint32(b[:0], uint32(s.index[m.Meter]))
		b = binary.LittleEndian.AppendUint32(b, rules[m.Rule])
		b = binary.LittleEndian.AppendUint64(b, uint64(m.From))
		b = binary.LittleEndian.AppendUint64(b, uint64(m.To))
		b = binary.LittleEndian.AppendUint64(b, uint64(m.Count))
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(m.Energy))
		w.Write(b)
	}
	for _, m := range s.meters {
		for _, values := range [...][]float32{m.values, m.kvar} {
			for _, v := range values {
				b = binary.LittleEndian.AppendUint32(b[:0], math.Float32bits(v))
				w.Write(b)
			}
		}
	}
	if err := w.Flush(); err != nil {
		return err
	}
	_, err = f.Write(binary.LittleEndian.AppendUint32(b[:0], sum.crc))
	return err
}

func (c *meterCache) headerOf(s *MeterSet) cacheHeader {
	h := cacheHeader{Key: c.key, Files: c.header.Files, Warnings: s.Warnings, Mended: len(s.Mended)}
	known := make(map[string]bool)
	for _, m := range s.Mended {
		if !known[m.Rule] {
			known[m.Rule] = true
			h.Rules = append(h.Rules, m.Rule)
		}
	}
	for _, m := range s.meters {
		h.Meters = append(h.Meters, cacheMeter{
			Name: m.Name, Pos: m.Pos, Read: m.Read, Edited: m.Edited, Before: m.Before, After: m.After,
			Start: m.start, Step: m.step, Len: len(m.values), Kvar: m.kvar != nil, Zone: c.zoneOf(m.zone),
		})
	}
	return h
}

// zoneOf returns which block has a zone; −1 for that of the rules, which goes first.
func (c *meterCache) zoneOf(zone *time.Location) int {
	if last := c.zones[len(c.zones)-1]; last != nil {
		return -1
	}
	for i, z := range c.zones {
		if z == zone || z == nil && zone == time.UTC {
			return i
		}
	}
	return -1
}
