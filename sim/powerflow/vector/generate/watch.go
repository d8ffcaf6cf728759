//go:build avo

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// watch writes the kernels that look at solved instants.
func (m machine) watch() {
	m.lengths()
	m.dots()
	m.squares()
	m.banks()
	m.triples()
	m.bins()
}

func (m machine) lengths() {
	begin("lengths"+m.name, "Lengths.Watch", "func(out, v *float64, index *int32, rows *float64, flags, left *uint8, mask *uint64, least, most *float64, n int) uint64")
	out, v := Load(Param("out"), GP64()), Load(Param("v"), GP64())
	index, rows := Load(Param("index"), GP64()), Load(Param("rows"), GP64())
	n := Load(Param("n"), GP64())
	w := m.newWatcher()
	left := GP64()
	Load(Param("left"), left)
	from, to := GP64(), GP64()
	least, most := m.vecs(), m.vecs()
	x, y := m.vecs(), m.vecs()
	b := m.vec()
	for p := range least {
		broadcast(0x7ff0000000000000, least[p])
		broadcast(0xfff0000000000000, most[p])
	}
	Label("row")
	MOVLQSX(Mem{Base: index}, from)
	MOVLQSX(Mem{Base: index, Disp: 4}, to)
	ADDQ(U8(8), index)
	XORQ(w.row, w.row)
	for p := range x {
		VMOVUPD(m.re(v, from, p), x[p])
		VMOVUPD(m.im(v, from, p), y[p])
	}
	TESTQ(to, to)
	JS(LabelRef("ground"))
	for p := range x {
		VSUBPD(m.re(v, to, p), x[p], x[p])
		VSUBPD(m.im(v, to, p), y[p], y[p])
	}
	Label("ground")
	VBROADCASTSD(Mem{Base: rows}, b)
	for p := range x {
		VMULPD(x[p], x[p], x[p])
		VMULPD(y[p], y[p], y[p])
		VADDPD(y[p], x[p], x[p])
		VSQRTPD(x[p], x[p])
		VDIVPD(b, x[p], x[p])
		VMOVUPD(x[p], Mem{Base: out, Disp: p * m.bytes})
		VMINPD(least[p], x[p], least[p])
		VMAXPD(most[p], x[p], most[p])
	}
	VBROADCASTSD(Mem{Base: rows, Disp: 8}, b)
	for p := range x {
		w.compare(notAboveOrEqual, b, x[p], p)
	}
	VBROADCASTSD(Mem{Base: rows, Disp: 16}, b)
	for p := range x {
		w.compare(notBelowOrEqual, b, x[p], p)
	}
	w.flag()
	XORQ(w.row, w.row)
	VBROADCASTSD(Mem{Base: rows, Disp: 24}, b)
	for p := range x {
		w.compare(notAboveOrEqual, b, x[p], p)
	}
	VBROADCASTSD(Mem{Base: rows, Disp: 32}, b)
	for p := range x {
		w.compare(notBelowOrEqual, b, x[p], p)
	}
	ANDQ(w.live, w.row)
	MOVB(w.row.As8(), Mem{Base: left})
	INCQ(left)
	SHLQ(U8(8), w.row)
	ORQ(w.row, w.any)
	w.gather(x, Mem{Base: rows, Disp: 40})
	ADDQ(U8(48), rows)
	ADDQ(U8(8*lanes), out)
	DECQ(n)
	JNZ(LabelRef("row"))
	Load(Param("least"), to)
	for p := range least {
		VMOVUPD(least[p], Mem{Base: to, Disp: p * m.bytes})
	}
	Load(Param("most"), to)
	for p := range most {
		VMOVUPD(most[p], Mem{Base: to, Disp: p * m.bytes})
	}
	w.end()
}

