package main

import (
	"bytes"
	"strings"
	"testing"
	"time"

	"yearflow/sim/results"
)

// Elsewhere than on a terminal progress is a line, no more often than every five
// seconds; on a terminal it is a bar that is cleared at the end.
func TestProgress(t *testing.T) {
	var b bytes.Buffer
	p := newProgress(&b, 8760)
	steps := func(n int) {
		for range n {
			if err := p.Step(&results.Step{}); err != nil {
				t.Fatal(err)
			}
		}
	}
	steps(4380)
	if b.Len() > 0 && time.Since(p.began) < 5*time.Second {
		t.Errorf("a line at once: %q", b.String())
	}
	p.began, p.shown = time.Now().Add(-time.Minute), time.Now().Add(-time.Minute)
	steps(64)
	if got := b.String(); !strings.Contains(got, "step 4416 of 8760 (50 %), about 59s left\n") && !strings.Contains(got, "step 4416 of 8760 (50 %), about 1m") {
		t.Errorf("got %q", got)
	}
	p.end()
	if got := b.String(); strings.Count(got, "\n") != 1 || strings.Contains(got, "\r") {
		t.Errorf("no line ends it: %q", got)
	}
	b.Reset()
	p.terminal, p.shown = true, time.Now().Add(-time.Minute)
	steps(64)
	if got := b.String(); !strings.HasPrefix(got, "\r[===============               ]  51 %, ") {
		t.Errorf("got %q", got)
	}
	p.end()
	if got := b.String(); !strings.HasSuffix(got, " \r") {
		t.Errorf("the bar stays: %q", got)
	}
}
