//go:build avo

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
)

// shift adds multiples of directions, a part of the lanes after another.
func (m machine) shift() {
	name := "shift" + m.name
	TEXT(name, NOSPLIT, "func(v, coef *float64, offset *int64, times *float64, directions, n int)")
	Pragma("noescape")
	Doc(name + " is the kernel of Directions.Shift.")
	v, coef := Load(Param("v"), GP64()), Load(Param("coef"), GP64())
	offset, times := Load(Param("offset"), GP64()), Load(Param("times"), GP64())
	directions, n := Load(Param("directions"), GP64()), Load(Param("n"), GP64())
	at, by, left, o := GP64(), GP64(), GP64(), GP64()
	re, im, t, c := m.vec(), m.vec(), m.vec(), m.vec()
	Label("value")
	for p := range m.parts() {
		VMOVUPD(Mem{Base: v, Disp: p * m.bytes}, re)
		VMOVUPD(Mem{Base: v, Disp: p*m.bytes + 8*lanes}, im)
		MOVQ(offset, at)
		MOVQ(times, by)
		MOVQ(directions, left)
		loop := "direction" + string(rune('0'+p))
		Label(loop)
		MOVQ(Mem{Base: at}, o)
		VMOVUPD(Mem{Base: by, Disp: p * m.bytes}, t)
		VBROADCASTSD(Mem{Base: coef, Index: o, Scale: 1}, c)
		VFMADD231PD(c, t, re)
		VBROADCASTSD(Mem{Base: coef, Index: o, Scale: 1, Disp: 8}, c)
		VFMADD231PD(c, t, im)
		ADDQ(U8(8), at)
		ADDQ(U8(8*lanes), by)
		DECQ(left)
		JNZ(LabelRef(loop))
		VMOVUPD(re, Mem{Base: v, Disp: p * m.bytes})
		VMOVUPD(im, Mem{Base: v, Disp: p*m.bytes + 8*lanes})
	}
	ADDQ(U8(16), coef)
	ADDQ(U32(stride), v)
	DECQ(n)
	JNZ(LabelRef("value"))
	VZEROUPPER()
	RET()
}
