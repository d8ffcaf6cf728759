package synthetic

import (
	"fmt"
	"math"
	"math/cmplx"
	"strconv"
	"strings"

	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

// Circuit is a feeder of this package ready to be solved instant by instant: its
// network, its reference solver and its loads.
type Circuit struct {
	Study  *feeder.Study
	Net    *network.Network
	Solver *powerflow.Solver
	// Power is what each injection of the solver draws at nominal voltage and shape 1,
	// VA; Shape is the position of the shape that it follows.
	Power []complex128
	Shape []int
	// Source are the voltages that the sources hold, V, by Network.Fixed.
	Source []complex128
}

// NewCircuit makes the circuit of a study that Study returned.
func NewCircuit(st *feeder.Study) (*Circuit, error) {
	n, err := network.Build(st.Model)
	if err != nil {
		return nil, err
	}
	c := &Circuit{Study: st, Net: n}
	var js []powerflow.Injection
	for i := range st.Model.Loads {
		l := &st.Model.Loads[i]
		shape, err := strconv.Atoi(strings.TrimPrefix(l.Profile, shapePrefix))
		if err != nil || shape < 1 || shape > Shapes {
			return nil, fmt.Errorf("%v: load %q follows %q, which is no shape of a synthetic feeder", l.At, l.Name, l.Profile)
		}
		at, ll := n.At[l.Node], st.Model.Nodes[l.Node].Nominal*1000
		first := len(js)
		for _, p := range l.Phases {
			js = append(js, powerflow.Injection{From: at[p], To: network.Ground, Nominal: n.Unknowns[at[p]].Nominal})
		}
		for _, p := range l.Pairs {
			js = append(js, powerflow.Injection{From: at[p[0]], To: at[p[1]], Nominal: ll})
		}
		va := complex(l.KW, l.KVAR) * complex(1000/float64(len(js)-first), 0)
		for k := first; k < len(js); k++ {
			j, z := &js[k], l.ZIP
			j.PZ, j.PI, j.PC, j.QZ, j.QI, j.QC, j.Size = z.PZ, z.PI, z.PP, z.QZ, z.QI, z.QP, cmplx.Abs(va)
			c.Power, c.Shape = append(c.Power, va), append(c.Shape, shape-1)
		}
	}
	for _, f := range n.Fixed {
		s := &st.Model.Sources[f.Source]
		angle := s.Angle*math.Pi/180 - 2*math.Pi/3*float64(f.Phase)
		c.Source = append(c.Source, cmplx.Rect(s.Voltage*s.Nominal*1000/math.Sqrt(3), angle))
	}
	c.Solver, err = powerflow.New(n, js)
	return c, err
}

// Input returns the input of an instant at which the shapes stand at the given
// multipliers.
func (c *Circuit) Input(multipliers []float64) *powerflow.Input {
	in := &powerflow.Input{Source: c.Source, Power: make([]complex128, len(c.Power))}
	for k, va := range c.Power {
		in.Power[k] = va * complex(multipliers[c.Shape[k]], 0)
	}
	return in
}

// Level returns the input of an instant at which every load draws the same part of its
// nominal power.
func (c *Circuit) Level(part float64) *powerflow.Input {
	m := make([]float64, Shapes)
	for i := range m {
		m[i] = part
	}
	return c.Input(m)
}

// maxTaps is how many taps a regulator goes each way.
const maxTaps = 16

// Settle raises the taps of the regulators from neutral until no unit is below its band
// or none can go further, and solves. It reports whether there is a solution.
// Capacitors stay as the tables have them.
func (c *Circuit) Settle(in *powerflow.Input, out *powerflow.Solution) bool {
	m := c.Net.Model
	ratio, taps := make([]float64, len(c.Net.Couplings)), make([]int, len(c.Net.Couplings))
	closed := make([]bool, len(m.Capacitors))
	for i := range closed {
		closed[i] = m.Capacitors[i].Closed
	}
	for {
		for k := range ratio {
			ratio[k] = 1
			if cp := &c.Net.Couplings[k]; cp.Unit >= 0 {
				r := &m.Regulators[cp.Index]
				ratio[k] = 1 / (1 - r.Range/float64(r.Steps)*float64(taps[k])) // type B
			}
		}
		if c.Solver.SetDevices(ratio, closed) != nil || !c.Solver.Solve(in, nil, powerflow.Contract, out) {
			return false
		}
		moved := false
		for k := range taps {
			cp := &c.Net.Couplings[k]
			if cp.Unit < 0 || taps[k] == maxTaps {
				continue
			}
			r := &m.Regulators[cp.Index]
			u := &r.Units[cp.Unit]
			at := c.Net.At[r.To][u.Phase]
			tap := c.Net.Unknowns[at].Nominal * r.Range / float64(r.Steps) / r.PT
			if short := u.Settings.Set - u.Settings.Bandwidth/2 - cmplx.Abs(out.V[at])/r.PT; short > 0 {
				// Half the way at once, so that the units beyond do not go too far.
				taps[k] = min(maxTaps, taps[k]+max(1, int(short/tap/2)))
				moved = true
			}
			if cp.Unit == len(r.Units)-1 && moved {
				break // from the source outwards
			}
		}
		if !moved {
			return true
		}
	}
}

// Lowest returns the lowest voltage to ground of the nodes, p.u.
func (c *Circuit) Lowest(v []complex128) float64 {
	low := math.Inf(1)
	for u := range c.Net.Unknowns {
		if x := &c.Net.Unknowns[u]; x.Node >= 0 {
			low = min(low, cmplx.Abs(v[u])/x.Nominal)
		}
	}
	return low
}
