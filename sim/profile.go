package sim

import (
	"fmt"

	"yearflow/profiles"
)

// Profile returns the means of a profile over the steps of the period, and its unit: a
// price that [prices] names, or the demand whose peak is charged.
func (e *Engine) Profile(name string) (values []float64, unit string, err error) {
	s, ok := e.in.set.Lookup(name)
	if !ok {
		return nil, "", fmt.Errorf("no profile named %q", name)
	}
	sampler, err := profiles.NewSampler(e.in.axis, []*profiles.Series{s})
	if err != nil {
		return nil, "", err
	}
	values = make([]float64, e.in.axis.Steps())
	one := make([]float64, 1)
	for i := range values {
		sampler.Step(one, i)
		values[i] = one[0]
	}
	return values, s.Unit, nil
}

// Bounds returns the start and the end of a step, ns.
func (e *Engine) Bounds(step int) (start, end int64) { return e.in.axis.Bounds(step) }
