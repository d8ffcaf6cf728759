package sim_test

import (
	"maps"
	"math"
	"math/cmplx"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/results"
)

// service is a 50 kVA centre-tapped transformer (the worked example of W. H.
// Kersting, Center-tapped transformer and 120/240-V secondary models, 2009, recalled
// from memory: R_A 1.1 %, X_A 1.8 %, 7200–120/240 V) with a triplex drop and loads on
// both legs and across them.
func service(loads string) fstest.MapFS {
	return fstest.MapFS{
		"study.toml":               text("title = \"Service\"\n[period]\nstart = 2025-01-01\nend = 2025-01-02\nstep = \"1h\"\nzone = \"UTC\"\n"),
		"feeder/source.csv":        text("node,nominal [kV]\npole,12.47\n"),
		"feeder/transformers.csv":  text("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,resistance [%],reactance [%]\nT,pole,tank,A,50,7.2,0.24,center-tap,1.1,1.8\n"),
		"feeder/constructions.csv": text("construction,kind,phase conductor,insulation [in]\ndrop,triplex,1/0 AA,0.08\n"),
		"feeder/sections.csv":      text("section,from,to,phases,length [ft],construction\nD,tank,meter,12,100,drop\n"),
		"feeder/loads.csv":         text("load,node,phases,real [kW],reactive [kvar],zip\n" + loads),
	}
}

