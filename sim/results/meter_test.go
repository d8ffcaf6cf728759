package results

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"
	"time"

	"yearflow/sim/network"

	"gonum.org/v1/gonum/floats/scalar"
)

func aDay(t testing.TB) *tiny {
	start := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	return newTiny(t, start, start.AddDate(0, 0, 1), time.Hour)
}

func randomLevels(r *rand.Rand) map[string]float64 {
	levels := map[string]float64{}
	for _, n := range [...]string{"low", "n1", "n2", "n3", "shop", "src"} {
		levels[n] = 0.92 + 0.14*r.Float64()
		levels[n+" behind"] = 0.02 * r.Float64()
		for _, p := range [...]string{".A", ".B", ".C"} {
			levels[n+p] = 0.01 * r.Float64()
		}
	}
	return levels
}

func TestPowerBalances(t *testing.T) {
	x := aDay(t)
	m := NewMeter(x.net)
	rnd := rand.New(rand.NewPCG(1, 2))
	for k := range 200 {
		s := x.state(randomLevels(rnd), [3]int{k % 16, -k % 16, 3}, k%2 == 0)
		p, q, scale := m.Balance(s)
		// The state fulfils the equations to rounding: 1e-9 is a thousand times looser
		// than what remains and a thousand times tighter than the contract.
		if math.Abs(p) > 1e-9*scale || math.Abs(q) > 1e-9*scale {
			t.Fatalf("state %d: balance is off by %g W, %g var of %g VA", k, p, q, scale)
		}
		// A load that the meter is not told of must show.
		s.Load[1] += 1000
		if p, _, _ := m.Balance(s); math.Abs(p+1000) > 1e-3 {
			t.Fatalf("1 kW more load moves the balance by %g W, want -1000", p)
		}
	}
}

func TestLossesAgreeWithCurrentsAndResistances(t *testing.T) {
	x := aDay(t)
	m := NewMeter(x.net)
	rnd := rand.New(rand.NewPCG(3, 4))
	r := m.NewReading()
	for range 50 {
		s := x.state(randomLevels(rnd), [3]int{5, 0, -7}, true)
		m.Read(s, r)
		// line1: Re Σ conj(I)·Z·I with the currents at its from end (no charging).
		e := x.net.ElementsOf(network.Section, 0)[0]
		z := lineMatrices().Z
		var line float64
		for a := range 3 {
			for b := range 3 {
				line += real(cmplx.Conj(s.Flow[x.net.Offsets[e]+a]) * z[a][b] * 2 * s.Flow[x.net.Offsets[e]+b])
			}
		}
		near(t, "line1", r.loss[0], line, 1e-7)
		// dd has no no-load loss: its windings lose |I|²·R, I the delta's winding currents.
		tx := &x.plan.Model.Transformers[1]
		zb := tx.LowKV * tx.LowKV * 1e6 / (tx.KVA * 1000 / 3)
		var dd float64
		for k := range 3 {
			p, q := k, (k+1)%3
			v := func(node, ph int) complex128 { return s.V[x.net.At[node][ph]] }
			u := (v(2, p)-v(2, q))*complex(0.48/12.47, 0) - (v(4, p) - v(4, q))
			i := u / (complex(tx.R, tx.X) * complex(zb, 0))
			dd += real(i)*real(i)*tx.R*zb + imag(i)*imag(i)*tx.R*zb
		}
		near(t, "dd", r.loss[4], dd, 1e-7)
		// tx: no-load losses move with the square of the delta's voltages.
		var core float64
		for k := range 3 {
			v := cmplx.Abs(s.V[x.net.At[2][k]]-s.V[x.net.At[2][(k+2)%3]]) / 12470
			core += 200 * v * v
		}
		near(t, "tx no-load", r.loss[3], core, 1e-9)
		// reg: 200 W a unit on the source side, 300 W a unit at 100 A on the load side.
		reg := 0.0
		for k, c := range x.net.Couplings {
			v := cmplx.Abs(s.V[c.Terminals[0]]) / (12470 / math.Sqrt(3))
			ratio := 1 + 0.00625*float64(s.Taps[k])
			i := cmplx.Abs(s.Coupling[k]) / ratio
			reg += 200*v*v + 300*i*i/1e4
		}
		near(t, "reg", r.loss[6], reg, 1e-7)
		sum := 0.0
		for _, va := range r.ByKind {
			sum += real(va)
		}
		near(t, "the kinds", sum, real(r.Losses), 1e-12)
		// Capacitor: 100 kvar a phase at nominal, with the square of the voltage.
		var kvar float64
		for k := range 3 {
			v := cmplx.Abs(s.V[x.net.At[1][k]]) / (12470 / math.Sqrt(3))
			kvar += 100 * v * v
		}
		near(t, "capacitor", imag(r.Capacitors)/1000, kvar, 1e-12)
	}
}

func near(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	if !scalar.EqualWithinAbsOrRel(got, want, 1e-9, rel) {
		t.Fatalf("%s: got %.12g, want %.12g (off by %g)", what, got, want, got-want)
	}
}

