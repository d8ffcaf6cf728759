//go:build avo

package main

import (
	"fmt"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// back is groups whose targets are moved in the lanes of a mask, with the largest move kept:
// with AVX-512 in registers, else in memory, where registers do not suffice.
func (m machine) back() {
	name := "groupsBack" + m.name
	TEXT(name, NOSPLIT, "func(v, x *float64, index *int32, coef, lanes, weight *float64, mask *uint64, moved *float64, groups int)")
	Pragma("noescape")
	Doc(name + " is the kernel of Groups.Back.")
	v, x := Load(Param("v"), GP64()), Load(Param("x"), GP64())
	index, coef := Load(Param("index"), GP64()), Load(Param("coef"), GP64())
	own, weight := Load(Param("lanes"), GP64()), Load(Param("weight"), GP64())
	mask, moved := Load(Param("mask"), GP64()), Load(Param("moved"), GP64())
	groups := Load(Param("groups"), GP64())
	d, n, r := GP64(), GP64(), GP64()
	at, c, left, s := GP64(), GP64(), GP64(), GP64()
	xr, xi, cr, ci := m.vec(), m.vec(), m.vec(), m.vec()
	var acc [3][4]reg.VecVirtual // rr, ii, ri, ir
	for t := range acc {
		for k := range acc[t] {
			acc[t][k] = m.vec()
		}
	}
	var most, sum reg.VecVirtual
	var keep reg.OpmaskVirtual
	wide := m.bytes == 64
	if wide {
		most, sum, keep = m.vec(), m.vec(), K()
		VMOVUPD(Mem{Base: moved}, most)
		VMOVUPD(Mem{Base: moved, Disp: 8 * lanes}, sum)
		VMOVUPD(Mem{Base: mask}, xr)
		VPMOVQ2M(xr, keep)
	}

	Label("group")
	MOVLQSX(Mem{Base: index}, d)
	MOVLQSX(Mem{Base: index, Disp: 4}, r)
	MOVLQSX(Mem{Base: index, Disp: 8}, n)
	ADDQ(U8(12), index)
	toRows(r)
	for code := 6; code >= 1; code-- {
		t, from, size := code, coef, 16
		if code > 3 {
			t, from, size = code-3, own, stride
		}
		Label(fmt.Sprintf("rows%d", code))
		for p := range m.parts() {
			column := func(base reg.Register) { m.column(base, at, s, c, xr, xi, cr, ci, acc[:t], size, p) }
			MOVQ(index, at)
			MOVQ(from, c)
			for k := range t {
				for _, a := range acc[k] {
					zero(a)
				}
			}
			for range t {
				column(x)
			}
			MOVQ(n, left)
			SUBQ(U8(t), left)
			loop, done := fmt.Sprintf("columns%d_%d", code, p), fmt.Sprintf("done%d_%d", code, p)
			JZ(LabelRef(done))
			Label(loop)
			column(v)
			DECQ(left)
			JNZ(LabelRef(loop))
			Label(done)
			MOVQ(d, s)
			SHRQ(U8(4), s) // a weight has 8 bytes, a value 128
			for k := range t {
				a := acc[k]
				VSUBPD(a[1], a[0], a[0])
				VADDPD(a[3], a[2], a[2])
				re, im := m.re(v, d, p).Offset(k*stride), m.im(v, d, p).Offset(k*stride)
				VMOVUPD(re, xr)
				VMOVUPD(im, xi)
				if wide {
					VMOVUPD(a[0], keep, re)
					VMOVUPD(a[2], keep, im)
				} else {
					VMOVUPD(Mem{Base: mask, Disp: p * m.bytes}, cr)
					VBLENDVPD(cr, a[0], xr, ci)
					VMOVUPD(ci, re)
					VBLENDVPD(cr, a[2], xi, ci)
					VMOVUPD(ci, im)
				}
				VSUBPD(xr, a[0], a[0])
				VSUBPD(xi, a[2], a[2])
				VMULPD(a[2], a[2], a[2])
				VFMADD231PD(a[0], a[0], a[2])
				VBROADCASTSD(Mem{Base: weight, Index: s, Scale: 1, Disp: 8 * k}, cr)
				VMULPD(cr, a[2], a[2])
				// The larger; of unequal kinds (a number, none) the second source.
				if wide {
					VMAXPD(most, a[2], most)
					VADDPD(a[2], sum, sum)
				} else {
					mostAt := Mem{Base: moved, Disp: p * m.bytes}
					VMAXPD(mostAt, a[2], xr)
					VMOVUPD(xr, mostAt)
					VADDPD(mostAt.Offset(8*lanes), a[2], xr)
					VMOVUPD(xr, mostAt.Offset(8*lanes))
				}
			}
		}
		MOVQ(at, index)
		MOVQ(c, from)
		if code > 1 {
			JMP(LabelRef("next"))
		}
	}
	Label("next")
	DECQ(groups)
	JNZ(LabelRef("group"))
	if wide {
		VMOVUPD(most, Mem{Base: moved})
		VMOVUPD(sum, Mem{Base: moved, Disp: 8 * lanes})
	}
	VZEROUPPER()
	RET()
}
