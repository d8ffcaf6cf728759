//go:build avo

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
)

// pick moves lanes about. AVX2 has no permutation of two times four registers: there plain
// Go does it.
func (m machine) pick() {
	if m.bytes != 64 {
		return
	}
	name := "pick" + m.name
	TEXT(name, NOSPLIT, "func(a, b *float64, from *uint64, n int)")
	Pragma("noescape")
	Doc(name + " is the kernel of Pick.")
	a, b := Load(Param("a"), GP64()), Load(Param("b"), GP64())
	from, n := Load(Param("from"), GP64()), Load(Param("n"), GP64())
	index, re, im := m.vec(), m.vec(), m.vec()
	VMOVUPD(Mem{Base: from}, index)
	Label("value")
	VMOVUPD(Mem{Base: a}, re)
	VMOVUPD(Mem{Base: a, Disp: 8 * lanes}, im)
	VPERMT2PD(Mem{Base: b}, index, re)
	VPERMT2PD(Mem{Base: b, Disp: 8 * lanes}, index, im)
	VMOVUPD(re, Mem{Base: a})
	VMOVUPD(im, Mem{Base: a, Disp: 8 * lanes})
	ADDQ(U32(stride), a)
	ADDQ(U32(stride), b)
	DECQ(n)
	JNZ(LabelRef("value"))
	VZEROUPPER()
	RET()
}
