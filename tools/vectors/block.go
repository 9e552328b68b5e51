//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// copyBlock is kernel.CopyBlock: four at a time, then one.
func copyBlock() {
	TEXT("copyBlockAVX2", NOSPLIT, "func(dst, src *float64, cols, rows, to, from int)")
	Pragma("noescape")
	Doc("copyBlockAVX2 is copyBlockPlain; to and from in bytes.")
	dst, src := Load(Param("dst"), GP64()), Load(Param("src"), GP64())
	cols, rows := Load(Param("cols"), GP64()), Load(Param("rows"), GP64())
	to, from := Load(Param("to"), GP64()), Load(Param("from"), GP64())
	i, whole := GP64(), GP64()
	MOVQ(cols, whole)
	ANDQ(I8(-4), whole)
	a, b := YMM(), XMM()
	Label("row")
	XORQ(i, i)
	Label("four")
	CMPQ(i, whole)
	JGE(LabelRef("one"))
	VMOVUPD(Mem{Base: src, Index: i, Scale: 8}, a)
	VMOVUPD(a, Mem{Base: dst, Index: i, Scale: 8})
	ADDQ(Imm(4), i)
	JMP(LabelRef("four"))
	Label("one")
	CMPQ(i, cols)
	JGE(LabelRef("next"))
	VMOVSD(Mem{Base: src, Index: i, Scale: 8}, b)
	VMOVSD(b, Mem{Base: dst, Index: i, Scale: 8})
	INCQ(i)
	JMP(LabelRef("one"))
	Label("next")
	ADDQ(to, dst)
	ADDQ(from, src)
	DECQ(rows)
	JNZ(LabelRef("row"))
	VZEROUPPER()
	RET()
}

// faint is kernel.Faint for n values, a multiple of 4.
func faint() {
	TEXT("faintAVX2", NOSPLIT, "func(src *float64, n int, floor float64) (some, below int)")
	Pragma("noescape")
	Doc("faintAVX2 is faintPlain for n values, a multiple of 4; other than 0 for true.")
	src, n := Load(Param("src"), GP64()), Load(Param("n"), GP64())
	floor := broadcast("floor")
	zero, any, low, v, above, under := YMM(), YMM(), YMM(), YMM(), YMM(), YMM()
	for _, r := range []VecVirtual{zero, any, low} {
		VXORPD(r, r, r)
	}
	Label("four")
	VMOVUPD(Mem{Base: src}, v)
	VCMPPD(Imm(0x1e), zero, v, above)  // v > 0, quiet
	VCMPPD(Imm(0x11), floor, v, under) // v < floor
	VANDPD(above, under, under)
	VORPD(above, any, any)
	VORPD(under, low, low)
	ADDQ(Imm(32), src)
	SUBQ(Imm(4), n)
	JNZ(LabelRef("four"))
	some, below := GP32(), GP32()
	VMOVMSKPD(any, some)
	VMOVMSKPD(low, below)
	wide := GP64()
	MOVLQSX(some, wide)
	Store(wide, ReturnIndex(0))
	MOVLQSX(below, wide)
	Store(wide, ReturnIndex(1))
	VZEROUPPER()
	RET()
}
