//go:build klu

package klu

/*
#cgo CFLAGS: -O3 -march=native -I/usr/include/suitesparse
#cgo LDFLAGS: -lklu -lm
#include <stdlib.h>
#include "loop.h"
*/
import "C"

import (
	"errors"
	"fmt"
	"runtime"
	"sort"
	"time"
	"unsafe"

	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

// Loop is the fixed-point iteration in C for one state of the devices.
type Loop struct {
	loop  *C.loop
	n     int
	nodes []int32 // by unknown of the network: its place among the loop's voltages
	count int     // of the loop's voltages
	order []int32 // by injection of the loop: that of the solver
	start []complex128
	power []complex128 // by step and injection of the loop
	steps int
}

var _ Stepper = (*Loop)(nil)

// New makes the loop of a solver's network at the devices set last and the sources of
// in. Injections that act as a group are refused. Close frees it.
func New(s *powerflow.Solver, in *powerflow.Input) (*Loop, error) {
	if len(s.Groups) > 0 {
		return nil, errors.New("klu: injections that act as a group are not in the yardstick")
	}
	r := s.Reduced(in)
	l := &Loop{n: r.N}
	var extra extras
	l.nodes = extra.place(r, in.Source)
	l.count = r.N + len(extra.constant)
	perUnit2 := make([]float64, l.count)
	for u, at := range l.nodes {
		v := s.Net.Unknowns[u].Nominal
		perUnit2[at] = 1 / (v * v)
	}
	start, row, value := columns(r)
	js, plain := l.injections(s)

	var pin runtime.Pinner
	defer pin.Unpin()
	sys := C.system_of{n: C.int32_t(r.N), extra: C.int32_t(len(extra.constant)), plain: C.int32_t(plain), count: C.int32_t(len(js))}
	sys.start, sys.row = (*C.int32_t)(pinned(&pin, start)), (*C.int32_t)(pinned(&pin, row))
	sys.value, sys.pull = (*C.double)(pinned(&pin, value)), (*C.double)(pinned(&pin, r.Pull))
	sys.per_unit2 = (*C.double)(pinned(&pin, perUnit2))
	sys.constant, sys.term = (*C.double)(pinned(&pin, extra.constant)), (*C.int32_t)(pinned(&pin, extra.term))
	sys.column, sys.coef = (*C.int32_t)(pinned(&pin, extra.column)), (*C.double)(pinned(&pin, extra.coef))
	sys.injections = (*C.injection)(pinned(&pin, js))
	if l.loop = C.loop_new(&sys); l.loop == nil {
		return nil, errors.New("klu: the matrix could not be factored")
	}
	return l, nil
}

// pinned keeps a slice where it is while C reads it; an empty one is nil to C.
func pinned[T any](p *runtime.Pinner, s []T) unsafe.Pointer {
	if len(s) == 0 {
		return nil
	}
	p.Pin(&s[0])
	return unsafe.Pointer(&s[0])
}

// Close frees the loop's memory.
func (l *Loop) Close() {
	C.loop_free(l.loop)
	l.loop = nil
}

// extras are the voltages that follow from the independent ones.
type extras struct {
	constant []complex128
	term     []int32
	column   []int32
	coef     []float64
}

// place returns where the voltage of each unknown of the network stands in the loop's
// vector, and lists those that are not independent.
func (x *extras) place(r *powerflow.Reduced, source []complex128) []int32 {
	x.term = append(x.term, 0)
	at := make([]int32, len(r.Terms))
	for u, terms := range r.Terms {
		if len(terms) == 1 && terms[0].Col >= 0 && terms[0].Coef == 1 {
			at[u] = terms[0].Col
			continue
		}
		at[u] = int32(r.N + len(x.constant))
		var c complex128
		for _, t := range terms {
			if t.Col < 0 {
				c += source[-1-t.Col] * complex(t.Coef, 0)
				continue
			}
			x.column, x.coef = append(x.column, t.Col), append(x.coef, t.Coef)
		}
		x.constant, x.term = append(x.constant, c), append(x.term, int32(len(x.column)))
	}
	return at
}

// columns returns both triangles of the matrix by columns, rows ascending.
func columns(r *powerflow.Reduced) (start, row []int32, value []complex128) {
	type entry struct {
		row   int32
		value complex128
	}
	list := make([][]entry, r.N)
	for k, i := range r.Rows {
		j := r.Cols[k]
		list[j] = append(list[j], entry{i, r.Values[k]})
		if i != j {
			list[i] = append(list[i], entry{j, r.Values[k]})
		}
	}
	start = append(start, 0)
	for _, c := range list {
		sort.Slice(c, func(a, b int) bool { return c[a].row < c[b].row })
		for _, e := range c {
			row, value = append(row, e.row), append(value, e.value)
		}
		start = append(start, int32(len(row)))
	}
	return start, row, value
}

// injections returns the injections in the loop's order, and how many are constant
// power: those come first.
func (l *Loop) injections(s *powerflow.Solver) (out []C.injection, plain int) {
	constant := func(k int) bool { return s.Injections[k].PC == 1 && s.Injections[k].QC == 1 }
	for k := range s.Injections {
		if constant(k) {
			l.order = append(l.order, int32(k))
		}
	}
	plain = len(l.order)
	for k := range s.Injections {
		if !constant(k) {
			l.order = append(l.order, int32(k))
		}
	}
	for _, k := range l.order {
		j := &s.Injections[k]
		v := j.Nominal
		low := j.Power(complex(1, 1), powerflow.Corner)
		least := powerflow.Corner * powerflow.Corner * v * v
		c := C.injection{from: C.int32_t(l.nodes[j.From]), to: -1, least: C.double(least),
			pz: C.double(j.PZ / (v * v)), pi: C.double(j.PI / v), pc: C.double(j.PC),
			qz: C.double(j.QZ / (v * v)), qi: C.double(j.QI / v), qc: C.double(j.QC),
			pl: C.double(real(low) / least), ql: C.double(imag(low) / least)}
		if j.To != network.Ground {
			c.to = C.int32_t(l.nodes[j.To])
		}
		out = append(out, c)
	}
	return out, plain
}

// Name is the solver's.
func (l *Loop) Name() string { return "klu" }

// Prepare takes the steps to solve.
func (l *Loop) Prepare(steps [][]complex128, start []complex128) {
	l.steps, l.power = len(steps), make([]complex128, 0, len(steps)*len(l.order))
	for _, power := range steps {
		for _, k := range l.order {
			l.power = append(l.power, power[k])
		}
	}
	l.start = make([]complex128, l.count)
	for u, at := range l.nodes {
		l.start[at] = start[u]
	}
}

// Run solves the steps.
func (l *Loop) Run(tolerance float64) (int, error) {
	copy(l.voltages(), l.start)
	var iterations C.long
	solved := C.loop_run(l.loop, C.int(l.steps), (*C.double)(unsafe.Pointer(unsafe.SliceData(l.power))), C.double(tolerance), most, &iterations)
	if int(solved) < l.steps {
		return int(iterations), fmt.Errorf("klu: step %d is not solved after %d iterations", solved, most)
	}
	return int(iterations), nil
}

// most is how many iterations a step may take.
const most = 80

func (l *Loop) voltages() []complex128 {
	return unsafe.Slice((*complex128)(unsafe.Pointer(C.loop_voltages(l.loop))), l.count)
}

// Voltages returns those of the last step.
func (l *Loop) Voltages(dst []complex128) {
	v := l.voltages()
	for u, at := range l.nodes {
		dst[u] = v[at]
	}
}

// ThreadTime is how long the calling thread has computed.
func ThreadTime() time.Duration {
	return time.Duration(float64(C.thread_seconds()) * 1e9)
}
