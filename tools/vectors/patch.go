//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// samplePatch is kernel.Patch.Sample.
func samplePatch(c *numbers) {
	TEXT("samplePatchAVX2", NOSPLIT, "func(height, slopeE, slopeN, east, north, lanes *float64, heights *float32, n, cols, lastRow int) (done int)")
	Pragma("noescape")
	Doc("samplePatchAVX2 is samplePatchPlain for n places, a multiple of 4, up to the first four of which one is outside the box; lanes are Patch.lanes, lastRow two less than its rows.")
	height, slopeE, slopeN := Load(Param("height"), GP64()), Load(Param("slopeE"), GP64()), Load(Param("slopeN"), GP64())
	east, north, lanes := Load(Param("east"), GP64()), Load(Param("north"), GP64()), Load(Param("lanes"), GP64())
	heights, cols := Load(Param("heights"), GP64()), Load(Param("cols"), GP64())
	i, left := GP64(), GP32()
	XORQ(i, i)
	number := func(k int) Op { return Mem{Base: lanes, Disp: 32 * k} }
	const minE, minN, perM, lowE, highE, lowN, highN, col0, row0, leastCol = 0, 1, 2, 3, 4, 5, 6, 7, 16, 25
	at := func(of Register) Mem { return Mem{Base: of, Index: i, Scale: 8} }
	Label("next")
	CMPQ(i, Load(Param("n"), GP64()))
	JGE(LabelRef("done"))
	u, v, inside, t := YMM(), YMM(), YMM(), YMM()
	place := func(x VecVirtual, from Register, min, low, high int, first bool) {
		VMOVUPD(at(from), x)
		VSUBPD(number(min), x, x)
		VMULPD(number(perM), x, x)
		VCMPPD(Imm(0x1d), number(low), x, t) // x >= low
		if first {
			VMOVAPD(t, inside)
		} else {
			VANDPD(t, inside, inside)
		}
		VCMPPD(Imm(0x11), number(high), x, t) // x < high
		VANDPD(t, inside, inside)
		VSUBPD(number(low), x, x)
	}
	place(u, east, minE, lowE, highE, true)
	place(v, north, minN, lowN, highN, false)
	VMOVMSKPD(inside, left)
	CMPL(left, Imm(15))
	JNE(LabelRef("done"))

	// A polynomial and its derivatives.
	u2 := YMM()
	VADDPD(u, u, u2)
	quadratic := func(a int) (f, fu, fv VecVirtual) {
		p, q := make([]VecVirtual, 3), make([]VecVirtual, 3)
		for k := range 3 {
			p[k], q[k] = YMM(), YMM()
			VMULPD(number(a+3*k+2), u, p[k])
			VADDPD(number(a+3*k+1), p[k], p[k])
			VMULPD(p[k], u, p[k])
			VADDPD(number(a+3*k), p[k], p[k])
			VMULPD(number(a+3*k+2), u2, q[k])
			VADDPD(number(a+3*k+1), q[k], q[k])
		}
		f, fu, fv = p[0], q[0], p[1]
		x := YMM()
		VMULPD(p[2], v, x)
		VADDPD(x, p[1], x)
		VMULPD(x, v, x)
		VADDPD(x, f, f)
		VMULPD(q[2], v, q[2])
		VADDPD(q[2], q[1], q[1])
		VMULPD(q[1], v, q[1])
		VADDPD(q[1], fu, fu)
		VADDPD(v, v, x)
		VMULPD(p[2], x, p[2])
		VADDPD(p[2], fv, fv)
		return f, fu, fv
	}
	p := &bilinear{c, number, leastCol, perM, height, slopeE, slopeN, heights, cols, i}
	p.sample(func() (f, fu, fv VecVirtual) { return quadratic(col0) }, func() (f, fu, fv VecVirtual) { return quadratic(row0) })
}

// sampleRow is kernel.Patch.Sample of places that have one north.
func sampleRow(c *numbers) {
	TEXT("sampleRowAVX2", NOSPLIT, "func(height, slopeE, slopeN, east, numbers *float64, heights *float32, n, cols, lastRow int) (done int)")
	Pragma("noescape")
	Doc("sampleRowAVX2 is sampleRowPlain for n places, a multiple of 4, up to the first four of which one is outside the box; numbers are the rowOfPatch, lastRow two less than the raster's rows.")
	height, slopeE, slopeN := Load(Param("height"), GP64()), Load(Param("slopeE"), GP64()), Load(Param("slopeN"), GP64())
	east, numbers := Load(Param("east"), GP64()), Load(Param("numbers"), GP64())
	heights, cols := Load(Param("heights"), GP64()), Load(Param("cols"), GP64())
	i, left := GP64(), GP32()
	XORQ(i, i)
	number := func(k int) Op {
		x := YMM()
		VBROADCASTSD(Mem{Base: numbers, Disp: 8 * k}, x)
		return x
	}
	const minE, perM, lowE, highE, leastCol, col0, row0 = 0, 1, 2, 3, 4, 8, 15
	Label("next")
	CMPQ(i, Load(Param("n"), GP64()))
	JGE(LabelRef("done"))
	u, inside, t := YMM(), YMM(), YMM()
	VMOVUPD(Mem{Base: east, Index: i, Scale: 8}, u)
	VSUBPD(number(minE), u, u)
	VMULPD(number(perM), u, u)
	VCMPPD(Imm(0x1d), number(lowE), u, inside)
	VCMPPD(Imm(0x11), number(highE), u, t)
	VANDPD(t, inside, inside)
	VSUBPD(number(lowE), u, u)
	VMOVMSKPD(inside, left)
	CMPL(left, Imm(15))
	JNE(LabelRef("done"))
	// A polynomial of u and its derivative, and that by v.
	quadratic := func(a int) (f, fu, fv VecVirtual) {
		by := func(k int) VecVirtual {
			x := YMM()
			VMULPD(number(k+2), u, x)
			VADDPD(number(k+1), x, x)
			VMULPD(x, u, x)
			VADDPD(number(k), x, x)
			return x
		}
		f, fu, fv = by(a), YMM(), by(a+4)
		VMULPD(number(a+3), u, fu)
		VADDPD(number(a+1), fu, fu)
		return f, fu, fv
	}
	p := &bilinear{c, number, leastCol, perM, height, slopeE, slopeN, heights, cols, i}
	p.sample(func() (f, fu, fv VecVirtual) { return quadratic(col0) }, func() (f, fu, fv VecVirtual) { return quadratic(row0) })
}

