package powerflow_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"yearflow/sim/conductor"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

var abc = []feeder.Phase{feeder.A, feeder.B, feeder.C}

// randomFeeder is a small feeder of sections, banks of several connections,
// regulators of every connection, capacitors, switches, loads in wye and delta, and
// in every third case loops.
func randomFeeder(seed uint64) (*feeder.Model, []powerflow.Injection, []complex128) {
	r := rand.New(rand.NewPCG(seed, 7))
	m := &feeder.Model{Frequency: 60}
	nan := math.NaN()
	part := 0
	node := func(kv float64, grounded bool) int {
		m.Nodes = append(m.Nodes, feeder.Node{Name: fmt.Sprintf("n%03d", len(m.Nodes)), Phases: abc, Nominal: kv, Grounded: grounded, Part: part})
		return len(m.Nodes) - 1
	}
	const kv = 12.47
	root := node(kv, true)
	src := feeder.Source{Node: root, Nominal: kv, Voltage: 1.02, Angle: 10 * r.Float64()}
	if seed%2 == 0 {
		src.Z1, src.Z0 = complex(0.1, 0.8), complex(0.2, 1.1)
	}
	m.Sources = []feeder.Source{src}
	for k := range 3 {
		var c conductor.Matrices
		c.N = 3
		for a := range 3 {
			for b := range a + 1 {
				z := complex(0.1+0.05*r.Float64(), 0.3+0.1*r.Float64())
				bb := -4e-7 * r.Float64()
				if a == b {
					z += complex(0.2, 0.4)
					bb = 3e-6
				}
				c.Z[a][b], c.Z[b][a], c.B[a][b], c.B[b][a] = z, z, bb, bb
			}
		}
		m.Constructions = append(m.Constructions, feeder.Construction{Name: fmt.Sprintf("c%d", k), Kind: "matrix", Matrices: c})
	}
	section := func(a, b int) {
		ph := []feeder.Phase{abc[r.IntN(3)], 0, 0}
		ph[1] = (ph[0] + 1) % 3
		ph[2] = (ph[0] + 2) % 3
		m.Sections = append(m.Sections, feeder.Section{Name: fmt.Sprintf("s%03d", len(m.Sections)), From: a, To: b, Phases: ph, LengthKM: 0.1 + r.Float64(), Construction: r.IntN(3)})
	}
	at := root
	for range 4 + r.IntN(5) {
		from := at
		if r.IntN(3) == 0 {
			from = r.IntN(len(m.Nodes))
			for m.Nodes[from].Nominal != kv || !m.Nodes[from].Grounded || m.Nodes[from].Part != 0 {
				from = (from + 1) % len(m.Nodes)
			}
		}
		n := node(kv, true)
		switch r.IntN(6) {
		case 0:
			m.Switches = append(m.Switches, feeder.Switch{Name: fmt.Sprintf("w%d", n), From: from, To: n, Phases: abc, Closed: true})
		case 1:
			reg := feeder.Regulator{Name: fmt.Sprintf("r%d", n), From: from, To: n, Phases: abc, PT: 60, CT: 300, Range: 0.1, Steps: 16, Rating: 300, NoLoadLoss: 50}
			if r.IntN(2) == 0 {
				reg.LoadLoss, reg.Impedance = 500, 0.01
			}
			switch r.IntN(3) {
			case 0:
				for _, p := range abc {
					reg.Units = append(reg.Units, feeder.RegulatorUnit{Phase: p})
				}
			case 1:
				reg.Connection = feeder.RegulatorClosedDelta
				for _, p := range abc {
					reg.Units = append(reg.Units, feeder.RegulatorUnit{Phase: p, Pair: feeder.Pair{p, (p + 1) % 3}})
				}
			case 2:
				reg.Connection = feeder.RegulatorOpenDelta
				reg.Units = []feeder.RegulatorUnit{{Phase: feeder.A, Pair: feeder.Pair{feeder.A, feeder.B}}, {Phase: feeder.C, Pair: feeder.Pair{feeder.C, feeder.B}}}
			}
			m.Regulators = append(m.Regulators, reg)
		default:
			section(from, n)
		}
		at = n
	}
	if seed%3 == 0 {
		section(root, at)
	}
	main := len(m.Nodes)
	connections := []string{"YNyn0", "Dyn1", "Dyn11", "YNd1", "YNd11", "Dd0", "Yd1", "Dyn5", "YNyn6", "Dd4", "YNy0"}
	for k := range 2 {
		from := r.IntN(main)
		c := connections[r.IntN(len(connections))]
		part++
		n := node(4.16, c == "YNyn0" || c == "Dyn1" || c == "Dyn11" || c == "Dyn5" || c == "YNyn6")
		m.Transformers = append(m.Transformers, feeder.Transformer{Name: fmt.Sprintf("t%d", k), From: from, To: n, Phases: abc, KVA: 1000, HighKV: kv, LowKV: 4.16, TapKV: kv * 1.025, Connection: c, R: 0.01, X: 0.06, NoLoadLoss: 1800, Exciting: 0.01})
	}
	m.Capacitors = []feeder.Capacitor{{Name: "k1", Node: r.IntN(main), Phases: abc, KVAR: 300, NominalKV: kv, Closed: true},
		{Name: "k2", Node: r.IntN(main), Connection: feeder.Delta, Pairs: []feeder.Pair{{0, 1}, {1, 2}, {2, 0}}, KVAR: 150, NominalKV: kv, Closed: seed%2 == 1}}
	for i := range m.Transformers {
		m.Transformers[i].Phases = abc
	}
	_ = nan
	var inj []powerflow.Injection
	var power []complex128
	n, err := network.Build(m)
	if err != nil {
		panic(err)
	}
	for i := range m.Nodes {
		for p := range 3 {
			if r.IntN(2) == 0 {
				continue
			}
			j := powerflow.Injection{From: n.At[i][p], To: network.Ground, Nominal: m.Nodes[i].Nominal * 1000 / math.Sqrt(3)}
			if !m.Nodes[i].Grounded || r.IntN(3) == 0 {
				j.To = n.At[i][(p+1)%3]
				j.Nominal *= math.Sqrt(3)
			}
			switch r.IntN(4) {
			case 0:
				j.PZ, j.QZ = 1, 1
			case 1:
				j.PI, j.QI = 1, 1
			case 2:
				j.PC, j.QC = 1, 1
			default:
				j.PZ, j.PI, j.PC, j.QZ, j.QI, j.QC = 0.4, 0.2, 0.4, 1.2, -0.7, 0.5
			}
			inj = append(inj, j)
			power = append(power, complex(20000*r.Float64(), 10000*r.Float64()))
		}
	}
	return m, inj, power
}

