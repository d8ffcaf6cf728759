package network_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"os"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim/demo"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
)

// everyBank is a feeder with one bank of each connection, one regulator bank of each
// connection and type, and capacitors in wye and delta.
func everyBank(t testing.TB) *network.Network {
	t.Helper()
	transformers := "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],x/r,no-load loss [W],exciting current [%],tap [kV]\n"
	for i, c := range []string{"YNyn0", "YNyn6", "YNy0", "YNy6", "Dyn1", "Dyn5", "Dyn11", "Dy1", "YNd1", "YNd11", "Yd1", "Yd11", "Dd0", "Dd4", "Dd10",
		"open-wye/open-delta AB-BC", "open-wye/open-delta CA-AB", "open-delta/open-delta AB-BC", "open-delta/open-delta BC-CA"} {
		transformers += fmt.Sprintf("T%02d,bus,t%02d,ABC,500,12.47,4.16,%s,5,6,900,1,12.1\n", i, i, c)
	}
	transformers += "T97,bus,t97,B,50,7.2,0.24,1ph,2,1.5,95,0.8,7.3\nT98,bus,t98,AC,50,12.47,0.24,1ph,2,1.5,95,0.8,12.3\nT99,bus,t99,CB,50,12.47,0.48,1ph,2,1.5,95,0.8,12.3\n"
	regulators := "regulator,from,to,phases,connection,pt ratio,ct primary [A],type,rating [A],no-load loss [W],load loss [W],impedance [%]\n"
	for i, c := range []string{"wye", "open-delta AB-CB", "open-delta BC-AC", "open-delta CA-BA", "closed-delta"} {
		for _, kind := range []string{"A", "B"} {
			regulators += fmt.Sprintf("R%d%s,bus,r%d%s,ABC,%s,60,200,%s,200,40,900,1\n", i, kind, i, kind, c, kind)
		}
	}
	study := fstest.MapFS{}
	for name, text := range map[string]string{
		"study.toml":               "[period]\nstart = 2025-01-01\nend = 2025-01-02\nstep = \"1h\"\nzone = \"UTC\"\n",
		"feeder/source.csv":        "node,nominal [kV],short circuit 3ph [MVA],x/r 3ph,short circuit 1ph [MVA],x/r 1ph\nsub,12.47,150,8,110,5\n",
		"feeder/constructions.csv": "construction,kind,r1 [ohm/km],x1 [ohm/km],r0 [ohm/km],x0 [ohm/km],b1 [uS/km],b0 [uS/km]\nline,sequence,0.3,0.6,0.5,1.8,4,2\nbare,sequence,0.3,0.6,0.5,1.8,0,0\n",
		"feeder/sections.csv":      "section,from,to,phases,length [km],construction\nS1,sub,mid,BCA,2,line\nS2,mid,bus,CAB,2,bare\nS3,mid,end,CA,1,line\n",
		"feeder/transformers.csv":  transformers,
		"feeder/regulators.csv":    regulators,
		"feeder/capacitors.csv":    "capacitor,node,phases,size [kvar],connection\nK1,bus,ABC,300,wye\nK2,bus,BC,100,delta\n",
		"feeder/loads.csv":         "load,node,phases,connection,real [kW],power factor\nL,t99,CB,delta,20,0.9\n",
	} {
		study[name] = &fstest.MapFile{Data: []byte(text), Mode: 0o444}
	}
	st, err := feeder.Open(study, "")
	if err != nil {
		t.Fatal(err)
	}
	n, err := network.Build(st.Model)
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// networks are those that the properties are held on.
func networks(t testing.TB) map[string]*network.Network {
	t.Helper()
	out := map[string]*network.Network{"every bank": everyBank(t)}
	add := func(name string, st *feeder.Study, err error) {
		if err != nil {
			t.Fatal(err)
		}
		n, err := network.Build(st.Model)
		if err != nil {
			t.Fatal(err)
		}
		out[name] = n
	}
	st, err := feeder.Open(demo.Study(), "")
	add("demo", st, err)
	for _, name := range []string{"thirteen-node", "thirty-four-node"} {
		st, err := feeder.Open(os.DirFS("../../testdata/published/"+name), "")
		add(name, st, err)
	}
	return out
}

// Without phase-shifting by anything but connections every element is reciprocal: its
// admittance matrix is symmetric (exactly, but for rounding).
func TestElementsAreReciprocal(t *testing.T) {
	kinds := map[network.Kind]int{}
	for name, n := range networks(t) {
		for _, e := range n.Elements {
			kinds[e.Kind]++
			w := len(e.Terminals)
			for a := range w {
				for b := range a {
					d := cmplx.Abs(e.Y[a*w+b] - e.Y[b*w+a])
					if size := math.Sqrt(cmplx.Abs(e.Y[a*w+a]) * cmplx.Abs(e.Y[b*w+b])); d > 1e-13*size {
						t.Errorf("%s: %v %d: Y%d%d and Y%d%d differ by %g of %g S", name, e.Kind, e.Index, a, b, b, a, d, size)
					}
				}
			}
		}
	}
	for k := network.Section; k <= network.Reference; k++ {
		if kinds[k] == 0 {
			t.Errorf("no %v among the elements", k)
		}
	}
}

// No element makes power: Re(V*·Y·V) ≥ 0 for any voltages.
func TestElementsArePassive(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 7))
	for name, n := range networks(t) {
		for _, e := range n.Elements {
			w := len(e.Terminals)
			for range 20 {
				v := make([]complex128, w)
				for a := range v {
					v[a] = cmplx.Rect(n.Unknowns[e.Terminals[a]].Nominal*r.Float64(), 2*math.Pi*r.Float64())
				}
				var s complex128
				size := 0.0
				for a := range w {
					for b := range w {
						p := v[a] * cmplx.Conj(e.Y[a*w+b]*v[b])
						s += p
						size += cmplx.Abs(p)
					}
				}
				if real(s) < -1e-11*size {
					t.Fatalf("%s: %v %d gives %g W of %g VA", name, e.Kind, e.Index, -real(s), size)
				}
			}
		}
	}
}