// bilinear is what ends a sampling loop: from columns, rows and their derivatives to
// heights and slopes. number has the least column and what comes after it from leastCol on.
type bilinear struct {
	c                      *numbers
	number                 func(k int) Op
	leastCol, perM         int
	height, slopeE, slopeN Register
	heights, cols          Register
	i                      Register
}

// sample takes what is at four places, goes to the next ones, and returns at the label done.
func (p *bilinear) sample(cols, rows func() (f, fu, fv VecVirtual)) {
	number, i := p.number, p.i
	at := func(of Register) Mem { return Mem{Base: of, Index: i, Scale: 8} }
	col, cu, cv := cols()
	known := YMM()
	within := func(x VecVirtual, least, most int, first bool) {
		t := YMM()
		VCMPPD(Imm(0x1d), number(least), x, t)
		if first {
			VMOVAPD(t, known)
		} else {
			VANDPD(t, known, known)
		}
		VCMPPD(Imm(0x12), number(most), x, t)
		VANDPD(t, known, known)
	}
	within(col, p.leastCol, p.leastCol+1, true)
	// The cell, and where in it.
	zero, most := XMM(), XMM()
	VPXOR(zero, zero, zero)
	whole := func(x VecVirtual, last Register) VecVirtual {
		w, f := XMM(), YMM()
		VMOVD(last.(GPVirtual).As32(), most)
		VPSHUFD(Imm(0), most, most)
		VCVTTPD2DQY(x, w)
		VPMINSD(most, w, w)
		VPMAXSD(zero, w, w)
		VCVTDQ2PD(w, f)
		VSUBPD(f, x, x)
		return w
	}
	last := GP64()
	LEAQ(Mem{Base: p.cols, Disp: -2}, last)
	c0 := whole(col, last)
	row, ru, rv := rows()
	within(row, p.leastCol+2, p.leastCol+3, false)
	w0 := whole(row, Load(Param("lastRow"), GP64()))
	VMOVD(p.cols.(GPVirtual).As32(), most)
	VPSHUFD(Imm(0), most, most)
	VPMULLD(most, w0, w0)
	VPADDD(c0, w0, w0)
	// Two samples of a row, at each of four places.
	ptr, ptr2 := GP32(), GP32()
	pairs := func(base Register) (first, second VecVirtual) {
		a, b, x := XMM(), XMM(), XMM()
		first, second = YMM(), YMM()
		for k, into := range []VecVirtual{a, b} {
			VPEXTRD(Imm(uint64(2*k)), w0, ptr)
			VPEXTRD(Imm(uint64(2*k+1)), w0, ptr2)
			VMOVSD(Mem{Base: base, Index: ptr.As64(), Scale: 4}, into)
			VMOVHPS(Mem{Base: base, Index: ptr2.As64(), Scale: 4}, into, into)
		}
		VSHUFPS(Imm(0x88), b, a, x)
		VCVTPS2PD(x, first)
		VSHUFPS(Imm(0xdd), b, a, x)
		VCVTPS2PD(x, second)
		return first, second
	}
	h00, dc := pairs(p.heights)
	VSUBPD(h00, dc, dc)
	below := GP64()
	LEAQ(Mem{Base: p.heights, Index: p.cols, Scale: 4}, below)
	dr, twist := pairs(below)
	VSUBPD(dr, twist, twist)
	VSUBPD(dc, twist, twist)
	VSUBPD(h00, dr, dr)

	h, x := h00, YMM()
	VMULPD(dc, col, x)
	VADDPD(x, h, h)
	VMULPD(dr, row, x)
	VADDPD(x, h, h)
	VMULPD(row, col, x)
	VMULPD(twist, x, x)
	VADDPD(x, h, h)
	VCMPPD(Imm(0), h, h, x) // known
	VANDPD(x, known, known)
	VMULPD(twist, row, x)
	VADDPD(x, dc, dc)
	VMULPD(number(p.perM), dc, dc)
	VMULPD(twist, col, x)
	VADDPD(x, dr, dr)
	VMULPD(number(p.perM), dr, dr)
	for _, s := range []struct {
		by, and VecVirtual
		to      Register
	}{{cu, ru, p.slopeE}, {cv, rv, p.slopeN}} {
		VMULPD(s.by, dc, s.by)
		VMULPD(s.and, dr, s.and)
		VADDPD(s.and, s.by, s.by)
		VANDPD(known, s.by, s.by)
		VMOVUPD(s.by, at(s.to))
	}
	VMOVUPD(p.c.unknown, x)
	VBLENDVPD(known, h, x, h)
	VMOVUPD(h, at(p.height))
	ADDQ(Imm(4), i)
	JMP(LabelRef("next"))
	Label("done")
	Store(i, ReturnIndex(0))
	VZEROUPPER()
	RET()
}
