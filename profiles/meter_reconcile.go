package profiles

import (
	"errors"
	"fmt"
	"math"
	"sort"
	"time"
)

// Reconcile makes a profile in kW of a load that is known by its energy, the shape of
// its class and, if peakKW is not zero, its peak. monthlyKWh has the energy of each
// whole local month ("2025-01") that the axis touches, or under "" the energy of the
// axis. The profile has the axis's step and covers it; where months are given it covers
// whole months, so that the energy of a month and the peak are those of the whole month.
//
// In each month m, with the shape's step means s ≥ 0, their highest S and the peak P,
//
//	p = a·s                        where no peak is given or the month's need not be moved,
//	p = P·(s/S + λ·(1 − s/S))      where a·S would exceed P: flatter, 0 ≤ λ ≤ 1,
//	p = P·(s/S)^γ                  in the month of the highest a·S, if it stays below P: sharper, γ > 1,
//
// with a, λ or γ from the month's energy. All three rise with s, so that the order of
// hours stays the shape's. Energies are kept to 1e-9 and the highest step is P exactly.
//
// It fails where a month's energy is missing, not finite or negative, where the shape
// is negative or nothing in a month that has energy, and where the energy cannot be had
// under the peak: more than P at every step, or less than P at the shape's highest
// steps alone.
func Reconcile(shape *Series, monthlyKWh map[string]float64, peakKW float64, a Axis) (*Series, error) {
	if !(peakKW >= 0) || math.IsInf(peakKW, 0) {
		return nil, fmt.Errorf("the peak is %v kW; want a number that is not negative, or zero for none", peakKW)
	}
	if a.Zone == nil {
		a.Zone = time.UTC
	}
	whole, isWhole := monthlyKWh[""]
	if isWhole && len(monthlyKWh) > 1 {
		return nil, errors.New("the energy is given for the period and by month; give one of them")
	}
	if !isWhole && a.Steps() > 0 {
		a = wholeMonths(a)
	}
	sampler, err := NewSampler(a, []*Series{shape})
	if err != nil {
		return nil, fmt.Errorf("shape %q: %w", shape.Name, err)
	}
	values := make([]float64, a.Steps())
	var months []monthly
	for k := range values {
		sampler.Step(values[k:k+1], k)
		from, to := a.Bounds(k)
		if !(values[k] >= 0) {
			return nil, fmt.Errorf("shape %q is %g at %s; a shape must not be negative", shape.Name, values[k], Format(from, a.Zone))
		}
		name := ""
		if !isWhole {
			name = Month(from, a.Zone)
		}
		if n := len(months); n == 0 || months[n-1].name != name {
			energy, ok := monthlyKWh[name]
			if isWhole {
				energy, ok = whole, true
			}
			if !ok {
				return nil, fmt.Errorf("the energy of %s is missing; want one for each month of the period, whole months", name)
			}
			months = append(months, monthly{name: name, kwh: energy, last: float64(to-from) / float64(hour)})
		}
		m := &months[len(months)-1]
		m.p = values[k-len(m.p) : k+1]
		m.last = float64(to-from) / float64(hour)
	}
	if err := fitMonths(months, peakKW, float64(a.Step)/float64(hour)); err != nil {
		return nil, fmt.Errorf("shape %q: %w", shape.Name, err)
	}
	g := grid{start: a.Start, stamp: a.Start, step: a.Step, n: len(values), zone: a.Zone}
	return newSeries(shape.Name, unit{"kW", 0, 1, 1}, shape.Pos, g, values), nil
}

// wholeMonths widens an axis to whole local months.
func wholeMonths(a Axis) Axis {
	first := func(t int64, ahead int) int64 {
		y, m, _ := civilDate(int64(Day(t, a.Zone)))
		m += ahead
		if m > 12 {
			y, m = y+1, 1
		}
		return DayStart(int(dayNumber(y, m, 1)), a.Zone)
	}
	a.Start, a.End = first(a.Start, 0), first(a.End-1, 1)
	return a
}

// monthly is a month of the profile, which is made in place of its shape.
type monthly struct {
	name string
	kwh  float64
	p    []float64
	last float64 // hours of its last step; the others have the axis's
	top  float64 // of the shape
}

func (m *monthly) String() string {
	if m.name == "" {
		return "the period"
	}
	return m.name
}

