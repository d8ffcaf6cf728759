package results

import (
	"math/rand/v2"
	"path/filepath"
	"syscall"
	"testing"
	"time"

	"yearflow/sim/feeder"
	"yearflow/sim/powerflow"
	"yearflow/sim/powerflow/vector"
	"yearflow/sim/synthetic"
)

// lanesOf packs states, one a lane from a first one on. What is in the other lanes must
// enter nothing.
func lanesOf(states []*State, first int, other complex128) *Lanes {
	s := states[0]
	l := &Lanes{V: vector.Make(len(s.V)), Slot: make([]int32, len(s.V)), Flow: vector.Make(len(s.Flow)), Coupling: vector.Make(len(s.Coupling)),
		Source: vector.Make(3 * len(s.Source)), Taps: s.Taps, Closed: s.Closed}
	for _, x := range [][]float64{l.V, l.Flow, l.Coupling, l.Source} {
		for i := range len(x) / vector.Width {
			for k := range vector.Lanes {
				vector.Put(x, i, k, other)
			}
		}
	}
	for x := range vector.Lanes {
		l.Load[x], l.Generation[x] = real(other), real(other)
	}
	for u := range l.Slot {
		l.Slot[u] = int32((u + 3) % len(l.Slot)) // somewhere else
	}
	for k, s := range states {
		x := (first + k) % vector.Lanes
		for u, v := range s.V {
			vector.Put(l.V, int(l.Slot[u]), x, v)
		}
		for i, v := range s.Flow {
			vector.Put(l.Flow, i, x, v)
		}
		for i, v := range s.Coupling {
			vector.Put(l.Coupling, i, x, v)
		}
		for i := range s.Source {
			for p, v := range s.Source[i] {
				vector.Put(l.Source, 3*i+p, x, v)
			}
		}
		l.Load[x], l.Generation[x] = 0, 0
		for _, va := range s.Load {
			l.Load[x] += real(va)
		}
		for _, va := range s.Generation {
			l.Generation[x] += real(va)
		}
	}
	return l
}

// solved are states of the synthetic feeder S, solved at loads about a level.
func solved(tb testing.TB, n int, spread float64) (*Plan, []*State) {
	tb.Helper()
	study, err := synthetic.Study(synthetic.S())
	if err != nil {
		tb.Fatal(err)
	}
	st, err := feeder.Open(study, "")
	if err != nil {
		tb.Fatal(err)
	}
	c, err := synthetic.NewCircuit(st)
	if err != nil {
		tb.Fatal(err)
	}
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	set := st.Settings
	set.Period = feeder.Period{Start: start.UnixNano(), End: start.AddDate(1, 0, 0).UnixNano(), Step: int64(time.Second), Zone: time.UTC}
	set.Run = feeder.RunSettings{Voltages: "none", Log: int64(time.Hour)}
	p := &Plan{Model: st.Model, Settings: &set, Network: c.Net, Case: "base"}
	var taps int
	for i := range st.Model.Regulators {
		for range st.Model.Regulators[i].Units {
			p.TapNames = append(p.TapNames, "unit")
			p.Devices = append(p.Devices, Device{Kind: TapDevice, Name: st.Model.Regulators[i].Name, Units: []int{taps}})
			taps++
		}
	}
	for i := range st.Model.Capacitors {
		p.Devices = append(p.Devices, Device{Kind: CapacitorDevice, Name: st.Model.Capacitors[i].Name, Index: i})
	}
	r := rand.New(rand.NewPCG(5, 5))
	var states []*State
	out := c.Solver.NewSolution()
	for k := range n {
		m := make([]float64, synthetic.Shapes)
		for i := range m {
			m[i] = 0.5 + spread*r.NormFloat64()
		}
		in := c.Input(m)
		if k == 0 {
			if !c.Settle(in, out) {
				tb.Fatal("the feeder does not settle")
			}
		} else if !c.Solver.Solve(in, nil, powerflow.Contract, out) {
			tb.Fatal("no solution")
		}
		states = append(states, stateOf(c, in, out, taps))
	}
	return p, states
}

// stateOf measures a solution.
func stateOf(c *synthetic.Circuit, in *powerflow.Input, out *powerflow.Solution, taps int) *State {
	n, m := c.Net, c.Net.Model
	s := &State{V: append([]complex128(nil), out.V...), Flow: make([]complex128, n.Offsets[len(n.Elements)]), Coupling: make([]complex128, len(n.Couplings)),
		Source: make([][3]complex128, len(m.Sources)), Load: make([]complex128, 1), Generation: make([]complex128, len(m.Generators)),
		Taps: make([]int, taps), Closed: make([]bool, len(m.Capacitors))}
	source, drawn := make([]complex128, len(n.Fixed)), make([]complex128, len(c.Power))
	c.Solver.Flows(s.Flow, s.V)
	c.Solver.Couplings(s.Coupling, source, in, s.V, s.Flow)
	c.Solver.Drawn(drawn, in, s.V)
	for f, x := range n.Fixed {
		s.Source[x.Source][x.Phase] = source[f]
	}
	for _, va := range drawn {
		s.Load[0] += va
	}
	return s
}

// processorTime is that of this process, ns: what others do meanwhile does not count.
func processorTime(b *testing.B) int64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		b.Fatal(err)
	}
	return u.Utime.Nano() + u.Stime.Nano()
}

// BenchmarkQuiet takes eight steps of the feeder S at a time: voltages that hardly move
// from step to step, as between two rows of inputs, and fresh ones every step.
func BenchmarkQuiet(b *testing.B) {
	for _, kind := range []struct {
		name   string
		spread float64
	}{{"smooth", 1e-6}, {"noise", 0.03}} {
		b.Run(kind.name, func(b *testing.B) {
			p, states := solved(b, 64, kind.spread)
			var lanes []*Lanes
			for k := 0; k < len(states); k += vector.Lanes {
				lanes = append(lanes, lanesOf(states[k:k+vector.Lanes], 0, 0))
				lanes[k/vector.Lanes].Slot = lanes[0].Slot
			}
			for _, to := range []string{"writer", "totals", "step by step"} {
				b.Run(to, func(b *testing.B) {
					w, err := create(filepath.Join(b.TempDir(), "base"), p, 0)
					if err != nil {
						b.Fatal(err)
					}
					defer w.Abort()
					totals := NewTotals(p)
					q := &Quiet{Step: p.Settings.Period.Step, Count: vector.Lanes, Devices: make([]DeviceState, len(p.Devices)), Solver: "lanes"}
					at, k := p.Settings.Period.Start, 0
					b.ReportAllocs()
					spent := processorTime(b)
					for b.Loop() {
						q.Start, q.State = at, lanes[k%len(lanes)]
						switch to {
						case "writer":
							err = w.Quiet(q)
						case "totals":
							err = totals.Quiet(q)
						default:
							for i := range vector.Lanes {
								from, s := at+int64(i)*q.Step, states[(k*vector.Lanes+i)%len(states)]
								w.Interval(&Interval{Start: from, End: from + q.Step, Settled: true, State: s, Devices: q.Devices})
								err = w.Step(&Step{Start: from, End: from + q.Step, Last: s})
							}
						}
						if err != nil {
							b.Fatal(err)
						}
						at, k = at+vector.Lanes*q.Step, k+1
					}
					b.ReportMetric(float64(processorTime(b)-spent)/float64(b.N)/vector.Lanes, "ns/step")
				})
			}
		})
	}
}
