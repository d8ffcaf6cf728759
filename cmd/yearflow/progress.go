package main

import (
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"golang.org/x/term"

	"yearflow/sim/results"
)

// progress shows how far a run is: a bar on a terminal, a line every few seconds
// elsewhere. It is a sim.Recorder that records nothing.
type progress struct {
	w        io.Writer
	terminal bool
	what     string // is counted
	total    int
	done     int
	began    time.Time
	shown    time.Time
}

func newProgress(w io.Writer, total int) *progress {
	p := &progress{w: w, what: "step", total: total, began: time.Now()}
	if f, ok := w.(*os.File); ok {
		p.terminal = term.IsTerminal(int(f.Fd()))
	}
	p.shown = p.began
	return p
}

func (p *progress) Interval(*results.Interval) error { return nil }
func (p *progress) Action(*results.Action) error     { return nil }

func (p *progress) Step(*results.Step) error {
	p.count(1)
	return nil
}

// Whole: no step need come by itself.
func (p *progress) Whole(start, end int64) bool { return false }

// Gathers: of a step nothing is needed but that it has been.
func (p *progress) Gathers() bool { return true }

func (p *progress) Gathered(g *results.Gathered) error {
	p.count(g.Ended())
	return nil
}

func (p *progress) Quiet(q *results.Quiet) error {
	p.count(q.Count)
	return nil
}

func (p *progress) count(steps int) {
	before := p.done / 64
	p.done += steps
	if p.done/64 != before || p.done == p.total {
		p.show()
	}
}

// show tells how far it is, if it is time to.
func (p *progress) show() {
	now := time.Now()
	every := 5 * time.Second
	if p.terminal {
		every = 200 * time.Millisecond
	}
	if now.Sub(p.shown) < every {
		return
	}
	p.shown = now
	share := float64(p.done) / float64(p.total)
	left := time.Duration(float64(now.Sub(p.began)) * (1 - share) / share).Round(time.Second)
	if p.terminal {
		n := int(30 * share)
		fmt.Fprintf(p.w, "\r[%s%s] %3.0f %%, %v left  ", strings.Repeat("=", n), strings.Repeat(" ", 30-n), 100*share, left)
	} else {
		fmt.Fprintf(p.w, "%s %d of %d (%.0f %%), about %v left\n", p.what, p.done, p.total, 100*share, left)
	}
}

// end clears the bar.
func (p *progress) end() {
	if p.terminal {
		fmt.Fprintf(p.w, "\r%s\r", strings.Repeat(" ", 60))
	}
}