func TestPlacesThatNothingGroundsAreReportedLineToLine(t *testing.T) {
	x := aDay(t)
	m := NewMeter(x.net)
	var names []string
	for _, p := range m.Points {
		names = append(names, p.Name)
	}
	want := []string{"low.A", "low.B", "low.C", "n1.A", "n1.B", "n1.C", "n2.A", "n2.B", "n2.C", "n3.A", "shop.AB", "shop.BC", "shop.CA", "src.A", "src.B", "src.C"}
	if len(names) != len(want) {
		t.Fatalf("places %v, want %v", names, want)
	}
	for i := range want {
		if names[i] != want[i] {
			t.Fatalf("places %v, want %v", names, want)
		}
	}
	s := x.state(nil, [3]int{}, true)
	// A common shift of all three phases changes no voltage between them.
	for _, u := range x.net.At[4][:3] {
		s.V[u] += 50
	}
	r := m.NewReading()
	m.Read(s, r)
	for i := 10; i < 13; i++ {
		near(t, names[i], r.PU[i], 1, 1e-12)
	}
	if !m.Points[10].HasLoad || m.Points[10].Customers != 1 || m.Points[11].HasLoad {
		t.Errorf("the press stands across shop.AB alone: got %+v, %+v", m.Points[10], m.Points[11])
	}
}

func TestUnbalance(t *testing.T) {
	x := aDay(t)
	m := NewMeter(x.net)
	s := x.state(nil, [3]int{}, true)
	// Line-to-line magnitudes 230, 232, 225 V: mean 229, largest deviation 4, 1.7467 %
	// (hand calculation); the triangle is laid with A at the origin.
	ab, bc, ca := 230.0, 232.0, 225.0
	cx := (ab*ab + ca*ca - bc*bc) / (2 * ab)
	at := x.net.At[0]
	s.V[at[0]], s.V[at[1]], s.V[at[2]] = 0, complex(-ab, 0), complex(-cx, math.Sqrt(ca*ca-cx*cx))
	// The other nodes stay balanced.
	r := m.NewReading()
	m.Read(s, r)
	near(t, "unbalance", r.Unbalance, 100*4.0/229, 1e-9)
	if got := x.plan.Model.Nodes[r.UnbalanceAt].Name; got != "low" {
		t.Errorf("unbalance at %s, want low", got)
	}
	// |V2|/|V1| from three magnitudes (IEC 61000-4-30): β = ΣV⁴/(ΣV²)².
	q := ab*ab + bc*bc + ca*ca
	beta := (ab*ab*ab*ab + bc*bc*bc*bc + ca*ca*ca*ca) / (q * q)
	root := math.Sqrt(3 - 6*beta)
	near(t, "negative sequence", r.NegativeSequence, 100*math.Sqrt((1-root)/(1+root)), 1e-7)
}

func TestLoading(t *testing.T) {
	x := aDay(t)
	m := NewMeter(x.net)
	s := x.state(randomLevels(rand.New(rand.NewPCG(5, 6))), [3]int{-16, 0, 16}, true)
	r := m.NewReading()
	m.Read(s, r)
	byName := map[string]float64{}
	var names []string
	for i, row := range m.loading {
		byName[row.element+"."+row.phase] = r.loading[i]
		names = append(names, row.element+"."+row.phase)
	}
	// line1 lists its phases as BAC: its second terminal is phase A.
	e := x.net.Offsets[x.net.ElementsOf(network.Section, 0)[0]]
	near(t, "line1.A", byName["line1.A"], cmplx.Abs(s.Flow[e+1]), 1e-12)
	near(t, "line1.B", byName["line1.B"], cmplx.Abs(s.Flow[e]), 1e-12)
	// At −16 the load side of a regulator carries 1/0.9 of the source side's current, at +16 less.
	near(t, "reg.A", byName["reg.A"], cmplx.Abs(s.Coupling[0])/0.9, 1e-12)
	near(t, "reg.C", byName["reg.C"], cmplx.Abs(s.Coupling[2]), 1e-12)
	// A bank's loading is its apparent power at the high side, core included.
	var va complex128
	for _, k := range [...]network.Kind{network.Transformer, network.TransformerNoLoad} {
		e := x.net.ElementsOf(k, 0)[0]
		for p := range 3 {
			va += s.V[x.net.Elements[e].Terminals[p]] * cmplx.Conj(s.Flow[x.net.Offsets[e]+p])
		}
	}
	near(t, "tx", byName["tx."], cmplx.Abs(va)/1000, 1e-12)
	if m.loading[0].rating != 340 || m.loading[3].rating != 90 {
		t.Errorf("ratings %g and %g of %v, want the construction's 340 and the section's own 90", m.loading[0].rating, m.loading[3].rating, names)
	}
}

func TestMeterReadsWithoutAllocation(t *testing.T) {
	x := aDay(t)
	m := NewMeter(x.net)
	s := x.state(nil, [3]int{1, 2, 3}, true)
	r := m.NewReading()
	if n := testing.AllocsPerRun(50, func() { m.Read(s, r) }); n != 0 {
		t.Errorf("Read allocates %g times, want 0", n)
	}
}
