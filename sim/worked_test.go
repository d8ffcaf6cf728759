package sim_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/results"
)

// feed is a study of given tables on one source.
func feed(source string, pairs ...string) fstest.MapFS {
	all := map[string]string{"study.toml": oneHour, "feeder/source.csv": source,
		"feeder/loads.csv": "load,node,phases,real [kW]\n"}
	for i := 0; i < len(pairs); i += 2 {
		all["feeder/"+pairs[i]+".csv"] = pairs[i+1]
	}
	return tablesOf(all)
}

// oneLine is a line of positive- and zero-sequence impedance r + jx ohm from a stiff
// source of 12.47 kV. A resistance of nought is written as a micro-ohm.
func oneLine(r, x float64, more ...string) fstest.MapFS {
	return feed("node,nominal [kV]\nsub,12.47\n", append([]string{
		"constructions", fmt.Sprintf("construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nline,sequence,%g,%g,%g,%g\n", math.Max(r, 1e-6), x, math.Max(r, 1e-6), x),
		"sections", "section,from,to,phases,length [km],construction\nS,sub,end,ABC,1,line\n"}, more...)...)
}

// magnitude returns |V| in p.u. of a node's phase.
func magnitude(t *testing.T, e *sim.Engine, node, phase string) float64 {
	t.Helper()
	for _, v := range e.Voltages() {
		if v.Node == node && v.Phase == phase {
			return v.PU
		}
	}
	t.Fatalf("no voltage at %s.%s", node, phase)
	return 0
}

// read meters a solved instant.
func read(e *sim.Engine, in *sim.Instant) *results.Reading {
	m := e.Meter()
	r := m.NewReading()
	m.Read(in.State, r)
	return r
}

// sqr returns |i|².
func sqr(i complex128) float64 { return real(i)*real(i) + imag(i)*imag(i) }

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: got %.9g, want %.9g ± %g (off by %.2g)", what, got, want, tolerance, got-want)
	}
}

// A capacitor of 600 kvar at 12.47 kV behind 3 ohm: X·Q/V² = 3·0.6/12.47² = 1.1575 %
// (linear), and as its output grows with V², 1/(1 − 0.011575) − 1 = 1.1711 %
// (worked from V = E + X·B·V).
func TestCapacitorRise(t *testing.T) {
	e, _ := solveFS(t, oneLine(0, 3, "capacitors", "capacitor,node,phases,size [kvar]\nK,end,ABC,600\n"))
	x := 3 * 0.6 / (12.47 * 12.47)
	near(t, "linear rise, %", 100*x, 1.1575, 1e-4)
	near(t, "rise, %", 100*(magnitude(t, e, "end", "B")-1), 1.1711, 5e-5)
	near(t, "rise", magnitude(t, e, "end", "B"), 1/(1-x), 1e-9)
}

// A load of 3 MW at power factor 0.95 behind 1.2 + j2.4 ohm at 12.47 kV:
// V = 0.95918 p.u., from V⁴ + (2(PR + QX) − E²)·V² + |Z·S|² = 0. A generator of 2 MW at
// the same place raises by 1.4747 %, at power factor 0.98 absorbing by 0.8520 %.
func TestOneLoadAndOneGenerator(t *testing.T) {
	root := func(p, q float64) float64 {
		v2 := 12.47 * 12.47
		r, x := 1.2/v2, 2.4/v2
		b := 1 - 2*(p*r+q*x)
		c := (p*p + q*q) * (r*r + x*x)
		return math.Sqrt((b + math.Sqrt(b*b-4*c)) / 2)
	}
	tan := math.Tan(math.Acos(0.95))
	near(t, "by hand", root(3, 3*tan), 0.95918, 1e-5)
	e, _ := solveFS(t, oneLine(1.2, 2.4, "loads", "load,node,phases,real [kW],power factor\nL,end,ABC,3000,0.95\n"))
	near(t, "load", magnitude(t, e, "end", "A"), root(3, 3*tan), 1e-9)
	for pf, want := range map[string]float64{"1": 1.4747, "-0.98": 0.8520} {
		f := math.Abs(map[string]float64{"1": 1, "-0.98": -0.98}[pf])
		e, _ := solveFS(t, oneLine(1.2, 2.4, "generators", "generator,node,phases,kind,rating [kVA],real [kW],power factor\nG,end,ABC,other,2500,2000,"+pf+"\n"))
		got := magnitude(t, e, "end", "C")
		near(t, "rise at power factor "+pf, 100*(got-1), want, 1e-4)
		near(t, "rise by hand", got, root(-2, 2*math.Tan(math.Acos(f))), 1e-9)
	}
}