// energy returns the sum of f over the month, in hours × f.
func (m *monthly) energy(step float64, f func(s float64) float64) float64 {
	var sum wide
	for k, s := range m.p {
		w := step
		if k == len(m.p)-1 {
			w = m.last
		}
		sum.addProduct(w, f(s))
	}
	return sum.hi + sum.lo
}

// fitMonths turns shapes into profiles.
func fitMonths(months []monthly, peak, step float64) error {
	highest := -1
	for i := range months {
		m := &months[i]
		if !(m.kwh >= 0) || math.IsInf(m.kwh, 0) {
			return fmt.Errorf("the energy of %s is %g kWh; want a number that is not negative", m, m.kwh)
		}
		for _, s := range m.p {
			m.top = max(m.top, s)
		}
		shape := m.energy(step, func(s float64) float64 { return s })
		if m.kwh > 0 && shape == 0 {
			return fmt.Errorf("the shape is zero all through %s, which has %g kWh", m, m.kwh)
		}
		factor := 0.0
		if m.kwh > 0 {
			factor = m.kwh / shape
		}
		for k := range m.p {
			m.p[k] *= factor
		}
		m.top *= factor
		if highest < 0 || m.top > months[highest].top {
			highest = i
		}
	}
	if peak == 0 || highest < 0 {
		return nil
	}
	if months[highest].top < peak {
		return months[highest].sharpen(peak, step)
	}
	for i := range months {
		if m := &months[i]; m.top >= peak {
			if err := m.flatten(peak, step); err != nil {
				return err
			}
		}
	}
	return nil
}

// flatten lowers the month's peak and keeps its energy.
func (m *monthly) flatten(peak, step float64) error {
	hours := m.energy(step, func(float64) float64 { return 1 })
	if m.kwh > peak*hours*(1+1e-12) {
		return fmt.Errorf("%s has %.6g kWh, which is more than its peak of %g kW all the time (%.6g kWh)", m, m.kwh, peak, peak*hours)
	}
	top := m.top
	low := m.kwh / top // the energy of s/S, in hours
	full := hours - low
	lambda := 0.0
	if full > 0 {
		lambda = min(1, (m.kwh/peak-low)/full)
	}
	for k, s := range m.p {
		r := s / top
		m.p[k] = peak * (r + lambda*(1-r))
		if s == top {
			m.p[k] = peak
		}
	}
	return nil
}

// sharpen raises the month's peak and keeps its energy: γ by bisection, and what is left
// of the energy from the steps below the peak.
func (m *monthly) sharpen(peak, step float64) error {
	top := m.top
	if top == 0 {
		return fmt.Errorf("no month has energy, and the peak is %g kW", peak)
	}
	hours := m.energy(step, func(s float64) float64 {
		if s == top {
			return 1
		}
		return 0
	})
	least := peak * hours
	if m.kwh < least {
		return fmt.Errorf("%s has %.6g kWh, which is less than its peak of %g kW for the %.6g h of the shape's highest value (%.6g kWh)", m, m.kwh, peak, hours, least)
	}
	power := func(gamma float64) func(float64) float64 {
		return func(s float64) float64 {
			if s == top {
				return peak
			}
			return peak * math.Pow(s/top, gamma)
		}
	}
	low, high := 1.0, 2.0
	for m.energy(step, power(high)) > m.kwh && high < 1e9 {
		low, high = high, 2*high
	}
	for range 80 {
		if middle := (low + high) / 2; m.energy(step, power(middle)) > m.kwh {
			low = middle
		} else {
			high = middle
		}
	}
	f := power(high)
	rest := 1.0
	if below := m.energy(step, f) - least; below > 0 {
		rest = (m.kwh - least) / below
	}
	for k, s := range m.p {
		m.p[k] = f(s)
		if s != top {
			m.p[k] = min(m.p[k]*rest, peak)
		}
	}
	return nil
}

// MonthsOf returns the names of the months that an axis touches, sorted.
func MonthsOf(a Axis) []string {
	var out []string
	for t := a.Start; t < a.End; {
		out = append(out, Month(t, a.Zone))
		whole := wholeMonths(Axis{Start: t, End: t + 1, Step: 1, Zone: a.Zone})
		t = whole.End
	}
	sort.Strings(out)
	return out
}