func (m machine) dots() {
	begin("dots"+m.name, "Dots.Watch", "func(out, v, i *float64, index *int32, rows, limits *float64, flags, over *uint8, mask *uint64, total *float64, n int) uint64")
	out, v, i := Load(Param("out"), GP64()), Load(Param("v"), GP64()), Load(Param("i"), GP64())
	index, rows := Load(Param("index"), GP64()), Load(Param("rows"), GP64())
	limits := Load(Param("limits"), GP64())
	w := m.newWatcher()
	a, c, k := GP64(), GP64(), GP64()
	total, x, y, z := m.vecs(), m.vecs(), m.vecs(), m.vecs()
	b, re, im := m.vec(), m.vec(), m.vec()
	var high []reg.VecVirtual
	var above, one reg.OpmaskVirtual
	if m.bytes == 32 {
		high = m.vecs()
	} else {
		above, one = K(), K()
	}
	for p := range total {
		zero(total[p])
	}
	Label("row")
	MOVLQSX(Mem{Base: index}, k)
	ADDQ(U8(4), index)
	XORQ(w.row, w.row)
	for p := range x {
		zero(x[p])
		if high != nil {
			zero(high[p])
		}
	}
	if high == nil {
		KXORB(above, above, above)
	}
	TESTQ(k, k)
	JZ(LabelRef("end"))
	Label("pair")
	MOVLQSX(Mem{Base: index}, a)
	MOVLQSX(Mem{Base: index, Disp: 4}, c)
	ADDQ(U8(8), index)
	VBROADCASTSD(Mem{Base: limits}, b)
	ADDQ(U8(8), limits)
	for p := range x {
		VMOVUPD(m.re(i, c, p), re)
		VMOVUPD(m.im(i, c, p), im)
		VMULPD(m.re(v, a, p), re, y[p])
		VMULPD(m.im(v, a, p), im, z[p])
		VADDPD(z[p], y[p], y[p])
		VADDPD(y[p], x[p], x[p])
		VMULPD(re, re, re)
		VMULPD(im, im, im)
		VADDPD(im, re, re)
		if high != nil {
			VCMPPD(U8(notBelowOrEqual), b, re, re)
			VORPD(re, high[p], high[p])
		} else {
			VCMPPD(U8(notBelowOrEqual), b, re, one)
			KORB(one, above, above)
		}
	}
	DECQ(k)
	JNZ(LabelRef("pair"))
	Label("end")
	if high != nil {
		for p := range high {
			w.bits(high[p], w.row, p)
		}
	} else {
		KMOVB(above, w.row.As32())
	}
	ANDQ(w.live, w.row)
	Load(Param("over"), a)
	Load(Param("n"), c)
	MOVB(w.row.As8(), Mem{Base: a})
	INCQ(a)
	Store(a, Param("over"))
	SHLQ(U8(8), w.row)
	ORQ(w.row, w.any)
	XORQ(w.row, w.row)
	VBROADCASTSD(Mem{Base: rows}, b)
	for p := range x {
		VMOVUPD(x[p], Mem{Base: out, Disp: p * m.bytes})
		VADDPD(x[p], total[p], total[p])
		w.compare(notBelowOrEqual, b, x[p], p)
	}
	w.gather(x, Mem{Base: rows, Disp: 8})
	w.flag()
	ADDQ(U8(16), rows)
	ADDQ(U8(8*lanes), out)
	DECQ(c)
	Store(c, Param("n"))
	JNZ(LabelRef("row"))
	Load(Param("total"), a)
	for p := range total {
		VMOVUPD(total[p], Mem{Base: a, Disp: p * m.bytes})
	}
	w.end()
}

