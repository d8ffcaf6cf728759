package sim

import (
	"math"
	"testing"
	"testing/fstest"

	"yearflow/sim/feeder"
)

// twoPlaces is a source, a line of r + jx ohm a phase with a balanced load of constant
// power at its end, and a lateral on phase A with nothing on it.
func twoPlaces(zip string) fstest.MapFS {
	file := func(s string) *fstest.MapFile { return &fstest.MapFile{Data: []byte(s)} }
	return fstest.MapFS{
		"study.toml":               file("[period]\nstart = 2025-01-01\nend = 2025-01-02\nstep = \"1h\"\nzone = \"UTC\"\n"),
		"feeder/source.csv":        file("node,nominal [kV]\nS,12.47\n"),
		"feeder/sections.csv":      file("section,from,to,phases,length [km],construction\nS-L,S,L,ABC,10,Z\nL-T,L,T,A,4,Z\n"),
		"feeder/constructions.csv": file("construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nZ,sequence,0.2,0.4,0.2,0.4\n"),
		"feeder/loads.csv":         file("load,node,phases,real [kW],reactive [kvar],zip\nL1,L,ABC,1500,600," + zip + "\n"),
	}
}

func prepared(t *testing.T, fsys fstest.MapFS, nodes ...string) *Engine {
	t.Helper()
	st, err := feeder.Open(fsys, "")
	if err != nil {
		t.Fatal(err)
	}
	var at []int
	for _, n := range nodes {
		i, _ := st.Model.NodeIndex(n)
		at = append(at, i)
	}
	e, err := Prepare(st, Options{Probes: at})
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// On a line with R + jX to a load of constant power P + jQ, per phase, the end voltage
// follows U² = (E² − 2(PR+QX) ± √…)/2 and the loss is R(P²+Q²)/U² (the textbook's load
// flow of two nodes, e.g. Kersting, Distribution System Modeling and Analysis, ch. 3).
// The marginal loss is its derivative by P, here by a difference over 1 W.
func TestMarginalLossesOfOneLineAreThoseOfTheTextbook(t *testing.T) {
	e := prepared(t, twoPlaces("power"), "L", "S")
	m := make([]float64, 2)
	losses, ok, err := e.Marginal(m, 3, Positions{Given: true}, 0.1)
	if err != nil || !ok {
		t.Fatal(ok, err)
	}
	const r, x, ground = 2.0, 4.0, 12470 / 1.7320508075688772
	loss := func(p, q float64) float64 { // W a phase
		b := ground*ground - 2*(p*r+q*x)
		u2 := (b + math.Sqrt(b*b-4*(p*p+q*q)*(r*r+x*x))) / 2
		return r * (p*p + q*q) / u2
	}
	const p, q = 500e3, 200e3
	if want := 3 * loss(p, q) / 1000; math.Abs(losses-want) > 1e-6*want {
		t.Errorf("losses %.9g kW, want %.9g", losses, want)
	}
	want := (loss(p+0.5, q) - loss(p-0.5, q)) / 1
	if math.Abs(m[0]-want) > 1e-4*want {
		t.Errorf("marginal losses at the load %.8f, want %.8f", m[0], want)
	}
	if math.Abs(m[1]) > 1e-9 {
		t.Errorf("marginal losses at the source %g, want none", m[1])
	}
}

// Adding the power to the tables and solving again gives the same difference.
func TestMarginalLossesAreThoseOfALoadThatIsAdded(t *testing.T) {
	for _, zip := range []string{"power", "impedance"} {
		plain := twoPlaces(zip)
		e := prepared(t, plain, "T")
		m := make([]float64, 1)
		before, ok, err := e.Marginal(m, 0, Positions{Given: true}, 0.1)
		if err != nil || !ok {
			t.Fatal(ok, err)
		}
		more := twoPlaces(zip)
		more["feeder/loads.csv"].Data = append(more["feeder/loads.csv"].Data, "L2,T,A,5,0,power\n"...)
		f := prepared(t, more, "T")
		after, ok, err := f.Marginal(make([]float64, 1), 0, Positions{Given: true}, 0.1)
		if err != nil || !ok {
			t.Fatal(ok, err)
		}
		// 5 kW over 500 kW a phase: the difference bends by about half a percent.
		if got := (after - before) / 5; math.Abs(got-m[0]) > 0.02*math.Abs(m[0]) {
			t.Errorf("zip %s: 5 kW more lose %.6f kW a kW, the marginal losses are %.6f", zip, got, m[0])
		}
	}
}