// denseSolve solves the same feeder as one bordered dense system,
//
//	[ Y  Cᵀ ] [V]   [I(V)]
//	[ C  0  ] [λ] = [ 0  ]
//
// with rows of fixed voltages replaced by identities, as real 2n × 2n equations by
// gonum's LU, and I(V) written out anew here.
func denseSolve(n *network.Network, inj []powerflow.Injection, power, source []complex128, ratio []float64, closed []bool) ([]complex128, []complex128) {
	u, c := len(n.Unknowns), len(n.Couplings)
	w := u + c
	a := mat.NewDense(2*w, 2*w, nil)
	add := func(i, j int, y complex128) {
		a.Set(i, j, a.At(i, j)+real(y))
		a.Set(i, w+j, a.At(i, w+j)-imag(y))
		a.Set(w+i, j, a.At(w+i, j)+imag(y))
		a.Set(w+i, w+j, a.At(w+i, w+j)+real(y))
	}
	fixed := map[int32]int{}
	for f, x := range n.Fixed {
		fixed[x.Unknown] = f
		add(int(x.Unknown), int(x.Unknown), 1)
	}
	for _, e := range n.Elements {
		if e.Kind == network.Capacitor && !closed[e.Index] {
			continue
		}
		for p, i := range e.Terminals {
			if _, ok := fixed[i]; ok {
				continue
			}
			for q, j := range e.Terminals {
				add(int(i), int(j), e.Y[p*len(e.Terminals)+q])
			}
		}
	}
	for k, cp := range n.Couplings {
		for t, i := range cp.Terminals {
			v := complex(cp.Base[t]+cp.Inverse[t]/ratio[k], 0)
			add(u+k, int(i), v)
			if _, ok := fixed[i]; !ok {
				add(int(i), u+k, v)
			}
		}
	}
	var lu mat.LU
	lu.Factorize(a)
	v := make([]complex128, u)
	lambda := make([]complex128, c)
	b := mat.NewVecDense(2*w, nil)
	x := mat.NewVecDense(2*w, nil)
	for it := range 400 {
		b.Zero()
		put := func(i int32, y complex128) {
			if _, ok := fixed[i]; !ok && i >= 0 {
				b.SetVec(int(i), b.AtVec(int(i))+real(y))
				b.SetVec(w+int(i), b.AtVec(w+int(i))+imag(y))
			}
		}
		for i, f := range fixed {
			b.SetVec(int(i), real(source[f]))
			b.SetVec(w+int(i), imag(source[f]))
		}
		if it > 0 {
			for k, j := range inj {
				d := v[j.From]
				if j.To >= 0 {
					d -= v[j.To]
				}
				m := cmplx.Abs(d) / j.Nominal
				f := func(z, i, p float64) float64 {
					if m < 0.7 {
						return (z*0.49 + i*0.7 + p) * m * m / 0.49
					}
					return z*m*m + i*m + p
				}
				s := complex(real(power[k])*f(j.PZ, j.PI, j.PC), imag(power[k])*f(j.QZ, j.QI, j.QC))
				i := cmplx.Conj(s / d)
				put(j.From, -i)
				put(j.To, i)
			}
		}
		if err := lu.SolveVecTo(x, false, b); err != nil {
			if _, near := err.(mat.Condition); !near {
				panic(err)
			}
		}
		worst := 0.0
		for i := range v {
			y := complex(x.AtVec(i), x.AtVec(w+i))
			worst = math.Max(worst, cmplx.Abs(y-v[i])/n.Unknowns[i].Nominal)
			v[i] = y
		}
		for k := range lambda {
			lambda[k] = complex(x.AtVec(u+k), x.AtVec(w+u+k))
		}
		if worst < 1e-13 {
			break
		}
	}
	return v, lambda
}

