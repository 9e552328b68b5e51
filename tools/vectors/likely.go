//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// likely is kernel.Likely.Weigh: sixteen places at a time, whose chains of operations go
// side by side, then four.
func likely(c *numbers) {
	TEXT("likelyAVX2", NOSPLIT, "func(sums, dst, mass, residual, row, extra, flat, lanes *float64, n int)")
	Pragma("noescape")
	Doc("likelyAVX2 is likelyPlain for n values, a multiple of 4; lanes are Noise, Mean, Least, Weight, Flat and least, each in four.")
	dst, mass, residual := Load(Param("dst"), GP64()), Load(Param("mass"), GP64()), Load(Param("residual"), GP64())
	row, extra, flat := Load(Param("row"), GP64()), Load(Param("extra"), GP64()), Load(Param("flat"), GP64())
	lanes, n := Load(Param("lanes"), GP64()), Load(Param("n"), GP64())
	lane := func(k int) Mem { return Mem{Base: lanes, Disp: 32 * k} }
	const noise, mean, least, weight, flatly, leastMass = 0, 1, 2, 3, 4, 5
	sums, all, before := GP64(), YMM(), YMM()
	Load(Param("sums"), sums)
	VMOVUPD(Mem{Base: sums}, all)
	VMOVUPD(Mem{Base: sums, Disp: 32}, before)
	const most = 4
	factors, adds := AllocLocal(32*most), AllocLocal(32*most)
	block := func(name string, vectors int) {
		at := func(of Register, j int) Mem { return Mem{Base: of, Disp: 32 * j} }
		Label(name)
		CMPQ(n, Imm(uint64(4*vectors)))
		JB(LabelRef(name + "Done"))
		x := make([]VecVirtual, vectors)
		for j := range x {
			// |row|² of four places: sums of neighbours come in the order 0, 2, 1, 3.
			v, w, t := YMM(), YMM(), YMM()
			VMOVUPD(at(row, 2*j), v)
			VMOVUPD(at(row, 2*j+1), w)
			VMULPD(v, v, v)
			VMULPD(w, w, w)
			VHADDPD(w, v, w)
			VPERMPD(Imm(0b11_01_10_00), w, w)
			VMULPD(lane(least), w, w)
			VMOVUPD(lane(noise), v)
			VADDPD(at(extra, j), v, v)
			VMAXPD(v, w, v) // w if it is above v
			VMOVUPD(c.one, t)
			VDIVPD(v, t, v)
			own := YMM()
			x[j] = YMM()
			VMOVUPD(at(residual, j), x[j])
			VSUBPD(lane(mean), x[j], x[j])
			VMULPD(x[j], x[j], x[j])
			VMULPD(v, x[j], x[j])
			VMULPD(c.minusHalf, x[j], x[j])
			VSQRTPD(v, v)
			VMULPD(lane(weight), v, v)
			VMOVUPD(at(flat, j), t)
			VCMPPD(Imm(3), t, t, own) // flat is NaN
			VBLENDVPD(own, x[j], t, x[j])
			VMOVUPD(c.one, t)
			VBLENDVPD(own, v, t, v)
			VANDPD(lane(flatly), own, own)
			VCMPPD(Imm(3), x[j], x[j], t) // stays NaN
			VORPD(t, own, own)
			VMOVUPD(own, adds.Offset(32*j))
			VCMPPD(Imm(13), c.expLeast, x[j], t) // else 0: the exponential is finite there, too
			VANDPD(t, v, v)
			VMOVUPD(v, factors.Offset(32*j))
		}
		for j, e := range c.exps(x) {
			t := YMM()
			VMULPD(factors.Offset(32*j), e, e)
			VADDPD(adds.Offset(32*j), e, e)
			VMOVUPD(at(mass, j), t)
			VADDPD(t, before, before)
			VMULPD(t, e, e)
			VCMPPD(Imm(13), lane(leastMass), t, t)
			VANDPD(t, e, e)
			VMOVUPD(e, at(dst, j))
			VADDPD(e, all, all)
		}
		for _, pointer := range []Register{dst, mass, residual, extra, flat} {
			ADDQ(U32(32*vectors), pointer)
		}
		ADDQ(U32(64*vectors), row) // two numbers a place
		SUBQ(U32(4*vectors), n)
		JMP(LabelRef(name))
		Label(name + "Done")
	}
	block("sixteen", most)
	block("four", 1)
	VMOVUPD(all, Mem{Base: sums})
	VMOVUPD(before, Mem{Base: sums, Disp: 32})
	VZEROUPPER()
	RET()
}

// ground is kernel.Ground.Terms.
func ground(c *numbers) {
	TEXT("groundAVX2", NOSPLIT, "func(residual, extra, row, flat, height, slopeE, slopeN, variance, lanes *float64, n int)")
	Pragma("noescape")
	Doc("groundAVX2 is groundPlain for n values, a multiple of 4; lanes are Ground's numbers, each in four.")
	residual, extra, row, flat := Load(Param("residual"), GP64()), Load(Param("extra"), GP64()), Load(Param("row"), GP64()), Load(Param("flat"), GP64())
	height, slopeE, slopeN, variance := Load(Param("height"), GP64()), Load(Param("slopeE"), GP64()), Load(Param("slopeN"), GP64()), Load(Param("variance"), GP64())
	lanes, n := Load(Param("lanes"), GP64()), Load(Param("n"), GP64())
	const topM, distanceM, mapFactor, slopeVar, tilt, flatly = 0, 1, 2, 3, 4, 5
	number := make([]VecVirtual, 6)
	for k := range number {
		number[k] = YMM()
		VMOVUPD(Mem{Base: lanes, Disp: 32 * k}, number[k])
	}
	i := GP64()
	XORQ(i, i)
	at := func(of Register) Mem { return Mem{Base: of, Index: i, Scale: 8} }
	Label("next")
	CMPQ(i, n)
	JGE(LabelRef("done"))
	h, known, x, e, s, t := YMM(), YMM(), YMM(), YMM(), YMM(), YMM()
	VMOVUPD(at(height), h)
	VCMPPD(Imm(7), h, h, known)
	VSUBPD(h, number[topM], x)
	VSUBPD(number[distanceM], x, x)
	VANDPD(known, x, x)
	VMOVUPD(x, at(residual))
	VMOVUPD(at(slopeE), e)
	VMOVUPD(at(slopeN), s)
	VMULPD(e, e, x)
	VMULPD(s, s, t)
	VADDPD(t, x, x)
	VMULPD(number[slopeVar], x, x)
	VMULPD(at(variance), number[mapFactor], t)
	VADDPD(x, t, t)
	VADDPD(number[tilt], t, t)
	VANDPD(known, t, t)
	VMOVUPD(t, at(extra))
	VANDPD(known, e, e)
	VANDPD(known, s, s)
	VUNPCKLPD(s, e, x)
	VUNPCKHPD(s, e, e)
	VPERM2F128(Imm(0x20), e, x, t)
	VPERM2F128(Imm(0x31), e, x, x)
	VMOVUPD(t, at(row))
	VMOVUPD(x, Mem{Base: row, Index: i, Scale: 8, Disp: 32})
	VMOVUPD(c.unknown, t)
	VBLENDVPD(known, t, number[flatly], t)
	VMOVUPD(t, at(flat))
	ADDQ(Imm(4), i)
	ADDQ(Imm(32), row)
	JMP(LabelRef("next"))
	Label("done")
	VZEROUPPER()
	RET()
}
