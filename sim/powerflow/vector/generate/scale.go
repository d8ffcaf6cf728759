//go:build avo

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
)

// scale multiplies shares by rows of eight numbers: those of the real parts by one row,
// those of the imaginary parts by another.
func (m machine) scale() {
	name := "scale" + m.name
	TEXT(name, NOSPLIT, "func(power, values *float64, index *int32, share *float64, n int)")
	Pragma("noescape")
	Doc(name + " is the kernel of Drives.Scale.")
	power, values := Load(Param("power"), GP64()), Load(Param("values"), GP64())
	index, share := Load(Param("index"), GP64()), Load(Param("share"), GP64())
	n := Load(Param("n"), GP64())
	re, im := GP64(), GP64()
	p, q := m.vec(), m.vec()
	Label("branch")
	MOVLQSX(Mem{Base: index}, re)
	MOVLQSX(Mem{Base: index, Disp: 4}, im)
	ADDQ(U8(8), index)
	for part := range m.parts() {
		VBROADCASTSD(Mem{Base: share}, p)
		VBROADCASTSD(Mem{Base: share, Disp: 8}, q)
		VMULPD(m.re(values, re, part), p, p)
		VMULPD(m.re(values, im, part), q, q)
		VMOVUPD(p, Mem{Base: power, Disp: part * m.bytes})
		VMOVUPD(q, Mem{Base: power, Disp: part*m.bytes + 8*lanes})
	}
	ADDQ(U8(16), share)
	ADDQ(U32(stride), power)
	DECQ(n)
	JNZ(LabelRef("branch"))
	VZEROUPPER()
	RET()
}

// predict sets values to parabolas through time: a + w·b + w²·c, w by lane.
func (m machine) predict() {
	name := "predict" + m.name
	TEXT(name, NOSPLIT, "func(v, curve, when *float64, n int)")
	Pragma("noescape")
	Doc(name + " is the kernel of Predict.")
	v, curve := Load(Param("v"), GP64()), Load(Param("curve"), GP64())
	when, n := Load(Param("when"), GP64()), Load(Param("n"), GP64())
	w := m.vecs()
	for p := range w {
		VMOVUPD(Mem{Base: when, Disp: p * m.bytes}, w[p])
	}
	c, x := m.vec(), m.vec()
	Label("value")
	for part, off := range []int{0, 8} {
		for p := range w {
			VBROADCASTSD(Mem{Base: curve, Disp: 32 + off}, x)
			VBROADCASTSD(Mem{Base: curve, Disp: 16 + off}, c)
			VFMADD231PD(x, w[p], c)
			VBROADCASTSD(Mem{Base: curve, Disp: off}, x)
			VFMADD231PD(c, w[p], x)
			VMOVUPD(x, Mem{Base: v, Disp: p*m.bytes + part*8*lanes})
		}
	}
	ADDQ(U8(48), curve)
	ADDQ(U32(stride), v)
	DECQ(n)
	JNZ(LabelRef("value"))
	VZEROUPPER()
	RET()
}
