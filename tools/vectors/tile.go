//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// dense is kernel.Dense for n values, a multiple of 4.
func dense() {
	TEXT("denseAVX2", NOSPLIT, "func(src *float64, n int) (zeros int)")
	Pragma("noescape")
	Doc("denseAVX2 is densePlain for n values, a multiple of 4; other than 0 for false.")
	src, n := Load(Param("src"), GP64()), Load(Param("n"), GP64())
	zero, any, v := YMM(), YMM(), YMM()
	VXORPD(zero, zero, zero)
	VXORPD(any, any, any)
	Label("four")
	VCMPPD(Imm(0), Mem{Base: src}, zero, v)
	VORPD(v, any, any)
	ADDQ(Imm(32), src)
	SUBQ(Imm(4), n)
	JNZ(LabelRef("four"))
	zeros := GP32()
	VMOVMSKPD(any, zeros)
	Store(zeros.As64(), ReturnIndex(0))
	VZEROUPPER()
	RET()
}

// count is kernel.Count for n values, a multiple of 4.
func count() {
	TEXT("countAVX2", NOSPLIT, "func(src *float64, n int) (above int)")
	Pragma("noescape")
	Doc("countAVX2 is countPlain for n values, a multiple of 4.")
	src, n := Load(Param("src"), GP64()), Load(Param("n"), GP64())
	zero, t, some := YMM(), YMM(), YMM()
	VXORPD(zero, zero, zero)
	VXORPD(some, some, some)
	Label("four")
	VCMPPD(Imm(0x11), Mem{Base: src}, zero, t) // 0 < v, quiet
	VPSUBQ(t, some, some)                      // true is -1
	ADDQ(Imm(32), src)
	SUBQ(Imm(4), n)
	JNZ(LabelRef("four"))
	Store(addLanes(some), ReturnIndex(0))
	VZEROUPPER()
	RET()
}

// addLanes is the sum of the four integers of a register.
func addLanes(r VecVirtual) Register {
	high, low, sum := XMM(), r.AsX(), GP64()
	VEXTRACTI128(Imm(1), r, high)
	VPADDQ(high, low, low)
	VPSHUFD(Imm(0b01_00_11_10), low, high)
	VPADDQ(high, low, low)
	VMOVQ(low, sum)
	return sum
}

// roots is kernel.Roots for whole lanes.
func roots() {
	TEXT("rootsAVX2", NOSPLIT, "func(dst, src *float64, cols, rows, to int)")
	Pragma("noescape")
	Doc("rootsAVX2 is rootsPlain; cols is a multiple of 4, to in bytes.")
	dst, src := Load(Param("dst"), GP64()), Load(Param("src"), GP64())
	cols, rows, to := Load(Param("cols"), GP64()), Load(Param("rows"), GP64()), Load(Param("to"), GP64())
	c, v := GP64(), YMM()
	Label("row")
	XORQ(c, c)
	Label("four")
	VSQRTPD(Mem{Base: src, Index: c, Scale: 8}, v)
	VMOVUPD(v, Mem{Base: dst, Index: c, Scale: 8})
	ADDQ(Imm(4), c)
	CMPQ(c, cols)
	JB(LabelRef("four"))
	LEAQ(Mem{Base: src, Index: c, Scale: 8}, src)
	ADDQ(to, dst)
	DECQ(rows)
	JNZ(LabelRef("row"))
	VZEROUPPER()
	RET()
}

// steps is kernel.Steps.
func steps() {
	TEXT("stepsAVX2", NOSPLIT, "func(sums, src *float64, cols, rows, from int)")
	Pragma("noescape")
	Doc("stepsAVX2 is stepsPlain; cols is a multiple of 4, from in bytes.")
	src := Load(Param("src"), GP64())
	cols, rows, from := Load(Param("cols"), GP64()), Load(Param("rows"), GP64()), Load(Param("from"), GP64())
	c, above := GP64(), GP64()
	v, x, y, sumX, sumY := YMM(), YMM(), YMM(), YMM(), YMM()
	VXORPD(sumX, sumX, sumX)
	VXORPD(sumY, sumY, sumY)
	Label("row")
	XORQ(c, c)
	MOVQ(src, above)
	ADDQ(from, above)
	Label("four")
	VMOVUPD(Mem{Base: src, Index: c, Scale: 8}, v)
	VMOVUPD(Mem{Base: src, Index: c, Scale: 8, Disp: 8}, x)
	VMOVUPD(Mem{Base: above, Index: c, Scale: 8}, y)
	VSUBPD(v, x, x)
	VSUBPD(v, y, y)
	VMULPD(x, x, x)
	VMULPD(y, y, y)
	VADDPD(x, sumX, sumX)
	VADDPD(y, sumY, sumY)
	ADDQ(Imm(4), c)
	CMPQ(c, cols)
	JB(LabelRef("four"))
	MOVQ(above, src)
	DECQ(rows)
	JNZ(LabelRef("row"))
	to := Load(Param("sums"), GP64())
	VMOVUPD(sumX, Mem{Base: to})
	VMOVUPD(sumY, Mem{Base: to, Disp: 32})
	VZEROUPPER()
	RET()
}

