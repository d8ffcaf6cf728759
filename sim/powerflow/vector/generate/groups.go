//go:build avo

package main

import (
	"fmt"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// groups is rows for one, two or three targets in a row that have the same sources: each
// source is loaded once. Registers suffice for one part of a component after another. From
// four on the number of rows is three too large and each lane has its own coefficients.
func (m machine) groups(kind string) {
	name := "groups" + kind + m.name
	TEXT(name, NOSPLIT, "func(dst, src *float64, index *int32, coef, lanes *float64, groups int)")
	Pragma("noescape")
	Doc(name + " is the kernel of Groups." + kind + ".")
	dst, src := Load(Param("dst"), GP64()), Load(Param("src"), GP64())
	index, coef := Load(Param("index"), GP64()), Load(Param("coef"), GP64())
	own, groups := Load(Param("lanes"), GP64()), Load(Param("groups"), GP64())
	d, n, r := GP64(), GP64(), GP64()
	at, c, left, s := GP64(), GP64(), GP64(), GP64()
	xr, xi, cr, ci := m.vec(), m.vec(), m.vec(), m.vec()
	var acc [3][4]reg.VecVirtual // rr, ii, ri, ir
	for t := range acc {
		for k := range acc[t] {
			acc[t][k] = m.vec()
		}
	}

	Label("group")
	MOVLQSX(Mem{Base: index}, d)
	MOVLQSX(Mem{Base: index, Disp: 4}, r)
	MOVLQSX(Mem{Base: index, Disp: 8}, n)
	ADDQ(U8(12), index)
	toRows(r)
	for code := 6; code >= 1; code-- {
		t, from, wide := code, coef, 16
		if code > 3 {
			t, from, wide = code-3, own, stride
		}
		Label(fmt.Sprintf("rows%d", code))
		for p := range m.parts() {
			MOVQ(index, at)
			MOVQ(from, c)
			MOVQ(n, left)
			for k := range t {
				a := acc[k]
				zero(a[1])
				zero(a[3])
				if kind == "Add" {
					VMOVUPD(m.re(dst, d, p).Offset(k*stride), a[0])
					VMOVUPD(m.im(dst, d, p).Offset(k*stride), a[2])
				} else {
					zero(a[0])
					zero(a[2])
				}
			}
			loop := fmt.Sprintf("columns%d_%d", code, p)
			Label(loop)
			m.column(src, at, s, c, xr, xi, cr, ci, acc[:t], wide, p)
			DECQ(left)
			JNZ(LabelRef(loop))
			for k := range t {
				a := acc[k]
				VSUBPD(a[1], a[0], a[0])
				VADDPD(a[3], a[2], a[2])
				VMOVUPD(a[0], m.re(dst, d, p).Offset(k*stride))
				VMOVUPD(a[2], m.im(dst, d, p).Offset(k*stride))
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
	VZEROUPPER()
	RET()
}

// toRows jumps to the code of a group's rows.
func toRows(r reg.Register) {
	CMPQ(r, U8(2))
	JLT(LabelRef("rows1"))
	JEQ(LabelRef("rows2"))
	CMPQ(r, U8(4))
	JLT(LabelRef("rows3"))
	JEQ(LabelRef("rows4"))
	CMPQ(r, U8(5))
	JEQ(LabelRef("rows5"))
	JMP(LabelRef("rows6"))
}

// column adds a source, whose offset stands at, times its coefficients at c, to the sums of
// a group's rows. A coefficient that all lanes share has 16 bytes, else it has a stride.
func (m machine) column(base reg.Register, at, s, c reg.GPVirtual, xr, xi, cr, ci reg.VecVirtual, acc [][4]reg.VecVirtual, size, part int) {
	MOVLQSX(Mem{Base: at}, s)
	ADDQ(U8(4), at)
	VMOVUPD(m.re(base, s, part), xr)
	VMOVUPD(m.im(base, s, part), xi)
	for k, a := range acc {
		if size == stride {
			z := Mem{Base: c, Disp: stride*k + part*m.bytes}
			VMOVUPD(z, cr)
			VMOVUPD(z.Offset(8*lanes), ci)
		} else {
			VBROADCASTSD(Mem{Base: c, Disp: 16 * k}, cr)
			VBROADCASTSD(Mem{Base: c, Disp: 16*k + 8}, ci)
		}
		VFMADD231PD(xr, cr, a[0])
		VFMADD231PD(xi, ci, a[1])
		VFMADD231PD(xi, cr, a[2])
		VFMADD231PD(xr, ci, a[3])
	}
	ADDQ(U32(size*len(acc)), c)
}
