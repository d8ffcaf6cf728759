package devices

import (
	"math"
	"math/cmplx"
	"testing"

	"gonum.org/v1/gonum/floats/scalar"
)

// polar returns a phasor from its magnitude and its angle in degrees.
func polar(r, degrees float64) complex128 { return cmplx.Rect(r, degrees*math.Pi/180) }

func agree(got, want, tolerance float64) bool {
	return scalar.EqualWithinAbsOrRel(got, want, tolerance, tolerance)
}

// The ratio of both types at the ends of the range, and the 32 steps of 5/8 % of
// IEEE C57.15; Kersting, Distribution System Modeling and Analysis, ch. 7.
func TestRatio(t *testing.T) {
	a, b := sheet(), sheet()
	b.TypeB = true
	for _, tt := range []struct {
		tap  int
		a, b float64
	}{{16, 1.10, 1.1111}, {-16, 0.90, 0.9091}, {0, 1, 1}, {1, 1.00625, 1 / 0.99375}, {13, 1.08125, 1 / 0.91875}} {
		if got := a.Ratio(tt.tap); !agree(got, tt.a, 1e-4) {
			t.Errorf("type A at %d: %v, want %v", tt.tap, got, tt.a)
		}
		if got := b.Ratio(tt.tap); !agree(got, tt.b, 1e-4) {
			t.Errorf("type B at %d: %v, want %v", tt.tap, got, tt.b)
		}
	}
}

// Kersting ch. 7, line-drop compensator example (values recalled, reproduced by hand):
// a line of 0.3 + j0.9 ohm, PT 20, CT 700:5 needs R' + jX' = z·CT/PT = 10.5 + j31.5 V;
// 2,500 kVA at 0.9 lagging on 4.16 kV draws 346.97 A ∠−25.84°; the relay sees 109.24 V,
// and (119 − 109.24)/0.75 = 13.02 tells 13 raises. At 13 raises the load centre has
// 2412.8 V by type B (120.64 V at the relay) and 119.72 V by type A.
func TestLineDropExample(t *testing.T) {
	c := sheet()
	c.PT, c.CT = 20, 700
	c.R, c.X = 0.3*c.CT/c.PT, 0.9*c.CT/c.PT
	if !agree(c.R, 10.5, 1e-12) || !agree(c.X, 31.5, 1e-12) {
		t.Fatalf("R' + jX' = %v + j%v V, want 10.5 + j31.5", c.R, c.X)
	}
	vs := complex(4160/math.Sqrt(3), 0)
	i := polar(2500/(math.Sqrt(3)*4.16), -math.Acos(0.9)*180/math.Pi)
	if !agree(cmplx.Abs(i), 346.97, 1e-4) {
		t.Fatalf("the current is %v A, want 346.97", cmplx.Abs(i))
	}
	r := c.Measure(vs, i)
	if !agree(r.Relay, 109.24, 5e-4) || !agree(r.Local, 120.089, 1e-4) {
		t.Errorf("local %v, relay %v V, want 120.089 and 109.24", r.Local, r.Relay)
	}
	// The relay sees the voltage of the load centre.
	if want := cmplx.Abs(vs-(0.3+0.9i)*i) / 20; !agree(r.Relay, want, 1e-12) {
		t.Errorf("relay %v V, the load centre has %v V", r.Relay, want)
	}
	if raises := (119 - r.Relay) / 0.75; math.Floor(raises) != 13 || !agree(raises, 13.02, 1e-3) {
		t.Errorf("%v raises, want 13.02", raises)
	}
	for _, tt := range []struct {
		typeB        bool
		local, relay float64
	}{{true, 2614.18, 120.64}, {false, 2596.92, 119.72}} {
		c.TypeB = tt.typeB
		// The load takes the same power, so the current of the line falls by the ratio.
		v := vs * complex(c.Ratio(13), 0)
		r := c.Measure(v, i/complex(c.Ratio(13), 0))
		if !agree(real(v), tt.local, 5e-4) || !agree(r.Relay, tt.relay, 5e-4) {
			t.Errorf("type B %v: %v V and relay %v V, want %v and %v", tt.typeB, real(v), r.Relay, tt.local, tt.relay)
		}
	}
}