// The parts of the centre tap's impedance: Z0 5.7024 + j14.9299 ohm on the primary,
// Z1 = 0.003168 + j0.0020736 ohm on each half (Kersting 2009, as quoted above). A
// current through the admittance model gives them back: with leg 2 open, the drop
// from V/n to leg 1 is (Z0/n² + Z1)·I.
func TestCentreTapWorkedExample(t *testing.T) {
	st, err := feeder.Open(service("a,meter,1,6,2,impedance\n"), "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	in, err := e.Solve(0, sim.Positions{})
	if err != nil {
		t.Fatal(err)
	}
	m := st.Model
	pole, _ := m.NodeIndex("pole")
	tank, _ := m.NodeIndex("tank")
	n := e.Plan.Network
	k := n.ElementsOf(network.Transformer, 0)[0]
	vp := in.State.V[n.At[pole][feeder.A]]
	v1, v2 := in.State.V[n.At[tank][feeder.Leg1]], in.State.V[n.At[tank][feeder.Leg2]]
	i1 := -in.State.Flow[n.Offsets[k]+1]
	const ratio = 60
	z0, z1 := complex(5.7024, 14.9299), complex(0.003168, 0.0020736)
	if got, want := (vp/ratio-v1)/i1, z0/(ratio*ratio)+z1; cmplx.Abs(got-want) > 1e-4*cmplx.Abs(want) {
		t.Errorf("leg 1 sees %v ohm, want %v", got, want)
	}
	// Leg 2 carries nothing: its voltage is that behind Z0.
	if got, want := (vp/ratio+v2)/i1, z0/(ratio*ratio); cmplx.Abs(got-want) > 1e-4*cmplx.Abs(want) {
		t.Errorf("leg 2 sees %v ohm, want %v", got, want)
	}
}

// Loads on the legs and across both: opposite legs, the same nominal of 120 V, and
// the power of each arrives.
func TestLegs(t *testing.T) {
	st, err := feeder.Open(service("a,meter,1,6,2,power\nb,meter,2,4,1,power\nc,meter,12,9,3,power\n"), "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	in, err := e.Solve(0, sim.Positions{})
	if err != nil {
		t.Fatal(err)
	}
	p, q, scale := e.Meter().Balance(in.State)
	if math.Abs(p)+math.Abs(q) > 1e-6*scale {
		t.Errorf("imbalance %g W, %g var of %g VA", p, q, scale)
	}
	got := map[string]sim.VoltageRow{}
	for _, v := range e.Voltages() {
		got[v.Node+"."+v.Phase] = v
	}
	one, two := got["meter.1"], got["meter.2"]
	if turn := math.Abs(math.Remainder(one.Angle-two.Angle, 360)); turn < 175 || one.V120 < 110 || two.V120 < 110 || one.V120 > two.V120 {
		t.Errorf("legs %+v and %+v: want opposite, leg 1 the lower", one, two)
	}
	if v := st.Model.Nodes; v[0].Nominal != 0.24 && v[1].Nominal != 0.24 {
		t.Errorf("nominal voltages %v", v)
	}
}

// A four-wire delta of three units, the lighting unit with a grounded middle: the
// high leg stands at √3/2 of the line voltage to ground (208 V of 240 V; common
// practice, field value 207.8 V).
func TestFourWireDelta(t *testing.T) {
	fs := fstest.MapFS{
		"study.toml":        service("")["study.toml"],
		"feeder/source.csv": text("node,nominal [kV]\npole,12.47\n"),
		"feeder/transformers.csv": text("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,resistance [%],reactance [%],high terminals,low terminals,mid-tap grounded\n" +
			"light,pole,shop,AB,50,12.47,0.24,unit,1.1,1.8,AB,ab,yes\n" +
			"power1,pole,shop,BC,25,12.47,0.24,unit,1.1,1.8,BC,bc,no\n" +
			"power2,pole,shop,CA,25,12.47,0.24,unit,1.1,1.8,CA,ca,no\n"),
		"feeder/loads.csv": text("load,node,phases,connection,real [kW],reactive [kvar]\nm,shop,ABC,delta,0.3,0.1\n"),
	}
	st, err := feeder.Open(fs, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	in, err := e.Solve(0, sim.Positions{})
	if err != nil {
		t.Fatal(err)
	}
	shop, _ := st.Model.NodeIndex("shop")
	v := in.State.V
	at := e.Plan.Network.At[shop]
	// Everything reads 1 p.u. of what it is meant to be, and judged are the pairs.
	points := results.Points(e.Plan.Network)
	names := ""
	for i := range points {
		if p := &points[i]; p.Node == shop {
			if pu := p.PU(v); math.Abs(pu-1) > 0.01 {
				t.Errorf("%s: %.4f p.u.", p.Name, pu)
			}
			if p.Judged(false) {
				names += p.Phase + " "
			}
		}
	}
	if names != "AB BC CA " {
		t.Errorf("judged are %q, want the pairs that the load stands across", names)
	}
	for p, want := range map[feeder.Phase]float64{feeder.A: 120, feeder.B: 120, feeder.C: 207.8} {
		if got := cmplx.Abs(v[at[p]]); math.Abs(got-want) > 0.5 {
			t.Errorf("phase %s: %.2f V to ground, want %.1f V", p, got, want)
		}
	}
}

// On a four-wire delta lighting to ground on 120 V is judged as that, power in delta by
// its pair, and the high leg never; nothing at all is outside the service range here.
func TestFourWireDeltaJudged(t *testing.T) {
	fs := service("")
	fs["feeder/transformers.csv"] = text("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,resistance [%],reactance [%],high terminals,low terminals,mid-tap grounded\n" +
		"light,pole,shop,AB,50,12.47,0.24,unit,1.1,1.8,AB,ab,yes\npower,pole,shop,CA,25,12.47,0.24,unit,1.1,1.8,CA,ca,no\n")
	delete(fs, "feeder/sections.csv")
	fs["feeder/loads.csv"] = text("load,node,phases,connection,real [kW]\nlamps,shop,AB,wye,10\nmotor,shop,CA,delta,3\n")
	fs["study.toml"] = text(string(fs["study.toml"].Data) + "[run]\nvoltages = [\"shop.CA\", \"shop.A\"]\n[limits]\njudge = \"all\"\n")
	st, err := feeder.Open(fs, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	in, err := e.Solve(0, sim.Positions{})
	if err != nil {
		t.Fatal(err)
	}
	if p, q, scale := e.Meter().Balance(in.State); math.Abs(p)+math.Abs(q) > 1e-6*scale {
		t.Errorf("imbalance %g W, %g var of %g VA", p, q, scale)
	}
	got := map[string]bool{}
	for _, p := range results.Points(e.Plan.Network) {
		if st.Model.Nodes[p.Node].Name != "shop" {
			continue
		}
		got[p.Phase] = p.HasLoad
		if pu := p.PU(in.State.V); pu < 114./120 || pu > 126./120 {
			t.Errorf("%s stands at %.4f p.u.", p.Name, pu)
		}
		if p.Judged(true) != (p.Phase != "C") {
			t.Errorf("%s: judged %v", p.Name, p.Judged(true))
		}
	}
	if want := map[string]bool{"A": true, "B": true, "C": false, "CA": true}; !maps.Equal(got, want) {
		t.Errorf("places with loads: %v, want %v", got, want)
	}
	// The lamps draw the whole of their power at 120 V: half on each phase.
	if kw := real(in.State.Load[0]) / 1000; math.Abs(kw-10) > 1e-4 {
		t.Errorf("lamps draw %.6f kW", kw)
	}
}
