//go:build ignore

package main

import (
	"fmt"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// spread is kernel.SpreadRows for rows of cols values, a multiple of 4: sixteen at a
// time, then four.
func spread() {
	TEXT("spreadAVX2", NOSPLIT, "func(dst, src, weight *float64, cols, rows, from, stride, reach int)")
	Pragma("noescape")
	Doc("spreadAVX2 is spreadPlain for rows of cols values, a multiple of 4; src is the middle, from and stride in bytes, reach the number of weights beside it.")
	dst, src, weight := Load(Param("dst"), GP64()), Load(Param("src"), GP64()), Load(Param("weight"), GP64())
	rows, stride, reach := Load(Param("rows"), GP64()), Load(Param("stride"), GP64()), Load(Param("reach"), GP64())
	n, first, below, above, w, left := GP64(), GP64(), GP64(), GP64(), GP64(), GP64()
	Label("row")
	Load(Param("cols"), n)
	MOVQ(src, first)

	block := func(name string, vectors int) {
		Label(name)
		CMPQ(n, Imm(uint64(4*vectors)))
		JB(LabelRef(name + "Done"))
		sums := make([]VecVirtual, vectors)
		by, part := YMM(), YMM()
		VBROADCASTSD(Mem{Base: weight}, by)
		for i := range sums {
			sums[i] = YMM()
			VMULPD(Mem{Base: src, Disp: 32 * i}, by, sums[i])
		}
		MOVQ(src, below)
		MOVQ(src, above)
		MOVQ(weight, w)
		MOVQ(reach, left)
		Label(name + "Tap")
		TESTQ(left, left)
		JZ(LabelRef(name + "Out"))
		SUBQ(stride, below)
		ADDQ(stride, above)
		ADDQ(Imm(8), w)
		VBROADCASTSD(Mem{Base: w}, by)
		for i := range sums {
			VMULPD(Mem{Base: below, Disp: 32 * i}, by, part)
			VADDPD(part, sums[i], sums[i])
			VMULPD(Mem{Base: above, Disp: 32 * i}, by, part)
			VADDPD(part, sums[i], sums[i])
		}
		DECQ(left)
		JMP(LabelRef(name + "Tap"))
		Label(name + "Out")
		for i := range sums {
			VMOVUPD(sums[i], Mem{Base: dst, Disp: 32 * i})
		}
		ADDQ(Imm(uint64(32*vectors)), dst)
		ADDQ(Imm(uint64(32*vectors)), src)
		SUBQ(Imm(uint64(4*vectors)), n)
		JMP(LabelRef(name))
		Label(name + "Done")
	}
	block("sixteen", 4)
	block("four", 1)
	MOVQ(first, src)
	ADDQ(Load(Param("from"), below), src)
	DECQ(rows)
	JNZ(LabelRef("row"))
	VZEROUPPER()
	RET()
}

// addScaled is kernel.AddScaled for n values, a multiple of 4: sixteen at a time,
// then four.
func addScaled() {
	TEXT("addScaledAVX2", NOSPLIT, "func(dst, src *float64, n int, weight float64)")
	Pragma("noescape")
	Doc("addScaledAVX2 is addScaledPlain for n values, a multiple of 4.")
	dst, src, n := Load(Param("dst"), GP64()), Load(Param("src"), GP64()), Load(Param("n"), GP64())
	by := broadcast("weight")
	block := func(name string, vectors int) {
		Label(name)
		CMPQ(n, Imm(uint64(4*vectors)))
		JB(LabelRef(name + "Done"))
		parts := make([]VecVirtual, vectors)
		for i := range parts {
			parts[i] = YMM()
			VMULPD(Mem{Base: src, Disp: 32 * i}, by, parts[i])
			VADDPD(Mem{Base: dst, Disp: 32 * i}, parts[i], parts[i])
		}
		for i := range parts {
			VMOVUPD(parts[i], Mem{Base: dst, Disp: 32 * i})
		}
		ADDQ(Imm(uint64(32*vectors)), dst)
		ADDQ(Imm(uint64(32*vectors)), src)
		SUBQ(Imm(uint64(4*vectors)), n)
		JMP(LabelRef(name))
		Label(name + "Done")
	}
	block("sixteen", 4)
	block("four", 1)
	VZEROUPPER()
	RET()
}

// combine is kernel.Combine for n values, a multiple of 4: 48 at a time, then sixteen,
// then four.
func combine() {
	TEXT("combineAVX2", NOSPLIT, "func(dst, src *float64, at *int, weight *float64, n, taps int)")
	Pragma("noescape")
	Doc("combineAVX2 is combinePlain for n values, a multiple of 4.")
	dst, src, at, weight := Load(Param("dst"), GP64()), Load(Param("src"), GP64()), Load(Param("at"), GP64()), Load(Param("weight"), GP64())
	n, taps := Load(Param("n"), GP64()), Load(Param("taps"), GP64())
	combined("", src, at, weight, n, taps, storing(dst), 12, 4, 1)
	VZEROUPPER()
	RET()
}

// weighBy is kernel.WeighBy for n values, a multiple of 4.
func weighBy() {
	TEXT("weighByAVX2", NOSPLIT, "func(dst, mass, src *float64, at *int, weight, sum *float64, n, taps int)")
	Pragma("noescape")
	Doc("weighByAVX2 is weighByPlain for n values, a multiple of 4.")
	dst, mass, sum := Load(Param("dst"), GP64()), Load(Param("mass"), GP64()), Load(Param("sum"), GP64())
	src, at, weight := Load(Param("src"), GP64()), Load(Param("at"), GP64()), Load(Param("weight"), GP64())
	n, taps := Load(Param("n"), GP64()), Load(Param("taps"), GP64())
	zero := YMM()
	VXORPD(zero, zero, zero)
	all := make([]VecVirtual, 4)
	for i := range all {
		all[i] = YMM()
		VMOVUPD(Mem{Base: sum, Disp: 32 * i}, all[i])
	}
	combined("", src, at, weight, n, taps, weighing(dst, mass, zero, all), 8, 4, 1)
	for i := range all {
		VMOVUPD(all[i], Mem{Base: sum, Disp: 32 * i})
	}
	VZEROUPPER()
	RET()
}

// storing writes sums to dst, weighing times mass and adds them to all; they move on.
func storing(dst Register) func(sums []VecVirtual) {
	return func(sums []VecVirtual) {
		for i := range sums {
			VMOVUPD(sums[i], Mem{Base: dst, Disp: 32 * i})
		}
		ADDQ(U32(32*len(sums)), dst)
	}
}

func weighing(dst, mass Register, zero VecVirtual, all []VecVirtual) func(sums []VecVirtual) {
	return func(sums []VecVirtual) {
		for i := range sums {
			VMULPD(Mem{Base: mass, Disp: 32 * i}, sums[i], sums[i])
			VMAXPD(zero, sums[i], sums[i]) // zero where it is not above that
			VMOVUPD(sums[i], Mem{Base: dst, Disp: 32 * i})
			VADDPD(sums[i], all[i%4], all[i%4])
		}
		ADDQ(U32(32*len(sums)), dst)
		ADDQ(U32(32*len(sums)), mass)
	}
}

// combined has use take the weighted sums of stretches of src, as many vectors at a
// time as there are left of the sizes. It uses up src and n; labels begin with prefix.
func combined(prefix string, src, at, weight, n, taps Register, use func(sums []VecVirtual), sizes ...int) {
	k, from := GP64(), GP64()
	for _, vectors := range sizes {
		name := fmt.Sprintf("%sby%d", prefix, 4*vectors)
		Label(name)
		CMPQ(n, Imm(uint64(4*vectors)))
		JB(LabelRef(name + "Done"))
		sums := make([]VecVirtual, vectors)
		by, part := YMM(), YMM()
		VBROADCASTSD(Mem{Base: weight}, by)
		MOVQ(Mem{Base: at}, from)
		for i := range sums {
			sums[i] = YMM()
			VMULPD(Mem{Base: src, Index: from, Scale: 8, Disp: 32 * i}, by, sums[i])
		}
		MOVQ(U32(1), k)
		Label(name + "Tap")
		CMPQ(k, taps)
		JGE(LabelRef(name + "Out"))
		VBROADCASTSD(Mem{Base: weight, Index: k, Scale: 8}, by)
		MOVQ(Mem{Base: at, Index: k, Scale: 8}, from)
		for i := range sums {
			VMULPD(Mem{Base: src, Index: from, Scale: 8, Disp: 32 * i}, by, part)
			VADDPD(part, sums[i], sums[i])
		}
		INCQ(k)
		JMP(LabelRef(name + "Tap"))
		Label(name + "Out")
		use(sums)
		ADDQ(U32(32*vectors), src)
		SUBQ(U32(4*vectors), n)
		JMP(LabelRef(name))
		Label(name + "Done")
	}
}