// A settings sheet: out 124 V, 250 A at 0.95 lagging, CT 400 A, R 6 V, X 3 V. By hand
// with the phasors 124 − (6 + j3)·(250/400)∠−18.195° = 119.854 V; the scalar
// approximation 124 − 0.625·(6·0.95 + 3·0.31225) = 119.852 V.
func TestLineDropSheet(t *testing.T) {
	c := sheet()
	c.CT, c.R, c.X = 400, 6, 3
	r := c.Measure(complex(124*c.PT, 0), polar(250, -math.Acos(0.95)*180/math.Pi))
	if !agree(r.Relay, 119.854, 1e-5) || !agree(r.Local, 124, 1e-12) {
		t.Errorf("local %v, relay %v V, want 124 and 119.854", r.Local, r.Relay)
	}
	if scalarV := 124 - 0.625*(6*0.95+3*math.Sqrt(1-0.95*0.95)); !agree(r.Relay, scalarV, 1e-4) {
		t.Errorf("relay %v V, the scalar approximation %v V", r.Relay, scalarV)
	}
	// Turning all phasors changes nothing.
	turned := c.Measure(polar(124*c.PT, 77), polar(250, 77-math.Acos(0.95)*180/math.Pi))
	if !agree(turned.Relay, r.Relay, 1e-12) {
		t.Errorf("turned by 77°: %v V, want %v", turned.Relay, r.Relay)
	}
}

// Set 120 V, band 2 V, 118.2 V: two raises bring it inside [119, 121].
func TestTwoRaises(t *testing.T) {
	c := sheet()
	p := plant{taps: []*TapChanger{&c}, states: make([]TapState, 1), source: func(Time) float64 { return 118.2 }}
	p.run(0, 3600*Second)
	if got := p.states[0].Position; got != 2 || p.states[0].Ask != 0 {
		t.Errorf("tap %d, asks %d, want 2 and nothing", got, p.states[0].Ask)
	}
}

// The angle a of the units across pairs turns the current of the first phase into
// the one that a balanced load of unit power factor has in phase with the pair's
// voltage; then R takes away its whole share, and X stands across.
func TestPairRotation(t *testing.T) {
	phases := map[byte]float64{'A': 0, 'B': -120, 'C': 120}
	for pair, rotation := range map[string]float64{"AB": 30, "BC": 30, "CA": 30, "BA": -30, "CB": -30, "AC": -30} {
		c := sheet()
		c.R, c.Rotation = 6, rotation*math.Pi/180
		first := phases[pair[0]]
		v := polar(7200, first) - polar(7200, phases[pair[1]])
		r := c.Measure(v, polar(100, first))
		if want := r.Local - 6*100/c.CT; !agree(r.Relay, want, 1e-12) {
			t.Errorf("%s: relay %v V, want %v", pair, r.Relay, want)
		}
		c.Rotation = -c.Rotation
		if wrong := c.Measure(v, polar(100, first)); wrong.Relay-r.Relay < 1 {
			t.Errorf("%s: turned the wrong way the relay sees %v V, as good as %v V", pair, wrong.Relay, r.Relay)
		}
	}
}

// Power factors and their angles: cos 25.84193° = 0.9, cos 60° = 0.5.
func TestPowerFactorAngle(t *testing.T) {
	for pf, want := range map[float64]float64{0.9: 25.84193, -0.9: -25.84193, 0.5: 60, -0.5: -60, 1: 0, -1: 0, 1.0000001: 0} {
		if got := PowerFactorAngle(pf) * 180 / math.Pi; math.Abs(got-want) > 1e-5 {
			t.Errorf("power factor %v: %v°, want %v°", pf, got, want)
		}
	}
}
