package feeder

import (
	"errors"
	"strings"
	"testing"
	"testing/fstest"

	"yearflow/sim/tables"
)

// files makes a study's folder of name, text pairs.
func files(pairs ...string) fstest.MapFS {
	out := fstest.MapFS{}
	for i := 0; i < len(pairs); i += 2 {
		out[pairs[i]] = &fstest.MapFile{Data: []byte(pairs[i+1])}
	}
	return out
}

// with returns a copy of a folder with other files laid over it; blank: taken out.
func with(base fstest.MapFS, pairs ...string) fstest.MapFS {
	out := fstest.MapFS{}
	for n, f := range base {
		out[n] = f
	}
	for n, f := range files(pairs...) {
		if len(f.Data) == 0 {
			delete(out, n)
			continue
		}
		out[n] = f
	}
	return out
}

// small is a study that has one of everything: a source, a delta-wye substation
// bank, a trunk with a regulator, a lateral with a service transformer.
func small() fstest.MapFS {
	return files(
		"study.toml", `title = "Small"
[period]
start = 2025-01-01
end = 2025-01-02
step = "1h"
zone = "America/Denver"
`,
		"feeder/source.csv", "node,nominal [kV]\ngrid,69\n",
		"feeder/transformers.csv", `transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,impedance [%],x/r,no-load loss [W],exciting current [%]
sub,grid,bus,ABC,10000,69,12.47,Dyn1,8,15,9000,0.4
pole,n3,house,B,25,7.2,0.24,1ph,2,1.5,55,0.5
`,
		"feeder/regulators.csv", `regulator,from,to,phases,pt ratio,ct primary [A]
reg,bus,n1,ABC,60,300
`,
		"feeder/regulator-settings.csv", `regulator,phase,set [V],bandwidth [V],delay [s]
reg,all,122,2,30
`,
		"feeder/constructions.csv", `construction,kind,r1 [ohm/mi],x1 [ohm/mi],r0 [ohm/mi],x0 [ohm/mi],b1 [uS/mi],b0 [uS/mi],rating [A]
trunk,sequence,0.3,0.6,0.8,1.9,6,3,500
`,
		"feeder/sections.csv", `section,from,to,phases,length [ft],construction
s1,n1,n2,ABC,5280,trunk
s2,n2,n3,B,1000,trunk
`,
		"feeder/capacitors.csv", "capacitor,node,phases,size [kvar]\ncap,n2,ABC,300\n",
		"feeder/capacitor-settings.csv", `capacitor,control,watched section,phase,kvar on [kvar],kvar off [kvar],voltage on [V],voltage off [V]
cap,kvar,s1,B,100,-100,117,127
`,
		"feeder/loads.csv", `load,node,phases,connection,real [kW],power factor,profile,customers
l1,n2,ABC,wye,900,0.95,home,200
l2,house,B,wye,12,-0.98,home,3
l3,n2,AB,delta,50,0.9,,1
`,
		"feeder/generators.csv", "generator,node,phases,kind,rating [kVA],profile\npv,n2,ABC,solar,500,sun\n",
	)
}

// opened is a study that must have no fault.
func opened(t *testing.T, fsys fstest.MapFS, caseName string) *Study {
	t.Helper()
	s, err := Open(fsys, caseName)
	if err != nil {
		t.Fatalf("Open: %v", err)
	}
	return s
}

// wantFault checks that a study has a fault at a place, with a text in it.
func wantFault(t *testing.T, fsys fstest.MapFS, at, text string) {
	t.Helper()
	_, err := Open(fsys, "")
	var fs tables.Faults
	if !errors.As(err, &fs) {
		t.Fatalf("Open: got %v, want a fault at %s: %s", err, at, text)
	}
	for _, f := range fs {
		if strings.HasPrefix(f.Pos.String(), at) && strings.Contains(f.Text, text) {
			return
		}
	}
	t.Errorf("no fault at %s with %q in:\n%v", at, text, err)
}

func TestOpenSmall(t *testing.T) {
	s := opened(t, small(), "")
	m := s.Model
	for _, n := range m.Nodes {
		t.Logf("%+v", n)
	}
	for _, a := range m.Assumed {
		t.Logf("%v %s = %s", a.Pos, a.What, a.Value)
	}
	for _, a := range s.Warnings {
		t.Log(a)
	}
	t.Logf("%+v", s.Describe())
}
