//go:build avo

// Generate writes the assembly of package vector for AVX2 and for AVX-512: the same
// program twice, a component of a value being two registers or one.
package main

import (
	"flag"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

const lanes, stride = 8, 128

func main() {
	part := flag.String("part", "flow", "the kernels to write: flow, or watch")
	flag.Parse()
	ConstraintExpr("amd64,!purego")
	for _, m := range []machine{{"256", 32}, {"512", 64}} {
		if *part == "watch" {
			m.watch()
			continue
		}
		m.rows("Set")
		m.rows("Add")
		m.draw("Wye", false, false, false)
		m.draw("Pair", true, false, false)
		m.draw("WyeZIP", false, true, false)
		m.draw("PairZIP", true, true, false)
		m.draw("WyeFirst", false, false, true)
		m.draw("WyeZIPFirst", false, true, true)
		m.advance()
		m.scale()
		m.predict()
		m.groups("Set")
		m.groups("Add")
		m.back()
		m.products()
		m.pick()
		m.blank()
		m.shift()
	}
	Generate()
}

// machine is one kind of registers.
type machine struct {
	name  string
	bytes int // of a register
}

// parts is the number of registers of a component.
func (m machine) parts() int { return 8 * lanes / m.bytes }

func (m machine) vec() reg.VecVirtual {
	if m.bytes == 64 {
		return ZMM()
	}
	return YMM()
}

func (m machine) vecs() []reg.VecVirtual {
	v := make([]reg.VecVirtual, m.parts())
	for i := range v {
		v[i] = m.vec()
	}
	return v
}

// re and im are a part of a value in memory.
func (m machine) re(base reg.Register, index reg.Register, part int) Mem {
	return Mem{Base: base, Index: index, Scale: 1, Disp: part * m.bytes}
}

func (m machine) im(base reg.Register, index reg.Register, part int) Mem {
	return m.re(base, index, part).Offset(8 * lanes)
}

func zero(v reg.VecVirtual) {
	if v.Size() == 64 {
		VPXORQ(v, v, v)
		return
	}
	VXORPD(v, v, v)
}

func (m machine) rows(kind string) {
	name := "rows" + kind + m.name
	TEXT(name, NOSPLIT, "func(dst, src *float64, index *int32, coef *float64, rows int)")
	Pragma("noescape")
	Doc(name + " is the kernel of Rows." + kind + ".")
	dst, src := Load(Param("dst"), GP64()), Load(Param("src"), GP64())
	index, coef := Load(Param("index"), GP64()), Load(Param("coef"), GP64())
	rows := Load(Param("rows"), GP64())
	d, n, s := GP64(), GP64(), GP64()
	rr, ii, ri, ir := m.vecs(), m.vecs(), m.vecs(), m.vecs()
	xr, xi := m.vecs(), m.vecs()
	cr, ci := m.vec(), m.vec()

	Label("row")
	MOVLQSX(Mem{Base: index}, d)
	MOVLQSX(Mem{Base: index, Disp: 4}, n)
	ADDQ(U8(8), index)
	switch kind {
	case "Set":
		for p := range rr {
			zero(rr[p])
			zero(ii[p])
			zero(ri[p])
			zero(ir[p])
		}
	case "Add":
		for p := range rr {
			VMOVUPD(m.re(dst, d, p), rr[p])
			VMOVUPD(m.im(dst, d, p), ri[p])
			zero(ii[p])
			zero(ir[p])
		}

	}
	TESTQ(n, n)
	JZ(LabelRef("end"))

	Label("entry")
	MOVLQSX(Mem{Base: index}, s)
	ADDQ(U8(4), index)
	VBROADCASTSD(Mem{Base: coef}, cr)
	VBROADCASTSD(Mem{Base: coef, Disp: 8}, ci)
	ADDQ(U8(16), coef)
	for p := range rr {
		VMOVUPD(m.re(src, s, p), xr[p])
		VMOVUPD(m.im(src, s, p), xi[p])
		VFMADD231PD(xr[p], cr, rr[p])
		VFMADD231PD(xi[p], ci, ii[p])
		VFMADD231PD(xi[p], cr, ri[p])
		VFMADD231PD(xr[p], ci, ir[p])
	}
	DECQ(n)
	JNZ(LabelRef("entry"))

	Label("end")
	for p := range rr {
		VSUBPD(ii[p], rr[p], rr[p])
		VADDPD(ir[p], ri[p], ri[p])
		VMOVUPD(rr[p], m.re(dst, d, p))
		VMOVUPD(ri[p], m.im(dst, d, p))
	}
	DECQ(rows)
	JNZ(LabelRef("row"))
	VZEROUPPER()
	RET()
}

// draw has one part of a component after another: each needs nearly all registers.
func (m machine) draw(kind string, pair, zip, begins bool) {
	name := "draw" + kind + m.name
	TEXT(name, NOSPLIT, "func(into, v, power *float64, index *int32, shape *float64, n int) (below uint64)")
	Pragma("noescape")
	Doc(name + " is a kernel of Loads.Draw.")
	into, v := Load(Param("into"), GP64()), Load(Param("v"), GP64())
	power, index := Load(Param("power"), GP64()), Load(Param("index"), GP64())
	shape, n := Load(Param("shape"), GP64()), Load(Param("n"), GP64())
	from, to := GP64(), GP64()
	one := m.vec()
	uno := GP64()
	MOVQ(U64(0x3ff0000000000000), uno)
	x := XMM()
	MOVQ(uno, x)
	VBROADCASTSD(x, one)
	below := make([]reg.GPVirtual, m.parts())
	var flags []reg.VecVirtual
	if m.bytes == 32 {
		flags = m.vecs()
		for _, f := range flags {
			zero(f)
		}
	} else {
		for p := range below {
			below[p] = GP64()
			XORQ(below[p], below[p])
		}
	}
	k, bits := K(), GP64()
	least, re, im, g := m.vec(), m.vec(), m.vec(), m.vec()
	P, Q, ir, ii, root, a, b := m.vec(), m.vec(), m.vec(), m.vec(), m.vec(), m.vec(), m.vec()

	Label("branch")
	MOVLQSX(Mem{Base: index}, from)
	if pair {
		MOVLQSX(Mem{Base: index, Disp: 4}, to)
		ADDQ(U8(8), index)
	} else {
		ADDQ(U8(4), index)
	}
	for p := range m.parts() {
		VBROADCASTSD(Mem{Base: shape}, least)
		VMOVUPD(m.re(v, from, p), re)
		VMOVUPD(m.im(v, from, p), im)
		if pair {
			VSUBPD(m.re(v, to, p), re, re)
			VSUBPD(m.im(v, to, p), im, im)
		}
		VMULPD(im, im, g)
		VFMADD231PD(re, re, g)
		// Not above or equal, unordered: 9.
		if m.bytes == 32 {
			VCMPPD(U8(9), least, g, a)
			VORPD(a, flags[p], flags[p])
		} else {
			VCMPPD(U8(9), least, g, k)
			KMOVQ(k, bits)
			ORQ(bits, below[p])
		}
		VDIVPD(g, one, g)
		VMOVUPD(Mem{Base: power, Disp: p * m.bytes}, P)
		VMOVUPD(Mem{Base: power, Disp: p*m.bytes + 8*lanes}, Q)
		if zip {
			VSQRTPD(g, root)
			for i, s := range []reg.VecVirtual{P, Q} {
				VBROADCASTSD(Mem{Base: shape, Disp: 8 * (3 + 3*i)}, a) // Z
				VBROADCASTSD(Mem{Base: shape, Disp: 8 * (2 + 3*i)}, b) // I
				VFMADD231PD(root, b, a)
				VBROADCASTSD(Mem{Base: shape, Disp: 8 * (1 + 3*i)}, b) // C
				VFMADD231PD(g, b, a)
				VMULPD(a, s, s)
			}
		}
		VMULPD(Q, im, ir)
		VFMADD231PD(P, re, ir)
		VMULPD(Q, re, ii)
		VFMSUB231PD(P, im, ii)
		if !zip {
			VMULPD(g, ir, ir)
			VMULPD(g, ii, ii)
		}
		for c, i := range []reg.VecVirtual{ir, ii} {
			at := m.re(into, from, p).Offset(8 * lanes * c)
			if begins {
				zero(a)
			} else {
				VMOVUPD(at, a)
			}
			VSUBPD(i, a, a)
			VMOVUPD(a, at)
		}
		if pair {
			VADDPD(m.re(into, to, p), ir, ir)
			VMOVUPD(ir, m.re(into, to, p))
			VADDPD(m.im(into, to, p), ii, ii)
			VMOVUPD(ii, m.im(into, to, p))
		}
	}
	wide := uint8(8)
	if zip {
		wide = 56
	}
	ADDQ(U8(wide), shape)
	ADDQ(U32(stride), power)
	DECQ(n)
	JNZ(LabelRef("branch"))

	out := GP64()
	XORQ(out, out)
	for p := range m.parts() {
		if m.bytes == 32 {
			w := GP32()
			VMOVMSKPD(flags[p], w)
			SHLQ(U8(4*p), w.As64())
			ORQ(w.As64(), out)
		} else {
			ORQ(below[p], out)
		}
	}
	Store(out, ReturnIndex(0))
	VZEROUPPER()
	RET()
}

func (m machine) advance() {
	name := "advance" + m.name
	TEXT(name, NOSPLIT, "func(v, x, weight *float64, mask *uint64, moved *float64, n int)")
	Pragma("noescape")
	Doc(name + " is the kernel of Advance.")
	v, x := Load(Param("v"), GP64()), Load(Param("x"), GP64())
	weight, mask := Load(Param("weight"), GP64()), Load(Param("mask"), GP64())
	moved, n := Load(Param("moved"), GP64()), Load(Param("n"), GP64())
	most, sum, keep := m.vecs(), m.vecs(), m.vecs()
	var k []reg.OpmaskVirtual
	for p := range most {
		zero(most[p])
		zero(sum[p])
		VMOVUPD(Mem{Base: mask, Disp: p * m.bytes}, keep[p])
		if m.bytes == 64 {
			k = append(k, K())
			VPMOVQ2M(keep[p], k[p])
		}
	}
	re, im, a, b, d, w := m.vec(), m.vec(), m.vec(), m.vec(), m.vec(), m.vec()
	Label("value")
	VBROADCASTSD(Mem{Base: weight}, w)
	ADDQ(U8(8), weight)
	for p := range most {
		at := Mem{Base: v, Disp: p * m.bytes}
		VMOVUPD(Mem{Base: x, Disp: p * m.bytes}, re)
		VMOVUPD(Mem{Base: x, Disp: p*m.bytes + 8*lanes}, im)
		VMOVUPD(at, a)
		VMOVUPD(at.Offset(8*lanes), b)
		if m.bytes == 64 {
			VMOVUPD(re, k[p], at)
			VMOVUPD(im, k[p], at.Offset(8*lanes))
			VSUBPD(a, re, re)
			VSUBPD(b, im, im)
		} else {
			t := m.vec()
			VBLENDVPD(keep[p], re, a, t)
			VMOVUPD(t, at)
			VBLENDVPD(keep[p], im, b, t)
			VMOVUPD(t, at.Offset(8*lanes))
			VSUBPD(a, re, re)
			VSUBPD(b, im, im)
		}
		VMULPD(im, im, d)
		VFMADD231PD(re, re, d)
		VMULPD(w, d, d)
		// The larger; of unequal kinds (a number, none) the second source, most.
		VMAXPD(most[p], d, most[p])
		VADDPD(d, sum[p], sum[p])
	}
	ADDQ(U32(stride), v)
	ADDQ(U32(stride), x)
	DECQ(n)
	JNZ(LabelRef("value"))
	nil0 := m.vec()
	zero(nil0)
	for p := range most {
		VMULPD(nil0, sum[p], sum[p])
		VADDPD(sum[p], most[p], most[p])
		VMOVUPD(most[p], Mem{Base: moved, Disp: p * m.bytes})
	}
	VZEROUPPER()
	RET()
}
