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

// sampleRow is kernel.Patch.Sample of places that have one north, sixteen at a time, then
// four.
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
	const most = 4
	us, wheres, knowns, indices := AllocLocal(32*most), [2]Mem{AllocLocal(32 * most), AllocLocal(32 * most)}, AllocLocal(32*most), AllocLocal(16*most)
	n := Load(Param("n"), GP64())
	lasts := [2]Register{GP64(), Load(Param("lastRow"), GP64())}
	LEAQ(Mem{Base: cols, Disp: -2}, lasts[0])
	p := &bilinear{c, number, leastCol, perM, height, slopeE, slopeN, heights, cols, i}
	// Numbers are used for all vectors of a block, whose chains go side by side.
	block := func(name string, vectors int) {
		Label(name)
		end := GP64()
		LEAQ(Mem{Base: i, Disp: 4 * vectors}, end)
		CMPQ(end, n)
		JG(LabelRef(name + "Done"))
		u, x, inside, t := make([]VecVirtual, vectors), make([]VecVirtual, vectors), YMM(), YMM()
		for j := range u {
			u[j], x[j] = YMM(), YMM()
		}
		each := func(use func(j int)) {
			for j := range vectors {
				use(j)
			}
		}
		with := func(k int, use func(y Op, j int)) {
			y := number(k)
			each(func(j int) { use(y, j) })
		}
		each(func(j int) { VMOVUPD(Mem{Base: east, Index: i, Scale: 8, Disp: 32 * j}, u[j]) })
		with(minE, func(y Op, j int) { VSUBPD(y, u[j], u[j]) })
		with(perM, func(y Op, j int) { VMULPD(y, u[j], u[j]) })
		with(highE, func(y Op, j int) {
			if j == 0 {
				VCMPPD(Imm(0x11), y, u[j], inside)
				return
			}
			VCMPPD(Imm(0x11), y, u[j], t)
			VANDPD(t, inside, inside)
		})
		with(lowE, func(y Op, j int) {
			VCMPPD(Imm(0x1d), y, u[j], t)
			VANDPD(t, inside, inside)
			VSUBPD(y, u[j], u[j])
		})
		VMOVMSKPD(inside, left)
		CMPL(left, Imm(15))
		JNE(LabelRef(name + "Done"))
		each(func(j int) { VMOVUPD(u[j], us.Offset(32*j)) })
		// The cell, and where in it.
		whole, many, zero := XMM(), XMM(), XMM()
		VPXOR(zero, zero, zero)
		for axis, a := range [2]int{col0, row0} {
			with(a+2, func(y Op, j int) { VMULPD(y, u[j], x[j]) })
			with(a+1, func(y Op, j int) { VADDPD(y, x[j], x[j]); VMULPD(x[j], u[j], x[j]) })
			with(a, func(y Op, j int) { VADDPD(y, x[j], x[j]) })
			with(leastCol+2*axis, func(y Op, j int) {
				VCMPPD(Imm(0x1d), y, x[j], t)
				if axis > 0 {
					VANDPD(knowns.Offset(32*j), t, t)
				}
				VMOVUPD(t, knowns.Offset(32*j))
			})
			with(leastCol+2*axis+1, func(y Op, j int) {
				VCMPPD(Imm(0x12), y, x[j], t)
				VANDPD(knowns.Offset(32*j), t, t)
				VMOVUPD(t, knowns.Offset(32*j))
			})
			VMOVD(lasts[axis].(GPVirtual).As32(), many)
			VPSHUFD(Imm(0), many, many)
			each(func(j int) {
				VCVTTPD2DQY(x[j], whole)
				VPMINSD(many, whole, whole)
				VPMAXSD(zero, whole, whole)
				VCVTDQ2PD(whole, t)
				VSUBPD(t, x[j], x[j])
				VMOVUPD(x[j], wheres[axis].Offset(32*j))
				if axis == 0 {
					VMOVDQU(whole, indices.Offset(16*j))
					return
				}
				across := XMM()
				VMOVD(cols.(GPVirtual).As32(), across)
				VPSHUFD(Imm(0), across, across)
				VPMULLD(across, whole, whole)
				VPADDD(indices.Offset(16*j), whole, whole)
				VMOVDQU(whole, indices.Offset(16*j))
			})
		}
		each(func(j int) {
			col, row, known := YMM(), YMM(), YMM()
			VMOVUPD(wheres[0].Offset(32*j), col)
			VMOVUPD(wheres[1].Offset(32*j), row)
			VMOVUPD(knowns.Offset(32*j), known)
			p.ends(j, func(k int, to Register) { MOVL(indices.Offset(16*j+4*k), to) }, col, row, known, func() (cols, rows [2]VecVirtual) {
				u := YMM()
				VMOVUPD(us.Offset(32*j), u)
				slopes := func(a int) [2]VecVirtual {
					fu, fv := YMM(), YMM()
					VMULPD(number(a+3), u, fu)
					VADDPD(number(a+1), fu, fu)
					VMULPD(number(a+6), u, fv)
					VADDPD(number(a+5), fv, fv)
					VMULPD(fv, u, fv)
					VADDPD(number(a+4), fv, fv)
					return [2]VecVirtual{fu, fv}
				}
				return slopes(col0), slopes(row0)
			})
		})
		MOVQ(end, i)
		JMP(LabelRef(name))
		Label(name + "Done")
	}
	block("sixteen", most)
	block("four", 1)
	Store(i, ReturnIndex(0))
	VZEROUPPER()
	RET()
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
	p.ends(0, func(k int, to Register) { VPEXTRD(Imm(uint64(k)), w0, to) }, col, row, known, func() (cols, rows [2]VecVirtual) {
		return [2]VecVirtual{cu, cv}, [2]VecVirtual{ru, rv}
	})
	ADDQ(Imm(4), i)
	JMP(LabelRef("next"))
	Label("done")
	Store(i, ReturnIndex(0))
	VZEROUPPER()
	RET()
}