// The rows of a section add up to its charging at that end, jB·length/2: equal voltages
// at both ends drive nothing through its series impedance. Without charging they add
// up to nothing.
func TestRowsOfSections(t *testing.T) {
	bare := 0
	for name, n := range networks(t) {
		for _, e := range n.Elements {
			if e.Kind != network.Section {
				continue
			}
			s := n.Model.Sections[e.Index]
			m := n.Model.Constructions[s.Construction].Matrices
			w := len(e.Terminals)
			k := w / 2
			for a := range w {
				var sum complex128
				for b := range w {
					sum += e.Y[a*w+b]
				}
				want := 0.0
				for b := range k {
					want += m.B[a%k][b] * s.LengthKM / 2
				}
				if want == 0 {
					bare++
				}
				if d := cmplx.Abs(sum - complex(0, want)); d > 1e-13*cmplx.Abs(e.Y[a*w+a]) {
					t.Errorf("%s: section %s, row %d adds up to %v S, charging is %g S", name, s.Name, a, sum, want)
				}
			}
		}
	}
	if bare == 0 {
		t.Error("no section without charging was looked at")
	}
}

// Every winding of a bank is insulated from the others: a bank with no grounded star on
// a side draws nothing from a voltage common to that side's terminals.
func TestUngroundedSidesDrawNothingInCommon(t *testing.T) {
	n := everyBank(t)
	looked := 0
	for _, e := range n.Elements {
		if e.Kind != network.Transformer {
			continue
		}
		b := &n.Model.Transformers[e.Index]
		w := len(e.Terminals)
		for side, span := range [][2]int{{0, e.From}, {e.From, e.From + e.To}} {
			node := b.From
			if side == 1 {
				node = b.To
			}
			if n.Model.Nodes[node].Grounded {
				continue
			}
			looked++
			// A star point that floats moves with the terminals of its own side.
			for a := range w {
				var sum complex128
				for t := span[0]; t < span[1]; t++ {
					sum += e.Y[a*w+t]
				}
				high := strings.HasPrefix(b.Connection, "Y") && !strings.HasPrefix(b.Connection, "YN")
				if star := w > e.From+e.To; star && high == (side == 0) {
					sum += e.Y[a*w+w-1]
				}
				if cmplx.Abs(sum) > 1e-12*cmplx.Abs(e.Y[a*w+a]) {
					t.Errorf("%s (%s): a voltage common to side %d drives %v S at terminal %d", b.Name, b.Connection, side, sum, a)
				}
			}
		}
	}
	if looked < 8 {
		t.Errorf("only %d sides looked at", looked)
	}
}
