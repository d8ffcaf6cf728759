//go:build avo

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

func begin(name, of, signature string) {
	TEXT(name, NOSPLIT, signature)
	Pragma("noescape")
	Doc(name + " is the kernel of " + of + ".")
}

// Comparisons that hold of what is no number, too.
const (
	notBelowOrEqual = 6
	notAboveOrEqual = 9
)

// watcher makes flags: of each row the lanes of the mask in which a comparison holds.
type watcher struct {
	machine
	flags, live, any reg.GPVirtual
	row              reg.GPVirtual
	k                reg.OpmaskVirtual
	masks            reg.GPVirtual
}

func (m machine) newWatcher() *watcher {
	w := &watcher{machine: m, masks: GP64()}
	w.flags = GP64()
	Load(Param("flags"), w.flags)
	Load(Param("mask"), w.masks)
	w.live, w.any, w.row = GP64(), GP64(), GP64()
	XORQ(w.any, w.any)
	XORQ(w.live, w.live)
	t := m.vec()
	if m.bytes == 64 {
		w.k = K()
		VMOVUPD(Mem{Base: w.masks}, t)
		VPMOVQ2M(t, w.k)
		KMOVB(w.k, w.live.As32())
		w.k = K()
		return w
	}
	for p := range m.parts() {
		VMOVUPD(Mem{Base: w.masks, Disp: p * m.bytes}, t)
		w.bits(t, w.live, p)
	}
	return w
}

// bits ors the signs of a part into a register.
func (w *watcher) bits(t reg.VecVirtual, into reg.GPVirtual, part int) {
	b := GP32()
	VMOVMSKPD(t, b)
	if part > 0 {
		SHLL(U8(4*part), b)
	}
	ORQ(b.As64(), into)
}

// compare adds the lanes of a part in which x stands to the bound as the comparison says.
func (w *watcher) compare(how uint8, bound, x reg.VecVirtual, part int) {
	if w.bytes == 64 {
		b := GP32()
		VCMPPD(U8(how), bound, x, w.k)
		KMOVB(w.k, b)
		ORQ(b.As64(), w.row)
		return
	}
	t := w.vec()
	VCMPPD(U8(how), bound, x, t)
	w.bits(t, w.row, part)
}

// flag stores the flags of a row.
func (w *watcher) flag() {
	ANDQ(w.live, w.row)
	ORQ(w.row, w.any)
	MOVB(w.row.As8(), Mem{Base: w.flags})
	INCQ(w.flags)
}

func (w *watcher) end() {
	Store(w.any, ReturnIndex(0))
	VZEROUPPER()
	RET()
}

// gather adds the sum of the lanes of the mask to a number in memory; x is lost.
func (w *watcher) gather(x []reg.VecVirtual, sum Mem) {
	for p := range x {
		if w.bytes == 64 {
			VPANDQ(Mem{Base: w.masks}, x[p], x[p])
		} else {
			VANDPD(Mem{Base: w.masks, Disp: p * w.bytes}, x[p], x[p])
		}
	}
	var y reg.VecVirtual
	if w.bytes == 64 {
		y = YMM()
		VEXTRACTF64X4(U8(1), x[0], y)
		VADDPD(x[0].(reg.Vec).AsY(), y, y)
	} else {
		y = x[0]
		VADDPD(x[1], y, y)
	}
	h := XMM()
	VEXTRACTF128(U8(1), y.(reg.Vec).AsY(), h)
	VADDPD(y.(reg.Vec).AsX(), h, h)
	g := XMM()
	VUNPCKHPD(h, h, g)
	VADDSD(g, h, h)
	VADDSD(sum, h, h)
	VMOVSD(h, sum)
}

func broadcast(bits uint64, v reg.VecVirtual) {
	g, x := GP64(), XMM()
	MOVQ(U64(bits), g)
	MOVQ(g, x)
	VBROADCASTSD(x, v)
}
