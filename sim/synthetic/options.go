package synthetic

import (
	"errors"
	"fmt"
	"io/fs"
	"testing/fstest"
	"time"
)

// Inputs says how the shapes of the loads are written down.
type Inputs uint8

// The kinds of inputs.
const (
	// Minutes is a value a minute, with straight lines between them.
	Minutes Inputs = iota
	// HeldMinutes is a value a minute that holds for the minute.
	HeldMinutes
	// Hours is a value an hour that holds for the hour.
	Hours
	// Seconds is a value a second, each with noise of its own.
	Seconds
)

// String returns the name of the kind, as the command takes it.
func (i Inputs) String() string {
	switch i {
	case Minutes:
		return "minutes"
	case HeldMinutes:
		return "held minutes"
	case Hours:
		return "hours"
	case Seconds:
		return "seconds"
	}
	return fmt.Sprintf("Inputs(%d)", uint8(i))
}

// spacing is the time from one value to the next.
func (i Inputs) spacing() time.Duration {
	switch i {
	case Hours:
		return time.Hour
	case Seconds:
		return time.Second
	}
	return time.Minute
}

// Options says what feeder to make and what to run on it.
type Options struct {
	// Buses is how many places the feeder has, at least 80: every other one of three
	// phases, TwoPhase of two (legs count as phases) and SinglePhase of one. Where both
	// are zero they are a fifth and three tenths.
	Buses                 int
	TwoPhase, SinglePhase int
	Seed                  uint64

	// Start is a UTC midnight; zero means 2025-01-01. Days is the length of the period,
	// 1 where it is zero. Step divides a day into steps of whole seconds; zero means one
	// minute.
	Start time.Time
	Days  int
	Step  time.Duration

	Inputs Inputs
	// ProfileDays is how many days the profiles cover from Start on; the others repeat
	// them. Zero means all days for Hours, one day for Seconds and up to seven days for
	// the others. A day takes 0.3 MB by the minute and 18 MB by the second: a year by the
	// second is 6.6 GB and would not be held in memory, so that a year with fresh noise
	// each second repeats some days of it, with a jump where they meet.
	ProfileDays int
}

// S is a feeder of 131 buses with about 280 node.phases.
func S() Options { return Options{Buses: 131, TwoPhase: 20, SinglePhase: 45, Seed: 1} }

// M is a feeder of 1,001 buses with about 2,200 node.phases.
func M() Options { return Options{Buses: 1001, Seed: 1} }

// L is a feeder of 10,001 buses with about 22,000 node.phases.
func L() Options { return Options{Buses: 10001, Seed: 1} }

// Sized returns the options of one of the sizes S, M and L, in either case.
func Sized(size string) (Options, error) {
	switch size {
	case "S", "s":
		return S(), nil
	case "M", "m":
		return M(), nil
	case "L", "l":
		return L(), nil
	}
	return Options{}, fmt.Errorf("no size %q: S, M and L would do", size)
}

// complete returns the options with what stands for zero filled in.
func (o Options) complete() (Options, error) {
	if o.Buses < 80 || o.Buses > 100_000 {
		return o, fmt.Errorf("synthetic: %d buses; 80 to 100,000 would do", o.Buses)
	}
	if o.TwoPhase == 0 && o.SinglePhase == 0 {
		o.TwoPhase, o.SinglePhase = o.Buses/5, o.Buses*3/10
	}
	if three := o.Buses - o.TwoPhase - o.SinglePhase; o.TwoPhase < 8 || o.SinglePhase < 8 || three < 40 {
		return o, fmt.Errorf("synthetic: %d buses of two phases and %d of one leave %d of three; at least 8, 8 and 40 would do", o.TwoPhase, o.SinglePhase, three)
	}
	if o.Start.IsZero() {
		o.Start = time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	}
	const day = 24 * time.Hour
	if o.Start.Location() != time.UTC || !o.Start.Equal(o.Start.Truncate(day)) {
		return o, errors.New("synthetic: the start is a UTC midnight")
	}
	if o.Days == 0 {
		o.Days = 1
	}
	if o.Step == 0 {
		o.Step = time.Minute
	}
	if o.Days < 0 || o.Step < time.Second || o.Step%time.Second != 0 || day%o.Step != 0 {
		return o, fmt.Errorf("synthetic: %d days in steps of %v; steps are of whole seconds and divide a day", o.Days, o.Step)
	}
	if o.Inputs > Seconds {
		return o, fmt.Errorf("synthetic: no inputs %v", o.Inputs)
	}
	if o.ProfileDays == 0 {
		switch o.Inputs {
		case Hours:
			o.ProfileDays = o.Days
		case Seconds:
			o.ProfileDays = 1
		default:
			o.ProfileDays = min(o.Days, 7)
		}
	}
	if o.ProfileDays < 0 || o.ProfileDays > o.Days {
		return o, fmt.Errorf("synthetic: profiles of %d days for a period of %d", o.ProfileDays, o.Days)
	}
	return o, nil
}

// Study returns the study of a feeder, study.toml at its top, ready for feeder.Open.
// The error says which option is wrong.
func Study(o Options) (fs.FS, error) {
	o, err := o.complete()
	if err != nil {
		return nil, err
	}
	p := newPlan(o)
	if err := p.scale(o); err != nil {
		return nil, fmt.Errorf("synthetic: %w", err)
	}
	out := p.files(o)
	out["profiles/shapes.csv"] = &fstest.MapFile{Data: shapes(o), Mode: 0o666}
	return out, nil
}