func (m machine) squares() {
	begin("squares"+m.name, "Squares.Watch", "func(x *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) uint64")
	x, index, high := Load(Param("x"), GP64()), Load(Param("index"), GP64()), Load(Param("high"), GP64())
	n := Load(Param("n"), GP64())
	w := m.newWatcher()
	a, c := GP64(), GP64()
	re, s, t, b := m.vec(), m.vec(), m.vec(), m.vec()
	Label("row")
	MOVLQSX(Mem{Base: index}, a)
	MOVLQSX(Mem{Base: index, Disp: 4}, c)
	ADDQ(U8(8), index)
	XORQ(w.row, w.row)
	VBROADCASTSD(Mem{Base: high}, b)
	ADDQ(U8(8), high)
	for p := range m.parts() {
		for k, at := range []reg.GPVirtual{a, c} {
			into := []reg.VecVirtual{s, t}[k]
			VMOVUPD(m.re(x, at, p), re)
			VMOVUPD(m.im(x, at, p), into)
			VMULPD(into, into, into)
			VMULPD(re, re, re)
			VADDPD(into, re, into)
		}
		VMAXPD(s, t, s)
		w.compare(notBelowOrEqual, b, s, p)
	}
	w.flag()
	DECQ(n)
	JNZ(LabelRef("row"))
	w.end()
}

func (m machine) banks() {
	begin("banks"+m.name, "Banks.Watch", "func(v, i *float64, index *int32, high *float64, flags *uint8, mask *uint64, n int) uint64")
	v, i := Load(Param("v"), GP64()), Load(Param("i"), GP64())
	index, high := Load(Param("index"), GP64()), Load(Param("high"), GP64())
	n := Load(Param("n"), GP64())
	w := m.newWatcher()
	a, c, k := GP64(), GP64(), GP64()
	re, im := m.vecs(), m.vecs()
	x, y, z, u, b := m.vec(), m.vec(), m.vec(), m.vec(), m.vec()
	Label("row")
	MOVLQSX(Mem{Base: index}, k)
	ADDQ(U8(4), index)
	XORQ(w.row, w.row)
	for p := range re {
		zero(re[p])
		zero(im[p])
	}
	TESTQ(k, k)
	JZ(LabelRef("end"))
	Label("pair")
	MOVLQSX(Mem{Base: index}, a)
	MOVLQSX(Mem{Base: index, Disp: 4}, c)
	ADDQ(U8(8), index)
	for p := range re {
		VMOVUPD(m.re(v, a, p), x)
		VMOVUPD(m.im(v, a, p), y)
		VMULPD(m.re(i, c, p), x, z)
		VMULPD(m.im(i, c, p), y, u)
		VADDPD(u, z, z)
		VADDPD(z, re[p], re[p])
		VMULPD(m.re(i, c, p), y, z)
		VMULPD(m.im(i, c, p), x, u)
		VSUBPD(u, z, z)
		VADDPD(z, im[p], im[p])
	}
	DECQ(k)
	JNZ(LabelRef("pair"))
	Label("end")
	VBROADCASTSD(Mem{Base: high}, b)
	ADDQ(U8(8), high)
	for p := range re {
		VMULPD(im[p], im[p], im[p])
		VMULPD(re[p], re[p], re[p])
		VADDPD(im[p], re[p], im[p])
		w.compare(notBelowOrEqual, b, im[p], p)
	}
	w.flag()
	DECQ(n)
	JNZ(LabelRef("row"))
	w.end()
}

