//go:build avo

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
)

// blank sets listed values to zero.
func (m machine) blank() {
	name := "blank" + m.name
	TEXT(name, NOSPLIT, "func(x *float64, index *int32, n int)")
	Pragma("noescape")
	Doc(name + " is the kernel of Blank.")
	x, index, n := Load(Param("x"), GP64()), Load(Param("index"), GP64()), Load(Param("n"), GP64())
	at, nought := GP64(), m.vec()
	zero(nought)
	Label("value")
	MOVLQSX(Mem{Base: index}, at)
	ADDQ(U8(4), index)
	for p := range m.parts() {
		VMOVUPD(nought, m.re(x, at, p))
		VMOVUPD(nought, m.im(x, at, p))
	}
	DECQ(n)
	JNZ(LabelRef("value"))
	VZEROUPPER()
	RET()
}
