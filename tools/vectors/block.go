//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// copyBlock is kernel.CopyBlock: sixteen at a time, then four, then one.
func copyBlock() {
	TEXT("copyBlockAVX2", NOSPLIT, "func(dst, src *float64, cols, rows, to, from int)")
	Pragma("noescape")
	Doc("copyBlockAVX2 is copyBlockPlain; to and from in bytes.")
	dst, src := Load(Param("dst"), GP64()), Load(Param("src"), GP64())
	cols, rows := Load(Param("cols"), GP64()), Load(Param("rows"), GP64())
	to, from := Load(Param("to"), GP64()), Load(Param("from"), GP64())
	i, left := GP64(), GP64()
	a, b := []VecVirtual{YMM(), YMM(), YMM(), YMM()}, XMM()
	Label("row")
	XORQ(i, i)
	MOVQ(cols, left)
	block := func(name string, vectors int) {
		Label(name)
		CMPQ(left, Imm(uint64(4*vectors)))
		JB(LabelRef(name + "Done"))
		for j := range vectors {
			VMOVUPD(Mem{Base: src, Index: i, Scale: 8, Disp: 32 * j}, a[j])
		}
		for j := range vectors {
			VMOVUPD(a[j], Mem{Base: dst, Index: i, Scale: 8, Disp: 32 * j})
		}
		ADDQ(Imm(uint64(4*vectors)), i)
		SUBQ(Imm(uint64(4*vectors)), left)
		JMP(LabelRef(name))
		Label(name + "Done")
	}
	block("sixteen", 4)
	block("four", 1)
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

// dropBelow is kernel.DropBelow for n values, a multiple of 4.
func dropBelow() {
	TEXT("dropBelowAVX2", NOSPLIT, "func(sums, dst *float64, n int, floor float64) (some int)")
	Pragma("noescape")
	Doc("dropBelowAVX2 is dropBelowPlain for n values, a multiple of 4; other than 0 for true.")
	dst, n := Load(Param("dst"), GP64()), Load(Param("n"), GP64())
	floor := broadcast("floor")
	zero, any, sum, v, above, under := YMM(), YMM(), YMM(), YMM(), YMM(), YMM()
	for _, r := range []VecVirtual{zero, any, sum} {
		VXORPD(r, r, r)
	}
	Label("four")
	VMOVUPD(Mem{Base: dst}, v)
	VCMPPD(Imm(0x1e), zero, v, above)  // v > 0, quiet
	VCMPPD(Imm(0x11), floor, v, under) // v < floor
	VANDPD(above, under, under)
	VANDNPD(v, under, above) // what stays
	VANDPD(v, under, under)
	VADDPD(under, sum, sum)
	VMOVUPD(above, Mem{Base: dst})
	VCMPPD(Imm(0x1e), zero, above, above)
	VORPD(above, any, any)
	ADDQ(Imm(32), dst)
	SUBQ(Imm(4), n)
	JNZ(LabelRef("four"))
	some := GP32()
	VMOVMSKPD(any, some)
	wide := GP64()
	MOVLQSX(some, wide)
	Store(wide, ReturnIndex(0))
	VMOVUPD(sum, Mem{Base: Load(Param("sums"), GP64())})
	VZEROUPPER()
	RET()
}