// ends writes heights and slopes at vector j of places from p.i on: index moves where the
// samples of place k are to a register of 32 bits, col and row are where it is in its cell,
// slopes their derivatives by u and by v.
func (p *bilinear) ends(j int, index func(k int, to Register), col, row, known VecVirtual, slopes func() (cols, rows [2]VecVirtual)) {
	number := p.number
	at := func(of Register) Mem { return Mem{Base: of, Index: p.i, Scale: 8, Disp: 32 * j} }
	// Two samples of a row, and of the next one, at each of four places.
	below := GP64()
	LEAQ(Mem{Base: p.heights, Index: p.cols, Scale: 4}, below)
	bases := [2]Register{p.heights, below}
	var two [2][2]VecVirtual
	for k := range 2 {
		ptr, ptr2 := GP32(), GP32()
		index(2*k, ptr)
		index(2*k+1, ptr2)
		for r, base := range bases {
			into := XMM()
			VMOVSD(Mem{Base: base, Index: ptr.As64(), Scale: 4}, into)
			VMOVHPS(Mem{Base: base, Index: ptr2.As64(), Scale: 4}, into, into)
			two[r][k] = into
		}
	}
	pairs := func(r int) (first, second VecVirtual) {
		x := XMM()
		first, second = YMM(), YMM()
		VSHUFPS(Imm(0x88), two[r][1], two[r][0], x)
		VCVTPS2PD(x, first)
		VSHUFPS(Imm(0xdd), two[r][1], two[r][0], x)
		VCVTPS2PD(x, second)
		return first, second
	}
	h00, dc := pairs(0)
	VSUBPD(h00, dc, dc)
	dr, twist := pairs(1)
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
	cols, rows := slopes()
	for k, to := range [2]Register{p.slopeE, p.slopeN} {
		VMULPD(cols[k], dc, cols[k])
		VMULPD(rows[k], dr, rows[k])
		VADDPD(rows[k], cols[k], cols[k])
		VANDPD(known, cols[k], cols[k])
		VMOVUPD(cols[k], at(to))
	}
	VMOVUPD(p.c.unknown, x)
	VBLENDVPD(known, h, x, h)
	VMOVUPD(h, at(p.height))
}