// 200 A in three phases of 0.306 ohm/mi over 2 miles lose 3·200²·0.612 = 73.44 kW. The
// load takes constant current, so that it is 200 A wherever the voltage stands.
func TestLineLoss(t *testing.T) {
	kw := root3 * 12.47 * 200
	s := oneLine(0.306*2, 0.6272*2, "loads", fmt.Sprintf("load,node,phases,real [kW],reactive [kvar],zip\nL,end,ABC,%.12f,0,current\n", kw))
	e, in := solveFS(t, s)
	r := read(e, in)
	near(t, "loss, kW", real(r.Losses)/1000, 73.44, 1e-6)
	near(t, "loss, kvar", imag(r.Losses)/1000, 3*0.04*0.6272*2*1000, 1e-6)
}

// A load spread evenly over a line drops half of, and loses a third of, what it would at
// the end; two thirds of it lumped at a quarter and one third at the end do both
// (W. H. Kersting, Distribution System Modeling and Analysis, ch. 3; recalled from
// memory). The line is cut into 60 pieces with a load in the middle of each; constant
// current at unity factor on a resistance keeps all currents in phase, so that the
// rules hold but for the cutting: n pieces lose 1/3 + 1/(6n²).
func TestEvenlySpreadLoad(t *testing.T) {
	const n = 60
	const total = 6000.0 // kW
	source := "node,nominal [kV]\nsub,12.47\n"
	construction := "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nline,sequence,0.3,1e-9,0.3,1e-9\n"
	line := func(at []float64, share []float64) (drop, loss float64) {
		sections := "section,from,to,phases,length [km],construction\n"
		loads := "load,node,phases,real [kW],reactive [kvar],zip\n"
		from, last := "sub", 0.0
		for k, x := range at {
			to := fmt.Sprintf("n%02d", k)
			sections += fmt.Sprintf("S%02d,%s,%s,ABC,%.12f,line\n", k, from, to, x-last)
			if share[k] > 0 {
				loads += fmt.Sprintf("L%02d,%s,ABC,%.12f,0,current\n", k, to, total*share[k])
			}
			from, last = to, x
		}
		e, in := solveFS(t, feed(source, "constructions", construction, "sections", sections, "loads", loads))
		r := read(e, in)
		return 1 - magnitude(t, e, from, "A"), real(r.Losses)
	}
	endDrop, endLoss := line([]float64{2}, []float64{1})
	var at, share []float64
	for k := range n {
		at = append(at, 2*(float64(k)+0.5)/n)
		share = append(share, 1.0/n)
	}
	drop, loss := line(append(at, 2), append(share, 0))
	near(t, "drop of the end's", drop/endDrop, 0.5, 1e-6)
	near(t, "loss of the end's", loss/endLoss, 1.0/3+1.0/(6*n*n), 1e-6)
	drop, loss = line([]float64{0.5, 2}, []float64{2.0 / 3, 1.0 / 3})
	near(t, "drop of two lumps", drop/endDrop, 0.5, 1e-6)
	near(t, "loss of two lumps", loss/endLoss, 1.0/3, 1e-6)
}