func sources(n *network.Network) []complex128 {
	out := make([]complex128, len(n.Fixed))
	for f, x := range n.Fixed {
		s := n.Model.Sources[x.Source]
		out[f] = cmplx.Rect(s.Voltage*s.Nominal*1000/math.Sqrt(3), (s.Angle-120*float64(x.Phase))*math.Pi/180)
	}
	return out
}

// The same equations by a general-purpose dense solver (gonum's LU): 500 seeded
// radial and meshed feeders, voltages within 1e-9 p.u., currents of regulators and
// switches too, by the fixed point and by Newton's method.
func TestDenseSolverAgrees(t *testing.T) {
	worst := 0.0
	for seed := range uint64(500) {
		n, s, inj, power := randomSolver(t, seed)
		r := rand.New(rand.NewPCG(seed, 9))
		ratio := randomRatios(r, n)
		closed := []bool{r.IntN(2) == 0, r.IntN(2) == 0}
		if err := s.SetDevices(ratio, closed); err != nil {
			t.Fatal(err)
		}
		in := &powerflow.Input{Source: sources(n), Power: power}
		want, lambda := denseSolve(n, inj, power, in.Source, ratio, closed)
		out := s.NewSolution()
		for _, path := range []powerflow.Path{powerflow.FixedPoint, powerflow.Newton} {
			if !s.SolveBy(path, in, powerflow.Reference, out) {
				t.Fatalf("seed %d: %v found no solution", seed, path)
			}
			for u := range want {
				d := cmplx.Abs(out.V[u]-want[u]) / n.Unknowns[u].Nominal
				if worst = math.Max(worst, d); d > 1e-9 {
					t.Fatalf("seed %d, %v, %s: got %v want %v, %g p.u. apart", seed, path, n.Unknowns[u].Name, out.V[u], want[u], d)
				}
			}
			flow := make([]complex128, n.Offsets[len(n.Elements)])
			own := make([]complex128, len(n.Couplings))
			src := make([]complex128, len(n.Fixed))
			s.Flows(flow, out.V)
			s.Couplings(own, src, in, out.V, flow)
			for k := range own {
				if d := cmplx.Abs(own[k] - lambda[k]); d > 1e-5 {
					t.Errorf("seed %d, %v, coupling %d: current %v, want %v", seed, path, k, own[k], lambda[k])
				}
			}
		}
	}
	t.Logf("largest difference %.2g p.u.", worst)
}

// randomSolver is the solver of a feeder of chance, with its injections and their powers.
func randomSolver(t *testing.T, seed uint64) (*network.Network, *powerflow.Solver, []powerflow.Injection, []complex128) {
	t.Helper()
	m, inj, power := randomFeeder(seed)
	n, err := network.Build(m)
	if err != nil {
		t.Fatal(err)
	}
	s, err := powerflow.New(n, inj)
	if err != nil {
		t.Fatalf("seed %d: %v", seed, err)
	}
	return n, s, inj, power
}

// randomRatios are those of couplings whose units stand at taps of chance.
func randomRatios(r *rand.Rand, n *network.Network) []float64 {
	ratio := make([]float64, len(n.Couplings))
	for k, c := range n.Couplings {
		ratio[k] = 1
		if c.Unit >= 0 {
			ratio[k] = 1 + 0.00625*float64(r.IntN(33)-16)
		}
	}
	return ratio
}
