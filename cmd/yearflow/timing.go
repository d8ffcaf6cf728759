package main

import (
	"fmt"
	"io"
	"maps"
	"slices"
	"strings"
	"time"

	"yearflow/sim"
	"yearflow/sim/results"
)

// wallOf lists for timing.json where the time of a run went; rows is that for writing
// rows of the logs.
func wallOf(t sim.Timing, rows time.Duration) []results.WallTime {
	var out []results.WallTime
	own, beside := partsOf(t, rows)
	for _, p := range append(own, beside...) {
		out = append(out, results.WallTime{Part: "run: " + p.name, Seconds: p.took.Seconds()})
	}
	return out
}

type timedPart struct {
	name string
	took time.Duration
}

// partsOf are the parts of the run's own time, then those of recorders that worked beside
// it, on another core.
func partsOf(t sim.Timing, rows time.Duration) (own, beside []timedPart) {
	own = []timedPart{{"assembling", t.Assembling}, {"solving", t.Solving}, {"controls", t.Controls}}
	records := []timedPart{{"statistics", t.Statistics - rows}, {"writing", rows}}
	if t.Beside {
		return append(own, timedPart{"handing over", t.Waiting}), records
	}
	return append(own, records...), nil
}

// runProfile is what run --timing prints.
type runProfile struct {
	timing  sim.Timing
	speed   results.Speed
	paths   map[string]int
	steps   int
	reading time.Duration // of the study
	rows    time.Duration // writing rows of the logs
	files   time.Duration // writing the other files and drawing
	drawing results.WallTime
	total   time.Duration
}

func (p *runProfile) write(w io.Writer) {
	drawing := time.Duration(p.drawing.Seconds * float64(time.Second))
	own, beside := partsOf(p.timing, p.rows)
	parts := append([]timedPart{{"reading", p.reading}}, own...)
	parts = append(parts, timedPart{"other files", p.files - drawing}, timedPart{p.drawing.Part, drawing})
	fmt.Fprint(w, "\nWhere the time went\n")
	s := sheet{left: 1}
	rest := p.total
	share := func(x timedPart) {
		s.add(x.name, fmt.Sprintf("%.3f", x.took.Seconds()), "s", fmt.Sprintf("%.1f", 100*x.took.Seconds()/p.total.Seconds()), "%")
	}
	for _, x := range append(parts, timedPart{"the rest", 0}, timedPart{"all", p.total}) {
		if x.name == "the rest" {
			x.took = rest
		}
		rest -= x.took
		share(x)
	}
	for _, x := range beside {
		x.name = "beside it: " + x.name
		share(x)
	}
	s.write(w)
	fmt.Fprintf(w, "%s, %s, %.2f iterations each", count(p.steps, "step"), count(p.timing.Solutions, "solution"), per(p.timing.Iterations, p.timing.Solutions))
	for _, path := range slices.Sorted(maps.Keys(p.paths)) {
		fmt.Fprintf(w, "; %d by %s", p.paths[path], path)
	}
	fmt.Fprintln(w)
	if p.timing.Blocks > 0 {
		fmt.Fprintf(w, "%s of steps solved at once, %d instants, %d lost to cuts (%.1f %%); %d steps handed on as quiet\n", count(p.timing.Blocks, "block"),
			p.timing.LanesSolved, p.timing.LanesLost(), 100*per(p.timing.LanesLost(), p.timing.LanesSolved), p.timing.QuietSteps)
	}
	if p.timing.Scouts > 0 {
		fmt.Fprintf(w, "%s solved roughly, to forecast what devices will do\n", count(p.timing.Scouts, "block"))
	}
	var why []string
	for _, reason := range slices.Sorted(maps.Keys(p.speed.StepByStep)) {
		why = append(why, fmt.Sprintf("%s by themselves (%s)", count(p.speed.StepByStep[reason], "step"), reason))
	}
	if p.timing.Edges > 0 {
		why = append(why, count(p.timing.Edges, "instant")+" solved again near an edge")
	}
	if len(why) > 0 {
		fmt.Fprintln(w, strings.Join(why, "; "))
	}
}

// per is a/b, zero of nothing.
func per(a, b int) float64 {
	if b == 0 {
		return 0
	}
	return float64(a) / float64(b)
}
