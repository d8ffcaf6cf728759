package study

import (
	"context"
	"errors"
	"fmt"
	"strings"
	"sync"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// baseWalks makes engines of one study's cases. Where the study has an [allocation], a case
// keeps the loads that were allocated without it, and the walk through the period that
// finds these is made once and shared: it is the same for all cases that leave the period
// and the profiles as they are. The zero value is ready; it may be used by several
// goroutines at once.
type baseWalks struct {
	mu     sync.Mutex
	walked []baseWalk
}

// baseWalk is an engine of the study without any case after its walk, and what of a case it
// hangs on.
type baseWalk struct {
	of     string
	engine *sim.Engine
}

// walkOf says in a text what of a case the walk of its base hangs on. Numbers that were
// left blank are no obstacle to a text, as they are to a comparison.
func walkOf(s *feeder.Settings) string {
	p, w := s.Period, s.Weather
	var b strings.Builder
	fmt.Fprint(&b, p.Start, p.End, p.Step, p.Zone, s.Run.Given)
	for _, x := range s.Profiles {
		fmt.Fprintf(&b, " %q %q %v %q %v", x.Files, x.Stamped, x.Interpolate, x.Repeat, x.Zone)
	}
	fmt.Fprintf(&b, " %q %q %v %v %v %v", w.File, w.Stamped, w.Zone, w.Latitude, w.Longitude, w.Elevation)
	return b.String()
}

// errWalked ends a run that was begun for the walk of its base alone.
var errWalked = errors.New("the base has been walked")

// prepare makes an engine of a study.
func (w *baseWalks) prepare(ctx context.Context, st *feeder.Study, demo bool) (*sim.Engine, error) {
	o := sim.Options{Demo: demo}
	if !keepsBaseLoads(st) {
		return sim.Prepare(st, o)
	}
	var err error
	if o.Base, err = w.base(ctx, st); err != nil {
		return nil, err
	}
	return sim.Prepare(st, o)
}

// keepsBaseLoads tells whether a study takes its loads from a walk of its base.
func keepsBaseLoads(st *feeder.Study) bool {
	a := st.Settings.Allocation
	return a != nil && !a.Own && st.Case != "" && st.Case != feeder.Base
}

// base returns the walked engine for a case. Others wait while it walks.
func (w *baseWalks) base(ctx context.Context, st *feeder.Study) (*sim.Engine, error) {
	set := &st.Settings
	key := walkOf(set)
	w.mu.Lock()
	defer w.mu.Unlock()
	for _, x := range w.walked {
		if x.of == key {
			return x.engine, nil
		}
	}
	// The base as the case would have it by itself.
	base, err := feeder.Open(st.FS, feeder.Base)
	if err != nil {
		return nil, err
	}
	base.Settings.Period, base.Settings.Profiles, base.Settings.Run, base.Settings.Weather = set.Period, set.Profiles, set.Run, set.Weather
	base.Settings.Limits.Allowance = 0
	engine, err := sim.Prepare(base, sim.Options{})
	if err != nil {
		return nil, err
	}
	first, err := sim.Prepare(st, sim.Options{Base: engine})
	if err != nil {
		return nil, err
	}
	// A case's run begins with the walk of its base.
	if _, err := first.Run(ctx, stepRecorder(func(*results.Step) error { return errWalked })); err != nil && !errors.Is(err, errWalked) {
		return nil, err
	}
	w.walked = append(w.walked, baseWalk{key, engine})
	return engine, nil
}
