package results

import "math"

// AllocationStatus says how a measured figure is met.
type AllocationStatus uint8

// A measured figure is met to 0.1 % of its peak, or else: what is left for the loads is
// not positive (more is generated and metered than the measurement leaves room for);
// nothing stands on the phase that could take it; the factors did not arrive; they
// arrived, and something moved afterwards in the same step; or the power flow has no
// solution.
const (
	AllocationMet AllocationStatus = iota
	AllocationNoRemainder
	AllocationNoLoad
	AllocationNotMet
	AllocationMoved
	AllocationUnsolved
	allocationStatuses
)

// String returns the word of allocation.csv.
func (s AllocationStatus) String() string {
	return [...]string{"met", "remainder not positive", "no load", "not met", "moved in the step", "unsolved"}[s]
}

// AllocationStep is how what was measured is met at the end of a step.
type AllocationStep struct {
	// Worst is the largest distance from a measured figure, in shares of its peak; NaN
	// where there is no solution.
	Worst float64
	// Shared and Loads are the real power of the loads that share what was measured, and of
	// all loads, W at nominal voltage.
	Shared, Loads float64
	// Rows are the figures that are not met, in the order of quantities and phases. They
	// are used again at the next step.
	Rows []AllocationRow
}

// AllocationRow is a row of allocation.csv.
type AllocationRow struct {
	Quantity, Phase             string // kW, kvar or A; phase blank: the total of the phases
	Measured, Solved, Remainder float64
	Factors                     [3]float64 // A, B, C; the first alone for a total; NaN: none
	Total                       bool
	Status                      AllocationStatus
}

// allocationCounts are steps by what happened in them; a step counts once for each.
type allocationCounts struct {
	steps, listed int
	by            [allocationStatuses]int
	worst         float64 // of the steps that are not listed
	of, loads     float64 // sums over steps of AllocationStep.Shared and Loads
	at            int64
}

// allocationHeader is that of allocation.csv; nothing where nothing is shared.
func (w *Writer) allocationHeader() []string {
	if !w.plan.Allocation {
		return nil
	}
	return []string{"time", "quantity", "phase", "measured", "solved", "remainder", "factor A", "factor B", "factor C", "status"}
}

// writeAllocation lists the figures that a step does not meet.
func (w *Writer) writeAllocation(s *Step) error {
	a, c := s.Allocation, &w.shared
	c.steps++
	c.of += a.Shared
	c.loads += a.Loads
	if len(a.Rows) == 0 {
		if a.Worst > c.worst {
			c.worst, c.at = a.Worst, s.Start
		}
		return nil
	}
	c.listed++
	var seen [allocationStatuses]bool
	f := w.allocation
	for i := range a.Rows {
		r := &a.Rows[i]
		if !seen[r.Status] {
			seen[r.Status] = true
			c.by[r.Status]++
		}
		f.row = w.clock.append(f.row, s.Start)
		f.next(r.Quantity)
		f.next(r.Phase)
		for _, x := range [...]float64{r.Measured, r.Solved, r.Remainder, r.Factors[0], r.Factors[1], r.Factors[2]} {
			f.figure(x)
		}
		f.next(r.Status.String())
		if err := f.end(); err != nil {
			return err
		}
	}
	return nil
}

// allocation writes how often what was measured is met.
func (s *summary) allocation() {
	c := &s.w.shared
	s.count("allocation steps met", c.steps-c.listed)
	s.count("allocation steps listed", c.listed)
	for k := AllocationNoRemainder; k < allocationStatuses; k++ {
		s.count("allocation steps "+k.String(), c.by[k])
	}
	worst := 100 * c.worst
	if c.steps == c.listed {
		worst = math.NaN()
	}
	s.figure("largest allocation error of a step met", worst, "%")
	s.figure("allocated share of load energy", share(c.of, c.loads), "%")
}