// Short circuits of a source: 150 MVA with X/R 8 and 110 MVA to ground with X/R 5 at
// 12.47 kV. |Z1| = 12.47²/150 = 1.036673 ohm; |2·Z1 + Z0| = 3·12.47²/110 = 4.240934 ohm
// at X/R 5 (the circuits of IEC 60909-0), so that Z1 = 0.128583 + j1.028667,
// Z0 = 0.574549 + j2.101243. Then the same currents out of the solved network with a
// bolted fault, S = √3·V·I.
func TestSourceShortCircuit(t *testing.T) {
	const source = "node,nominal [kV],short circuit 3ph [MVA],x/r 3ph,short circuit 1ph [MVA],x/r 1ph\nsub,12.47,150,8,110,5\n"
	line := []string{"constructions", "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km]\nline,sequence,0.3,0.6,0.5,1.8\n",
		"sections", "section,from,to,phases,length [km],construction\nS,sub,end,ABC,1,line\n"}
	for phases, want := range map[string]float64{"ABC": 150, "A": 110, "C": 110} {
		// A load of 10¹² kW at nominal voltage is a fault of less than a micro-ohm.
		s := feed(source, append(line, "loads", "load,node,phases,real [kW],reactive [kvar],zip\nF,sub,"+phases+",1e12,0,impedance\n")...)
		e, in := solveFS(t, s)
		z := e.Study.Model.Sources[0]
		near(t, "R1", real(z.Z1), 0.128583, 1e-6)
		near(t, "X1", imag(z.Z1), 1.028667, 1e-6)
		near(t, "R0", real(z.Z0), 0.574549, 1e-6)
		near(t, "X0", imag(z.Z0), 2.101243, 1e-6)
		loop := 2*z.Z1 + z.Z0
		near(t, "|2 Z1 + Z0|", cmplx.Abs(loop), 3*12.47*12.47/110, 1e-9)
		near(t, "X/R of it", imag(loop)/real(loop), 5, 1e-9)
		current := in.State.Source[0][phases[0]-'A']
		near(t, phases+" fault, MVA", root3*12.47*cmplx.Abs(current)/1000, want, 1e-5*want)
	}
}

// The short-circuit and the open-circuit test of a bank, as on the test floor. The low
// side shorted, the high side draws V/Z: the impedance of the plate, and its resistance
// the load loss. Left open at rated voltage it draws the no-load loss and the exciting
// current, in per cent of rated current.
func TestShortAndOpenCircuit(t *testing.T) {
	const kva, nll, exciting, r, x = 1000.0, 1900.0, 1.1, 1.2, 5.5
	rated := kva / (root3 * 12.47)
	for _, bank := range []string{"YNyn0", "YNyn6", "Dyn1", "Dyn11", "Dyn5", "YNd1", "YNd11", "Yd1", "Yd11", "Dd0", "Dd4", "YNy0", "Dy1"} {
		plate := fmt.Sprintf("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,resistance [%%],reactance [%%],no-load loss [W],exciting current [%%]\nT,sub,low,ABC,%g,12.47,4.16,%s,%g,%g,", kva, bank, r, x)
		source := "node,nominal [kV]\nsub,12.47\n"
		// Between phases: a short circuit that no neutral is needed for.
		e, in := solveFS(t, feed(source, "transformers", plate+"0,0\n", "loads", "load,node,phases,connection,real [kW],reactive [kvar],zip\nF,low,ABC,delta,1e12,0,impedance\n"))
		for p, i := range in.State.Source[0] {
			near(t, fmt.Sprintf("%s: short-circuit current of phase %d, times rated", bank, p), cmplx.Abs(i)/rated, 100/math.Hypot(r, x), 1e-6)
		}
		power := read(e, in).Source
		near(t, bank+": R, %", 100*real(power)/(3*sqr(in.State.Source[0][1]))/(12470*12470/(kva*1000)), r, 1e-6)
		near(t, bank+": X, %", 100*imag(power)/(3*sqr(in.State.Source[0][1]))/(12470*12470/(kva*1000)), x, 1e-6)

		e, in = solveFS(t, feed(source, "transformers", plate+fmt.Sprintf("%g,%g\n", nll, exciting)))
		for p, i := range in.State.Source[0] {
			near(t, fmt.Sprintf("%s: exciting current of phase %d, %%", bank, p), 100*cmplx.Abs(i)/rated, exciting, 1e-7)
		}
		near(t, bank+": no-load loss, W", real(read(e, in).Source), nll, 1e-5)
		near(t, bank+": no-load kvar", imag(read(e, in).Source)/1000, math.Sqrt(exciting*exciting/1e4*kva*kva-nll*nll/1e6), 1e-7)
	}
}

