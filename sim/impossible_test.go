package sim_test

import (
	"fmt"
	"io/fs"
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"yearflow/sim"
	"yearflow/sim/feeder"
	"yearflow/sim/results"
)

// solveTables solves a study's first step, whatever comes of it.
func solveTables(t *testing.T, study fs.FS) (*sim.Engine, *sim.Instant) {
	t.Helper()
	st, err := feeder.Open(study, "")
	if err != nil {
		t.Fatal(err)
	}
	e, err := sim.Prepare(st, sim.Options{})
	if err != nil {
		t.Fatal(err)
	}
	in, err := e.Solve(0, sim.Positions{Given: true})
	if err != nil {
		t.Fatal(err)
	}
	return e, in
}

// A load of constant power from nothing to far more than the line can carry, at the end of
// 1.2 + j2.4 ohm at 12.47 kV. Up to the corner the voltage is the upper root of
//
//	V⁴ + (2·(P·R + Q·X) − E²)·V² + (P² + Q²)·|Z|² = 0
//
// beyond it the load is the impedance that it was at 0.7 p.u., V = E·|Zl/(Zl + Z)| with
// Zl = 0.49·Vn²/(P − jQ): the load is not served as asked, and the place is named.
func TestMoreThanTheLineCarries(t *testing.T) {
	const vn = 12.47
	z := complex(1.2, 2.4)
	tan := math.Tan(math.Acos(0.95))
	served, low := 0, 0
	last := 1.0
	for _, mw := range []float64{0.5, 2, 5, 8, 10, 11, 12, 13, 13.5, 14, 14.5, 15, 16, 18, 22, 30, 50, 80, 200, 1e3, 1e6} {
		e, in := solveTables(t, oneLine(1.2, 2.4, "loads", fmt.Sprintf("load,node,phases,real [kW],power factor\nL,end,ABC,%g,0.95\n", 1000*mw)))
		if in.Status == results.Unsolved {
			// Far beyond what the line carries Newton's method may give up: that is said
			// honestly and with the place, never as a voltage.
			if mw <= 50 || in.State != nil || !strings.HasPrefix(in.Where, "end.") {
				t.Errorf("%g MW: no solution found, at %q", mw, in.Where)
			}
			continue
		}
		b := 1 - 2*(mw*real(z)+mw*tan*imag(z))/(vn*vn)
		c := mw * mw * (1 + tan*tan) * (1.2*1.2 + 2.4*2.4) / (vn * vn * vn * vn)
		want, status := math.Sqrt((b+math.Sqrt(b*b-4*c))/2), results.OK
		if !(want >= 0.7) {
			zl := complex(0.49*vn*vn, 0) / complex(mw, -mw*tan)
			want, status = cmplx.Abs(zl/(zl+z)), results.Low
			low++
		} else {
			served++
		}
		got := magnitude(t, e, "end", "A")
		near(t, fmt.Sprintf("%g MW", mw), got, want, 1e-8)
		if in.Status != status || status == results.Low && !strings.HasPrefix(in.Where, "end.") {
			t.Errorf("%g MW: %v at %q, want %v", mw, in.Status, in.Where, status)
		}
		if got > last {
			t.Errorf("%g MW: the voltage rose from %.6f to %.6f", mw, last, got)
		}
		last = got
	}
	if served < 5 || low < 5 {
		t.Errorf("%d served, %d low: the corner is not between", served, low)
	}
}

// A generator of constant power that presses more into the line than it can take: the
// discriminant of the equation above, with P negative, is below zero.
func TestMoreThanTheLineTakes(t *testing.T) {
	const mw, vn2 = 100, 12.47 * 12.47
	if b := 1 + 2*mw*1.2/vn2; b*b >= 4*mw*mw*(1.2*1.2+2.4*2.4)/(vn2*vn2) {
		t.Fatal("the line can take it")
	}
	e, in := solveTables(t, oneLine(1.2, 2.4, "generators", fmt.Sprintf("generator,node,phases,kind,rating [kVA],real [kW]\nG,end,ABC,other,%g,%g\n", mw*1000.0, mw*1000.0)))
	if in.Status != results.Unsolved || in.State != nil || !strings.HasPrefix(in.Where, "end.") {
		t.Errorf("%v at %q: %v", in.Status, in.Where, e.Voltages())
	}
}

// A load that is a capacitance in resonance with the line has no solution at all: the
// instant is unsolved, a place is named, and there is no state to read.
//
//	X·B = 2.4·Q/V² = 1 at R = 0: Q = 12.47²/2.4 MVA
func TestNoSolution(t *testing.T) {
	kvar := 12470.0 * 12.47 / 2.4
	_, in := solveTables(t, oneLine(0, 2.4, "loads", fmt.Sprintf("load,node,phases,real [kW],reactive [kvar],zip\nL,end,ABC,0,%.9f,impedance\n", -kvar)))
	// The line's micro-ohm leaves a resonance of 10⁶ times the source's voltage.
	if in.Status != results.Unsolved || in.State != nil || !strings.HasPrefix(in.Where, "end.") {
		t.Errorf("%v at %q with state %v", in.Status, in.Where, in.State != nil)
	}
}
