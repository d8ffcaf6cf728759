package sim_test

import (
	"math"
	"strings"
	"testing"
	"testing/fstest"
)

// behindUnits is the usual high line and its capacitors with other banks behind it: rows
// of transformers.csv from the node high, a drop to the node load, and loads.
func behindUnits(banks, drop, loads string) fstest.MapFS {
	f := small{bank: "YNyn0"}.study()
	f["feeder/transformers.csv"].Data = []byte("transformer,from,to,phases,rating [kVA],high [kV],low [kV],connection,resistance [%],reactance [%],no-load loss [W],exciting current [%],tap [kV],high terminals,low terminals,mid-tap grounded\n" + banks)
	f["feeder/constructions.csv"].Data = []byte("construction,kind,phase conductor,insulation [in]\nopen,matrix,,\ncable,matrix,,\nwire,matrix,,\ndrop,triplex,1/0 AA,0.08\n")
	f["feeder/sections.csv"].Data = []byte("section,from,to,phases,length [km],construction\nhigh,sub,high,BCA,3,open\n" + drop)
	f["feeder/loads.csv"].Data = []byte("load,node,phases,connection,real [kW],reactive [kvar],zip\n" + strings.ReplaceAll(loads, "\n", ",impedance\n"))
	return f
}

// Services and banks of unequal single-phase units, off their principal tap, with
// no-load losses, against ngspice: centre-tapped transformers with loads on each leg,
// across both and behind a triplex drop; four-wire deltas, closed and open, with a
// lighting unit whose middle is grounded; wye and open banks of unlike units.
func TestSpiceServicesAndUnits(t *testing.T) {
	legs := "L1,load,1,wye,7,2\nL2,load,2,wye,3,1.5\nL3,load,12,wye,9,-2\nL4,low,1,wye,2,1\n"
	four := "L1,load,A,wye,9,3\nL2,load,B,wye,4,2\nL3,load,AB,delta,6,1\nL4,load,BC,delta,8,5\nL5,load,CA,delta,3,3\nL6,low,ABC,delta,12,5\nL7,load,C,wye,0.5,0.1\n"
	delta := "L1,load,AB,delta,6,1\nL2,load,BC,delta,8,5\nL3,load,CA,delta,3,3\n"
	wye := "L1,load,A,wye,9,3\nL2,load,B,wye,4,2\nL3,load,CA,delta,6,1\n"
	triplex := "low,low,load,12,0.04,drop\n"
	wire, open := "low,low,load,ABC,0.1,wire\n", "low,low,load,BCA,0.1,cable\n"
	worst := 0.0
	for name, s := range map[string]fstest.MapFS{
		"centre tap A":      behindUnits("T,high,low,A,50,7.2,0.24,center-tap,1.1,1.8,120,0.9,7.02,,,\n", triplex, legs),
		"centre tap CA":     behindUnits("T,high,low,CA,25,12.47,0.24,center-tap,1.3,1.6,80,0.9,12.6,,,\n", triplex, legs),
		"four-wire delta":   behindUnits("T1,high,low,AB,50,12.47,0.24,unit,1.1,1.8,120,0.9,12.2,AB,ab,yes\nT2,high,low,BC,25,12.47,0.24,unit,1.3,1.6,80,1,12.2,BC,bc,no\nT3,high,low,CA,37.5,12.47,0.24,unit,1.2,1.7,90,1,12.2,CA,ca,no\n", wire, four),
		"open four-wire":    behindUnits("T1,high,low,AB,50,12.47,0.24,unit,1.1,1.8,120,0.9,12.47,AB,ab,yes\nT2,high,low,BC,25,12.47,0.24,unit,1.3,1.6,80,1,12.2,BC,bc,no\n", open, four),
		"open wye, lighted": behindUnits("T1,high,low,A,75,7.2,0.24,unit,1.1,1.8,120,0.9,7.2,AN,ab,yes\nT2,high,low,B,15,7.2,0.24,unit,1.4,1.5,60,1,7.3,BN,bc,no\n", wire, four),
		"open wye, unlike":  behindUnits("T1,high,low,A,75,7.2,0.24,unit,1.1,1.8,120,0.9,7.2,AN,ab,no\nT2,high,low,C,15,7.2,0.24,unit,1.4,1.5,60,1,7.3,CN,ca,no\n", wire, delta),
		"delta, unlike":     behindUnits("T1,high,low,AB,75,12.47,0.24,unit,1.1,1.8,120,0.9,12.47,AB,ab,no\nT2,high,low,BC,15,12.47,0.24,unit,1.4,1.5,60,1,12.47,BC,bc,no\nT3,high,low,AC,25,12.47,0.24,unit,1.4,1.5,60,1,12.47,AC,ac,no\n", wire, delta),
		"wye, unlike":       behindUnits("T1,high,low,A,75,7.2,0.12,unit,1.1,1.8,120,0.9,7.2,AN,an,no\nT2,high,low,B,15,7.2,0.12,unit,1.4,1.5,60,1,7.2,BN,bn,no\nT3,high,low,C,25,7.2,0.12,unit,1.4,1.5,60,1,7.1,CN,cn,no\n", open, wye),
	} {
		t.Run(name, func(t *testing.T) {
			e, in := solveFS(t, s)
			worst = math.Max(worst, againstSpice(t, e, in))
		})
	}
	t.Logf("largest difference %.2g p.u.", worst)
}
