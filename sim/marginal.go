package sim

import (
	"fmt"
	"math"

	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
	"yearflow/sim/results"
)

// probes adds to every node of Options.Probes an injection on each of its phases (or
// pairs, where nothing grounds it) that draws nothing until Marginal asks.
func (in *inputs) probes(net *network.Network, nodes []int) {
	for _, n := range nodes {
		node := &net.Model.Nodes[n]
		connection, pairs := feeder.Wye, []feeder.Pair(nil)
		if !node.Grounded {
			connection = feeder.Delta
			for i, p := range node.Phases {
				if q := node.Phases[(i+1)%len(node.Phases)]; q != p && (i+1 < len(node.Phases) || len(node.Phases) == 3) {
					pairs = append(pairs, feeder.Pair{p, q})
				}
			}
		}
		var at []int
		for _, j := range branches(net, n, connection, node.Phases, pairs) {
			// Marked as a generator, it makes no step low by where it stands.
			j.PC, j.QC, j.Generator = 1, 1, true
			at = append(at, len(in.injections))
			in.add(j, driver{-1, -1, -1}, 0, -1, -1)
		}
		in.probeBranches = append(in.probeBranches, at)
	}
}

// Marginal solves one step at held positions, and again with kw of constant power at
// unity power factor added at each of Options.Probes in turn, shared equally over the
// node's phases. It fills dst, by Options.Probes, with the change of the losses of the
// feeder over the power added: kW of losses per kW there, a one-sided difference
//
//	m_i = (Losses(P + kw·e_i) − Losses(P)) / kw
//
// that errs by about half the curvature times kw, a part in ten thousand for 0.1 kW on
// the weakest lateral. All solutions are to the reference tolerance. Other loads answer
// the change of voltage as their ZIP says; devices stand still. A place whose perturbed
// solution fails has NaN. ok is false where the step itself has no solution or is low.
//
// The cost is one solution a probe, from the step's own voltages.
func (e *Engine) Marginal(dst []float64, step int, p Positions, kw float64) (losses float64, ok bool, err error) {
	if len(dst) != len(e.in.probeBranches) {
		return 0, false, fmt.Errorf("marginal losses of %d places asked for, the engine has %d probes", len(dst), len(e.in.probeBranches))
	}
	i, err := e.Solve(step, p)
	if err != nil || i.Status != results.OK {
		return 0, false, err
	}
	meter := e.Meter()
	r := meter.NewReading()
	lost := func() float64 { meter.Read(&e.state, r); return real(r.Losses) / 1000 }
	e.keep()
	if ok, err := e.solve(powerflow.Reference); !ok || err != nil {
		return 0, false, err
	}
	losses = lost()
	e.keep()
	for k, at := range e.in.probeBranches {
		for _, j := range at {
			e.input.Power[j] = complex(1000*kw/float64(len(at)), 0)
		}
		ok, err := e.solve(powerflow.Reference)
		if err != nil {
			return 0, false, err
		}
		dst[k] = math.NaN()
		if ok {
			dst[k] = (lost() - losses) / kw
		}
		for _, j := range at {
			e.input.Power[j] = 0
		}
	}
	return losses, true, nil
}