// The same tests of single units and open banks: a bank of two units of half the rating
// each.
func TestShortAndOpenCircuitOfSingleUnits(t *testing.T) {
	for _, b := range []struct {
		connection, phases string
		high               float64 // kV of the column
		fault              string  // phases and connection of the fault
		base               float64 // ohm of the shorted loop at 1 p.u.
		volts              float64 // kV that drive the fault
		through            int     // phase whose current is measured
	}{
		{"1ph", "B", 7.2, "B,wye", 7.2 * 7.2 / 0.1, 12.47 / root3, 1},
		{"1ph", "CA", 12.47, "C,wye", 12.47 * 12.47 / 0.1, 12.47, 2},
		{"1ph", "AB", 12.47, "AB,delta", 12.47 * 12.47 / 0.1, 12.47, 0},
		{"open-wye/open-delta BC-CA", "ABC", 12.47, "BC,delta", 12.47 * 12.47 / 3 / 0.05, 12.47 / root3, 1},
		{"open-delta/open-delta AB-CB", "ABC", 12.47, "AB,delta", 12.47 * 12.47 / 0.05, 12.47, 0},
	} {
		plate := fmt.Sprintf("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,resistance [%%],reactance [%%],no-load loss [W],exciting current [%%]\nT,sub,low,%s,100,%g,0.24,%s,1.5,2,", b.phases, b.high, b.connection)
		source := "node,nominal [kV]\nsub,12.47\n"
		name := b.connection + " " + b.phases
		_, in := solveFS(t, feed(source, "transformers", plate+"0,0\n", "loads", "load,node,phases,connection,real [kW],reactive [kvar],zip\nF,low,"+b.fault+",1e12,0,impedance\n"))
		got := cmplx.Abs(in.State.Source[0][b.through])
		want := b.volts * 1000 / (b.base * 0.025)
		near(t, name+": short-circuit current, A", got/want, 1, 1e-6)

		e, in := solveFS(t, feed(source, "transformers", plate+"300,0.8\n"))
		// The loss is that of the rated winding voltage; the unit on B, rated 7.2 kV,
		// stands on 12.47/√3 kV.
		k := 1.0
		if b.high == 7.2 {
			k = 12.47 * 12.47 / 3 / (7.2 * 7.2)
		}
		near(t, name+": no-load loss, W", real(read(e, in).Source), 300*k, 1e-6)
		near(t, name+": no-load VA", imag(read(e, in).Source), math.Sqrt(800*800-300*300)*k, 1e-6)
	}
}

// A transformer of 50 kVA that loses 95 W idle and 510 W at full load loses
// 95 + 0.8²·510 = 421.4 W at 80 % of rated current. The voltage at the core is rated, the
// load takes constant current.
func TestTransformerLoss(t *testing.T) {
	source := "node,nominal [kV]\nsub,12.470765814495916\n" // 7.2 kV to ground
	e, in := solveFS(t, feed(source,
		"transformers", "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],load loss [W],no-load loss [W]\nT,sub,low,A,50,7.2,0.24,1ph,2,510,95\n",
		"loads", "load,node,phases,real [kW],reactive [kvar],zip\nL,low,A,40,0,current\n"))
	near(t, "loss, W", real(read(e, in).Losses), 421.4, 1e-6)
	near(t, "no-load loss of it, W", real(read(e, in).ByKind[results.TransformerNoLoadLoss]), 95, 1e-9)
}

// Taps at either end: type A 1.10 and 0.90, type B 1/0.9 = 1.1111 and 1/1.1 = 0.9091.
func TestRegulatorEnds(t *testing.T) {
	for _, c := range []struct {
		kind string
		tap  int
		want float64
	}{{"A", 16, 1.1}, {"A", -16, 0.9}, {"B", 16, 1 / 0.9}, {"B", -16, 1 / 1.1}} {
		e, _ := solveFS(t, feed("node,nominal [kV]\nsub,12.47\n",
			"regulators", "regulator,from,to,phases,pt ratio,ct primary [A],type\nR,sub,out,ABC,60,200,"+c.kind+"\n",
			"regulator-settings", fmt.Sprintf("regulator,phase,set [V],bandwidth [V],delay [s],tap\nR,all,120,2,30,%d\n", c.tap)))
		near(t, fmt.Sprintf("type %s at %d", c.kind, c.tap), magnitude(t, e, "out", "C"), c.want, 1e-12)
	}
}
