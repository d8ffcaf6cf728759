package sim_test

import (
	"fmt"
	"io"
	"io/fs"
	"math"
	"math/cmplx"
	"os"
	"regexp"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/results"
)

// overlay is a study's folder with some of its files replaced in memory.
type overlay struct {
	fs.FS
	files fstest.MapFS
}

func (o overlay) Open(name string) (fs.File, error) {
	if _, ok := o.files[name]; ok {
		return o.files.Open(name)
	}
	return o.FS.Open(name)
}

// put replaces a file.
func (o overlay) put(name, text string) {
	o.files[name] = &fstest.MapFile{Data: []byte(text), Mode: 0o444}
}

func laid(over fs.FS) overlay { return overlay{over, fstest.MapFS{}} }

// content reads a file of a folder.
func content(t testing.TB, fsys fs.FS, name string) string {
	t.Helper()
	f, err := fsys.Open(name)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	data, err := io.ReadAll(f)
	if err != nil {
		t.Fatal(err)
	}
	return string(data)
}

// solveFS prepares a study in memory and solves its first step from the positions in
// the tables.
func solveFS(t testing.TB, fsys fs.FS) (*sim.Engine, *sim.Instant) {
	t.Helper()
	st, err := feeder.Open(fsys, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	in, err := e.Solve(0, sim.Positions{Given: true})
	if err != nil || in.Status == results.Unsolved {
		t.Fatal(err, in)
	}
	return e, in
}

// againstSpice compares every voltage of a solved study with that of its circuit, to
// 1e-6 p.u., and returns the largest difference. A part that nothing grounds is
// compared line to line; line charging makes its voltages to ground real too, but the
// program promises none.
func againstSpice(t *testing.T, e *sim.Engine, in *sim.Instant) (worst float64) {
	t.Helper()
	m := e.Study.Model
	taps := make([][]int, len(m.Regulators))
	at := 0
	for i := range m.Regulators {
		taps[i] = in.State.Taps[at : at+len(m.Regulators[i].Units)]
		at += len(m.Regulators[i].Units)
	}
	want := spice(t, circuit(t, m, taps))
	n := &netlist{m: m}
	places := results.Points(e.Plan.Network)
	for _, p := range places {
		node := m.Nodes[p.Node]
		first := feeder.Phase(strings.IndexByte("ABC12", p.Phase[0]))
		got, w := in.State.V[p.U], want[n.node(p.Node, first)]
		if p.W != network.Ground {
			got -= in.State.V[p.W]
			w -= want[n.node(p.Node, feeder.Phase(strings.IndexByte("ABC12", p.Phase[1])))]
		}
		if cmplx.Abs(w) < 0.05*p.Base {
			t.Errorf("%s.%s: ngspice finds no voltage: %v", node.Name, p.Phase, w)
		}
		d := cmplx.Abs(got-w) / p.Base
		worst = math.Max(worst, d)
		if !(d < 1e-6) {
			t.Errorf("%s.%s: got %.8f∠%.5f° p.u., ngspice %.8f∠%.5f°", node.Name, p.Phase, cmplx.Abs(got)/p.Base, degrees(got), cmplx.Abs(w)/p.Base, degrees(w))
		}
	}
	if len(places) < 3 {
		t.Errorf("only %d places compared", len(places))
	}
	return worst
}

func degrees(v complex128) float64 { return cmplx.Phase(v) * 180 / math.Pi }

// The 13-node test feeder with every load of constant impedance and its bank made
// delta to grounded wye, against ngspice: line charging, underground cables,
// regulators at their taps, a switch, capacitors, wye and delta loads.
func TestSpiceThirteenNode(t *testing.T) {
	base := os.DirFS("../testdata/published/thirteen-node")
	o := laid(base)
	loads := regexp.MustCompile(`(?m),(power|current|impedance)$`).ReplaceAllString(content(t, base, "feeder/loads.csv"), ",impedance")
	o.put("feeder/loads.csv", loads)
	bank := strings.Replace(content(t, base, "feeder/transformers.csv"), "YNyn0", "Dyn1", 1)
	bank = strings.Replace(bank, "connection,resistance [%]", "connection,no-load loss [W],exciting current [%],tap [kV],resistance [%]", 1)
	bank = strings.Replace(bank, "Dyn1,", "Dyn1,900,0.8,4.056,", 1)
	o.put("feeder/transformers.csv", bank)
	e, in := solveFS(t, o)
	if c := e.Study.Model.Transformers[0].Connection; c != "Dyn1" {
		t.Fatalf("the bank is %s", c)
	}
	t.Logf("%d places, largest difference %.2g p.u.", len(results.Points(e.Plan.Network)), againstSpice(t, e, in))
}

// small is a study of a source behind its impedance, a line with charging, a bank and
// a line to unbalanced loads.
type small struct {
	bank     string // connection
	phases   string
	high     float64 // kV of the bank's column; 0: 12.47
	low      float64 // 0: 4.16
	grounded bool    // loads to ground on the low side, besides those in delta
	loads    string  // instead of the usual ones
	bare     bool    // the low line has no charging
	lowline  string  // phases of the low line; blank: ABC
}

// study writes the tables.
func (s small) study() fstest.MapFS {
	if s.phases == "" {
		s.phases = "ABC"
	}
	if s.lowline == "" {
		s.lowline = "ABC"
	}
	if s.high == 0 {
		s.high = 12.47
	}
	if s.low == 0 {
		s.low = 4.16
	}
	construction := "cable"
	if s.bare {
		construction = "wire"
	}
	loads := "L1,load,AB,delta,90,40,impedance\nL2,load,BC,delta,150,-30,impedance\nL3,load,CA,delta,60,35,impedance\n"
	if s.grounded {
		loads += "L4,load,A,wye,120,60,impedance\nL5,load,B,wye,70,20,impedance\nL6,load,C,wye,30,25,impedance\n"
	}
	if s.loads != "" {
		loads = s.loads
	}
	return tablesOf(map[string]string{
		"study.toml":        oneHour,
		"feeder/source.csv": "node,nominal [kV],voltage [pu],angle [deg],short circuit 3ph [MVA],x/r 3ph,short circuit 1ph [MVA],x/r 1ph\nsub,12.47,1.02,7,150,8,110,5\n",
		"feeder/sections.csv": "section,from,to,phases,length [km],construction\nhigh,sub,high,BCA,3,open\n" +
			fmt.Sprintf("low,low,load,%s,0.4,%s\n", s.lowline, construction),
		"feeder/constructions.csv": "construction,kind\nopen,matrix\ncable,matrix\nwire,matrix\n",
		"feeder/impedances.csv":    untransposed,
		"feeder/transformers.csv": "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],x/r,no-load loss [W],exciting current [%],tap [kV]\n" +
			fmt.Sprintf("T,high,low,%s,1000,%g,%g,%s,5.5,6,1900,1.1,%g\n", s.phases, s.high, s.low, s.bank, s.high*0.975),
		"feeder/loads.csv":      "load,node,phases,connection,real [kW],reactive [kvar],zip\n" + loads,
		"feeder/capacitors.csv": "capacitor,node,phases,size [kvar],connection\nK1,high,ABC,300,wye\nK2,high,ABC,150,delta\n",
	})
}

// oneHour is a study.toml of one step.
const oneHour = "[period]\nstart = 2025-01-01\nend = 2025-01-01T01:00:00\nstep = \"1h\"\nzone = \"UTC\"\n[run]\nstart = \"given\"\n"

// untransposed are three lines without symmetry, so that exchanged phases show.
const untransposed = `construction,row,column,r [ohm/km],x [ohm/km],b [uS/km]
open,1,1,0.284,0.670,3.52
open,2,1,0.097,0.312,-1.14
open,2,2,0.290,0.651,3.71
open,3,1,0.095,0.239,-0.44
open,3,2,0.098,0.263,-0.73
open,3,3,0.287,0.662,3.35
cable,1,1,0.496,0.277,60
cable,2,1,0.198,0.020,-2
cable,2,2,0.490,0.251,60
cable,3,1,0.177,-0.009,-1
cable,3,2,0.198,0.020,-2
cable,3,3,0.496,0.277,60
wire,1,1,0.284,0.670,0
wire,2,1,0.097,0.312,0
wire,2,2,0.290,0.651,0
wire,3,1,0.095,0.239,0
wire,3,2,0.098,0.263,0
wire,3,3,0.287,0.662,0
`

func tablesOf(all map[string]string) fstest.MapFS {
	out := fstest.MapFS{}
	for name, s := range all {
		out[name] = &fstest.MapFile{Data: []byte(s), Mode: 0o444}
	}
	return out
}

// Every connection of a bank, off its principal tap, with no-load loss and exciting
// current, feeding unbalanced loads, against ngspice.
func TestSpiceTransformers(t *testing.T) {
	worst := 0.0
	for name, s := range map[string]small{
		"YNyn0": {bank: "YNyn0", grounded: true}, "YNyn6": {bank: "YNyn6", grounded: true}, "YNy0": {bank: "YNy0"},
		"Dyn1": {bank: "Dyn1", grounded: true}, "Dyn11": {bank: "Dyn11", grounded: true}, "Dyn5": {bank: "Dyn5", grounded: true}, "Dyn7": {bank: "Dyn7", grounded: true},
		"Dy1":  {bank: "Dy1"},
		"YNd1": {bank: "YNd1"}, "YNd11": {bank: "YNd11"}, "YNd5": {bank: "YNd5"}, "Yd1": {bank: "Yd1"}, "Yd11": {bank: "Yd11"},
		"Dd0": {bank: "Dd0"}, "Dd4": {bank: "Dd4"}, "Dd6": {bank: "Dd6"},
		"Dd0 bare": {bank: "Dd0", bare: true}, "Yd1 bare": {bank: "Yd1", bare: true}, "YNd11 bare": {bank: "YNd11", bare: true}, "YNy0 bare": {bank: "YNy0", bare: true},
		"words":                 {bank: "delta / grounded wye", grounded: true},
		"open wye AB-BC":        {bank: "open-wye/open-delta AB-BC"},
		"open wye BC-CA bare":   {bank: "open-wye/open-delta BC-CA", bare: true},
		"open wye AC-BC":        {bank: "open-wye/open-delta AC-BC"},
		"open delta AB-BC":      {bank: "open-delta/open-delta AB-BC"},
		"open delta CA-AB bare": {bank: "open-delta/open-delta CA-AB", bare: true},
		"1ph B":                 {bank: "1ph", phases: "B", high: 7.2, low: 0.24, lowline: "B", loads: "L,load,B,wye,70,20,impedance\n"},
		"1ph CA to ground":      {bank: "1ph", phases: "CA", high: 12.47, low: 0.24, lowline: "C", loads: "L,load,C,wye,70,20,impedance\n"},
		"1ph AB across":         {bank: "1ph", phases: "AB", high: 12.47, low: 0.48, lowline: "AB", loads: "L,load,AB,delta,70,20,impedance\n"},
	} {
		t.Run(name, func(t *testing.T) {
			e, in := solveFS(t, s.study())
			worst = math.Max(worst, againstSpice(t, e, in))
		})
	}
	t.Logf("largest difference %.2g p.u.", worst)
}

// Every connection and type of regulator bank at unlike taps, with losses and
// impedance, against autotransformers drawn winding by winding.
func TestSpiceRegulators(t *testing.T) {
	worst := 0.0
	for _, connection := range []string{"wye", "open-delta AB-CB", "open-delta BC-AC", "open-delta CA-BA", "closed-delta"} {
		for _, kind := range []string{"A", "B"} {
			for _, losses := range []string{",,,", "300,40,900,1"} {
				t.Run(connection+" "+kind+" "+losses, func(t *testing.T) {
					units := map[string][]string{"wye": {"A", "B", "C"}, "closed-delta": {"AB", "BC", "CA"}}[connection]
					if units == nil {
						units = strings.Split(strings.TrimPrefix(connection, "open-delta "), "-")
					}
					sheet := "regulator,phase,set [V],bandwidth [V],delay [s],tap\n"
					for i, u := range units {
						sheet += fmt.Sprintf("R,%s,120,2,30,%d\n", u, []int{11, -6, 16}[i])
					}
					loads := "L1,load,AB,delta,900,400,impedance\nL2,load,BC,delta,1500,-300,impedance\nL3,load,CA,delta,600,350,impedance\nL4,load,A,wye,700,300,impedance\n"
					e, in := solveFS(t, tablesOf(map[string]string{
						"study.toml":                    oneHour,
						"feeder/source.csv":             "node,nominal [kV],voltage [pu],angle [deg],short circuit 3ph [MVA],x/r 3ph\nsub,12.47,1.02,7,150,8\n",
						"feeder/sections.csv":           "section,from,to,phases,length [km],construction\nhigh,sub,high,BCA,3,open\nlow,low,load,CAB,2,cable\n",
						"feeder/constructions.csv":      "construction,kind\nopen,matrix\ncable,matrix\nwire,matrix\n",
						"feeder/impedances.csv":         untransposed,
						"feeder/regulators.csv":         "regulator,from,to,phases,connection,pt ratio,ct primary [A],type,rating [A],no-load loss [W],load loss [W],impedance [%]\nR,high,low,ABC," + connection + ",60,200," + kind + "," + losses + "\n",
						"feeder/regulator-settings.csv": sheet,
						"feeder/loads.csv":              "load,node,phases,connection,real [kW],reactive [kvar],zip\n" + loads,
					}))
					worst = math.Max(worst, againstSpice(t, e, in))
				})
			}
		}
	}
	t.Logf("largest difference %.2g p.u.", worst)
}

// The clock number of every vector group (IEC 60076-1): without a load, the low side's
// positive sequence lags the high side's by 30° times the number, and its magnitude is
// that of the ratings.
func TestClockNumbers(t *testing.T) {
	checked := 0
	for _, group := range []string{"YNyn", "YNy", "YNd", "Yd", "Dyn", "Dy", "Dd"} {
		for clock := range 12 {
			mixed := strings.Contains(strings.ToLower(group), "d") && group != "Dd"
			if clock%2 == 1 != mixed {
				continue
			}
			checked++
			name := fmt.Sprintf("%s%d", group, clock)
			s := small{bank: name, bare: true}.study()
			// No load, no core, no charging on either side: nothing but the windings.
			s["feeder/loads.csv"].Data = []byte("load,node,phases,connection,real [kW],reactive [kvar],zip\n")
			s["feeder/sections.csv"].Data = []byte("section,from,to,phases,length [km],construction\nhigh,sub,high,ABC,3,wire\nlow,low,load,ABC,0.4,wire\n")
			s["feeder/transformers.csv"].Data = []byte("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],x/r\nT,high,low,ABC,1000,12.47,4.16," + name + ",5.5,6\n")
			delete(s, "feeder/capacitors.csv")
			e, in := solveFS(t, s)
			sequence := func(node string) complex128 {
				i, _ := e.Study.Model.NodeIndex(node)
				at := e.Plan.Network.At[i]
				a := cmplx.Rect(1, 2*math.Pi/3)
				return (in.State.V[at[0]] + a*in.State.V[at[1]] + a*a*in.State.V[at[2]]) / 3
			}
			ratio := sequence("load") / sequence("high")
			if lag := turned(-degrees(ratio), 30*float64(clock)); lag > 1e-7 {
				t.Errorf("%s: the low side lags by %.6f°, the clock says %d°", name, -degrees(ratio), 30*clock)
			}
			if math.Abs(cmplx.Abs(ratio)/(4.16/12.47)-1) > 1e-9 {
				t.Errorf("%s: ratio %.9f, want %.9f", name, cmplx.Abs(ratio), 4.16/12.47)
			}
		}
	}
	if checked != 42 {
		t.Errorf("%d groups checked", checked)
	}
}

// A ring fed by two sources, one behind its impedance and one that holds its bus, with a
// regulator, a switch and a bank in it, against ngspice.
func TestSpiceLoop(t *testing.T) {
	e, in := solveFS(t, tablesOf(map[string]string{
		"study.toml": oneHour,
		"feeder/source.csv": "node,nominal [kV],voltage [pu],angle [deg],voltage at,short circuit 3ph [MVA],x/r 3ph,short circuit 1ph [MVA],x/r 1ph\n" +
			"west,12.47,1.02,7,behind,150,8,110,5\neast,12.47,1.01,5,bus,,,,\n",
		"feeder/sections.csv": "section,from,to,phases,length [km],construction\nS1,west,n1,BCA,3,open\nS2,n1,n2,ABC,2,cable\nS3,n3,n4,CAB,2,open\nS4,n4,n5,ABC,1,open\n" +
			"S5,n1,n5,CBA,4,open\nS6,n5,east,ABC,6,open\nS7,n4,side,CA,2,open\nS8,low,far,ABC,0.3,cable\n",
		"feeder/constructions.csv":      "construction,kind\nopen,matrix\ncable,matrix\nwire,matrix\n",
		"feeder/impedances.csv":         untransposed,
		"feeder/switches.csv":           "switch,from,to,phases,state\nW,n2,n2w,ABC,closed\nV,side,n1,CA,open\n",
		"feeder/regulators.csv":         "regulator,from,to,phases,connection,pt ratio,ct primary [A],rating [A],load loss [W],impedance [%]\nR,n2w,n3,ABC,wye,60,200,300,900,1\n",
		"feeder/regulator-settings.csv": "regulator,phase,set [V],bandwidth [V],delay [s],tap\nR,A,120,2,30,7\nR,B,120,2,30,-5\nR,C,120,2,30,2\n",
		// Two unlike banks in parallel close a second loop through their windings.
		"feeder/transformers.csv": "transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],x/r,no-load loss [W],exciting current [%],tap [kV]\n" +
			"T1,n4,low,ABC,1000,12.47,4.16,Dyn1,5.5,6,1900,1.1,12.47\nT2,n5,low,ABC,500,12.47,4.16,Dyn1,4.5,4,1100,1.3,12.1\n",
		"feeder/loads.csv":      "load,node,phases,connection,real [kW],reactive [kvar],zip\nL1,far,ABC,wye,700,300,impedance\nL2,far,BC,delta,250,60,impedance\nL3,side,CA,delta,200,-50,impedance\nL4,n2,B,wye,400,100,impedance\n",
		"feeder/capacitors.csv": "capacitor,node,phases,size [kvar],connection,state\nK1,n4,ABC,300,wye,closed\nK2,n1,ABC,600,wye,open\n",
	}))
	t.Logf("%d places, largest difference %.2g p.u.", len(results.Points(e.Plan.Network)), againstSpice(t, e, in))
}
