//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// normalSeries is kernel.normalSum: eight at a time, then four, until none has a term left
// that changes its sum; more of them change the others' no more.
func normalSeries(c *numbers) {
	TEXT("normalSeriesAVX2", NOSPLIT, "func(x *float64, n int)")
	Pragma("noescape")
	Doc("normalSeriesAVX2 is normalSeriesPlain for n values, a multiple of 4.")
	x, n := Load(Param("x"), GP64()), Load(Param("n"), GP64())
	least, three := number("seriesLeast", 1e-18), number("three", 3)
	left := GP32()
	block := func(name string, vectors int) {
		Label(name)
		CMPQ(n, Imm(uint64(4*vectors)))
		JB(LabelRef(name + "Done"))
		term, sum, z, most := make([]VecVirtual, vectors), make([]VecVirtual, vectors), make([]VecVirtual, vectors), make([]VecVirtual, vectors)
		by := YMM()
		for i := range vectors {
			term[i], sum[i], z[i], most[i] = YMM(), YMM(), YMM(), YMM()
			VMOVUPD(Mem{Base: x, Disp: 32 * i}, term[i])
			VMOVAPD(term[i], sum[i])
			VMULPD(term[i], term[i], z[i])
		}
		VMOVUPD(three, by)
		Label(name + "Term")
		for i := range vectors {
			VMULPD(least, sum[i], most[i])
			VCMPPD(Imm(0x1e), most[i], term[i], most[i]) // term > least·sum
			if i > 0 {
				VORPD(most[i], most[0], most[0])
			}
		}
		VMOVMSKPD(most[0], left)
		TESTL(left, left)
		JZ(LabelRef(name + "Summed"))
		for i := range vectors {
			VMULPD(z[i], term[i], term[i])
			VDIVPD(by, term[i], term[i])
			VADDPD(term[i], sum[i], sum[i])
		}
		VADDPD(c.two, by, by)
		JMP(LabelRef(name + "Term"))
		Label(name + "Summed")
		for i := range vectors {
			VMOVUPD(sum[i], Mem{Base: x, Disp: 32 * i})
		}
		ADDQ(Imm(uint64(32*vectors)), x)
		SUBQ(Imm(uint64(4*vectors)), n)
		JMP(LabelRef(name))
		Label(name + "Done")
	}
	block("eight", 2)
	block("four", 1)
	VZEROUPPER()
	RET()
}

// normalFraction is kernel.millsInverse: four at a time, from the greatest depth, which
// others join at their own.
func normalFraction(c *numbers) {
	TEXT("normalFractionAVX2", NOSPLIT, "func(x *float64, n int)")
	Pragma("noescape")
	Doc("normalFractionAVX2 is normalFractionPlain for n values, a multiple of 4.")
	x, n := Load(Param("x"), GP64()), Load(Param("n"), GP64())
	eleven, slope := number("fractionLeast", 11), number("fractionSlope", 350)
	left := GP32()
	loop(n, func() {
		v, f, own, depth, next := YMM(), YMM(), YMM(), YMM(), YMM()
		VMOVUPD(Mem{Base: x}, v)
		VMOVAPD(v, f)
		VMULPD(v, v, own)
		VMOVUPD(slope, depth)
		VDIVPD(own, depth, own)
		VADDPD(eleven, own, own)
		VROUNDPD(Imm(10), own, own) // up
		VPERM2F128(Imm(1), own, own, depth)
		VMAXPD(own, depth, depth)
		VPERMILPD(Imm(0b0101), depth, next)
		VMAXPD(next, depth, depth) // the greatest, in all
		Label("level")
		VCMPPD(Imm(0x1d), c.one, depth, next) // depth ≥ 1
		VMOVMSKPD(next, left)
		TESTL(left, left)
		JZ(LabelRef("through"))
		VDIVPD(f, depth, next)
		VADDPD(next, v, next)
		joined := YMM()
		VCMPPD(Imm(0x1d), depth, own, joined) // own ≥ depth
		VBLENDVPD(joined, next, f, f)
		VSUBPD(c.one, depth, depth)
		JMP(LabelRef("level"))
		Label("through")
		VMOVUPD(f, Mem{Base: x})
	}, x)
}