// scaleBy is kernel.Scale for n values, a multiple of 4.
func scaleBy() {
	TEXT("scaleAVX2", NOSPLIT, "func(dst *float64, n int, by, floor float64) (some, enough int)")
	Pragma("noescape")
	Doc("scaleAVX2 is scalePlain for n values, a multiple of 4.")
	dst, n := Load(Param("dst"), GP64()), Load(Param("n"), GP64())
	by, floor := broadcast("by"), broadcast("floor")
	zero, v, t, some, enough := YMM(), YMM(), YMM(), YMM(), YMM()
	for _, r := range []VecVirtual{zero, some, enough} {
		VXORPD(r, r, r)
	}
	Label("four")
	VMULPD(Mem{Base: dst}, by, v)
	VMOVUPD(v, Mem{Base: dst})
	VCMPPD(Imm(0x1e), zero, v, t)  // v > 0
	VPSUBQ(t, some, some)          // true is -1
	VCMPPD(Imm(0x1d), floor, v, t) // v >= floor
	VPSUBQ(t, enough, enough)
	ADDQ(Imm(32), dst)
	SUBQ(Imm(4), n)
	JNZ(LabelRef("four"))
	for k, r := range []VecVirtual{some, enough} {
		Store(addLanes(r), ReturnIndex(k))
	}
	VZEROUPPER()
	RET()
}

// blockMoments is kernel.BlockMoments.
func blockMoments(c *numbers) {
	TEXT("blockMomentsAVX2", NOSPLIT, "func(sums, src, x *float64, cols, rows int, y float64)")
	Pragma("noescape")
	Doc("blockMomentsAVX2 is blockMomentsPlain; x are the first four columns', y the first row's cells from the middle.")
	src, at := Load(Param("src"), GP64()), Load(Param("x"), GP64())
	cols, rows, left := Load(Param("cols"), GP64()), Load(Param("rows"), GP64()), GP64()
	first, four, y := YMM(), YMM(), broadcast("y")
	VMOVUPD(Mem{Base: at}, first)
	VMOVUPD(number("four", 4), four)
	sums := make([]VecVirtual, 6)
	for k := range sums {
		sums[k] = YMM()
		VXORPD(sums[k], sums[k], sums[k])
	}
	x, v, r0, r1, r2 := YMM(), YMM(), YMM(), YMM(), YMM()
	Label("row")
	VMOVAPD(first, x)
	VXORPD(r0, r0, r0)
	VXORPD(r1, r1, r1)
	VXORPD(r2, r2, r2)
	MOVQ(cols, left)
	Label("columns")
	VMOVUPD(Mem{Base: src}, v)
	VADDPD(v, r0, r0)
	VMULPD(v, x, v)
	VADDPD(v, r1, r1)
	VMULPD(v, x, v)
	VADDPD(v, r2, r2)
	VADDPD(four, x, x)
	ADDQ(Imm(32), src)
	SUBQ(Imm(4), left)
	JNZ(LabelRef("columns"))
	VADDPD(r0, sums[0], sums[0])
	VADDPD(r1, sums[1], sums[1])
	VADDPD(r2, sums[3], sums[3])
	VMULPD(y, r0, r0)
	VADDPD(r0, sums[2], sums[2])
	VMULPD(y, r1, r1)
	VADDPD(r1, sums[4], sums[4])
	VMULPD(y, r0, r0)
	VADDPD(r0, sums[5], sums[5])
	VADDPD(c.one, y, y)
	DECQ(rows)
	JNZ(LabelRef("row"))
	to := Load(Param("sums"), GP64())
	for k := range sums {
		VMOVUPD(sums[k], Mem{Base: to, Disp: 32 * k})
	}
	VZEROUPPER()
	RET()
}