func (m machine) triples() {
	begin("triples"+m.name, "Triples.Watch", "func(out, v *float64, index *int32, constants, far, ratio *float64, n int)")
	out, v := Load(Param("out"), GP64()), Load(Param("v"), GP64())
	index, constants := Load(Param("index"), GP64()), Load(Param("constants"), GP64())
	far, ratio, n := Load(Param("far"), GP64()), Load(Param("ratio"), GP64()), Load(Param("n"), GP64())
	var at [3]reg.GPVirtual
	for k := range at {
		at[k] = GP64()
	}
	var re, im [3]reg.VecVirtual
	for k := range re {
		re[k], im[k] = m.vec(), m.vec()
	}
	var sq [3]reg.VecVirtual
	for k := range sq {
		sq[k] = m.vec()
	}
	s, t, u, c := m.vec(), m.vec(), m.vec(), m.vec()
	// square sets d to e² + d².
	square := func(e, d reg.VecVirtual) {
		VMULPD(d, d, d)
		VFMADD231PD(e, e, d)
	}
	Label("row")
	for k := range at {
		MOVLQSX(Mem{Base: index, Disp: 4 * k}, at[k])
	}
	ADDQ(U8(12), index)
	for p := range m.parts() {
		for k := range at {
			VMOVUPD(m.re(v, at[k], p), re[k])
			VMOVUPD(m.im(v, at[k], p), im[k])
		}
		for k := range at {
			next := (k + 1) % 3
			VSUBPD(re[next], re[k], s)
			VSUBPD(im[next], im[k], sq[k])
			square(s, sq[k])
		}
		VADDPD(sq[1], sq[0], s)
		VADDPD(sq[2], s, s)
		VBROADCASTSD(Mem{Base: constants}, c)
		VMULPD(c, s, s) // mean
		VMAXPD(sq[2], sq[1], t)
		VMAXPD(t, sq[0], t)
		VSUBPD(s, t, t)
		VMINPD(sq[2], sq[1], u)
		VMINPD(u, sq[0], u)
		VSUBPD(u, s, u)
		VMAXPD(u, t, t)
		VDIVPD(s, t, t)
		VMOVUPD(t, Mem{Base: out, Disp: p * m.bytes})
		VMAXPD(Mem{Base: far, Disp: p * m.bytes}, t, t)
		VMOVUPD(t, Mem{Base: far, Disp: p * m.bytes})
		// a − (b + c)/2 in place of a, ± j·sin 120°·(b − c)
		VBROADCASTSD(Mem{Base: constants, Disp: 8}, c)
		VADDPD(re[2], re[1], s)
		VFNMADD231PD(s, c, re[0])
		VADDPD(im[2], im[1], s)
		VFNMADD231PD(s, c, im[0])
		VBROADCASTSD(Mem{Base: constants, Disp: 16}, c)
		VSUBPD(im[2], im[1], t)
		VMULPD(c, t, t)
		VSUBPD(re[2], re[1], u)
		VMULPD(c, u, u)
		VADDPD(t, re[0], sq[0])
		VSUBPD(u, im[0], sq[1])
		square(sq[0], sq[1])
		VSUBPD(t, re[0], sq[0])
		VADDPD(u, im[0], sq[2])
		square(sq[0], sq[2])
		VDIVPD(sq[2], sq[1], t)
		VMOVUPD(t, Mem{Base: out, Disp: p*m.bytes + 8*lanes})
		VMAXPD(Mem{Base: ratio, Disp: p * m.bytes}, t, t)
		VMOVUPD(t, Mem{Base: ratio, Disp: p * m.bytes})
	}
	ADDQ(U32(stride), out)
	DECQ(n)
	JNZ(LabelRef("row"))
	VZEROUPPER()
	RET()
}

func (m machine) bins() {
	begin("bins"+m.name, "Bins", "func(out *int32, x, scale *float64, n int)")
	out, x := Load(Param("out"), GP64()), Load(Param("x"), GP64())
	scale, n := Load(Param("scale"), GP64()), Load(Param("n"), GP64())
	width, limit, low, d := m.vec(), m.vec(), m.vec(), m.vec()
	VBROADCASTSD(Mem{Base: scale}, width)
	VBROADCASTSD(Mem{Base: scale, Disp: 8}, limit)
	zero(low)
	Label("row")
	for p := range m.parts() {
		VMOVUPD(Mem{Base: x, Disp: p * m.bytes}, d)
		VDIVPD(width, d, d)
		VMINPD(limit, d, d)
		VMAXPD(low, d, d)
		if m.bytes == 64 {
			y := YMM()
			VCVTTPD2DQ(d, y)
			VMOVDQU(y, Mem{Base: out})
		} else {
			y := XMM()
			VCVTTPD2DQY(d, y)
			VMOVDQU(y, Mem{Base: out, Disp: p * 16})
		}
	}
	ADDQ(U8(8*lanes), x)
	ADDQ(U8(4*lanes), out)
	DECQ(n)
	JNZ(LabelRef("row"))
	VZEROUPPER()
	RET()
}
