package powerflow

// Term is one part of a voltage in terms of the independent ones: Coef·x[Col], or
// Coef·Source[−1−Col] (Network.Fixed) where Col is below zero.
type Term struct {
	Col  int32
	Coef float64
}

// Reduced is the system that a Solver solves for one state of the devices,
//
//	Y·x = Pull + Tᵀ·J(T·x),
//
// x the N independent voltages in V, J the currents, A, that the injections put into
// the unknowns of the network. It is for other ways of solving the same system, which
// are held against the Solver's.
type Reduced struct {
	N int
	// Rows, Cols, Values are Y: each entry of the lower triangle that is not zero, and
	// the whole diagonal. Rows[k] ≥ Cols[k]; Y is symmetric, not Hermitian.
	Rows, Cols []int32
	Values     []complex128 // S
	Pull       []complex128 // A, what the fixed voltages drive into each independent one
	// Terms are T, by unknown of the network: V[u] = Σ Coef·x[Col] + Σ Coef·Source.
	Terms [][]Term
}

// Reduced returns the system at the devices set last (SetDevices) and the sources of
// in, independent voltages numbered in the order of the network's unknowns. The caller
// owns the result. It costs as much as an assembly and allocates: once a device state,
// not once an instant.
func (s *Solver) Reduced(in *Input) *Reduced {
	_ = s.ready()
	s.setPull(in)
	n, order := s.red.free, s.Order()
	r := &Reduced{N: n, Pull: make([]complex128, n), Terms: make([][]Term, len(s.red.terms))}
	for k, c := range order {
		r.Pull[c] = s.pull[k]
		r.Rows, r.Cols, r.Values = append(r.Rows, c), append(r.Cols, c), append(r.Values, s.y[k])
	}
	for k, c := range order {
		for slot := s.pat.start[k]; slot < s.pat.start[k+1]; slot++ {
			// The pattern is that of the factor; what only elimination fills is zero here.
			if y := s.y[slot]; y != 0 {
				d := order[s.pat.row[slot-int32(n)]]
				r.Rows, r.Cols, r.Values = append(r.Rows, max(c, d)), append(r.Cols, min(c, d)), append(r.Values, y)
			}
		}
	}
	for u, terms := range s.red.terms {
		for _, t := range terms {
			r.Terms[u] = append(r.Terms[u], Term{t.col, s.red.value(t)})
		}
	}
	return r
}

// Order returns the elimination order of the solver's factor: the k-th entry is the
// independent voltage that is eliminated k-th. It does not change with the devices.
func (s *Solver) Order() []int32 {
	order := make([]int32, s.red.free)
	for c, k := range s.pat.place {
		order[k] = int32(c)
	}
	return order
}
