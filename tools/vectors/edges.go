//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
)

// normalSeries is kernel.normalSum: four at a time, until none has a term left that
// changes its sum; more of them change the others' no more.
func normalSeries(c *numbers) {
	TEXT("normalSeriesAVX2", NOSPLIT, "func(x *float64, n int)")
	Pragma("noescape")
	Doc("normalSeriesAVX2 is normalSeriesPlain for n values, a multiple of 4.")
	x, n := Load(Param("x"), GP64()), Load(Param("n"), GP64())
	least, three := number("seriesLeast", 1e-18), number("three", 3)
	left := GP32()
	loop(n, func() {
		term, sum, z, by, most := YMM(), YMM(), YMM(), YMM(), YMM()
		VMOVUPD(Mem{Base: x}, term)
		VMOVAPD(term, sum)
		VMULPD(term, term, z)
		VMOVUPD(three, by)
		Label("term")
		VMULPD(least, sum, most)
		VCMPPD(Imm(0x1e), most, term, most) // term > least·sum
		VMOVMSKPD(most, left)
		TESTL(left, left)
		JZ(LabelRef("summed"))
		VMULPD(z, term, term)
		VDIVPD(by, term, term)
		VADDPD(term, sum, sum)
		VADDPD(c.two, by, by)
		JMP(LabelRef("term"))
		Label("summed")
		VMOVUPD(sum, Mem{Base: x})
	}, x)
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
