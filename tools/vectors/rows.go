//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// Where things are in a kernel.Row from its Col on, and in a kernel.RowTap from its Cols.
const (
	rowLen, rowStart, rowBytes  = 4, 8, 16
	tapRows, tapAhead, tapBytes = -24, 8, 40
)

// fetch asks for what comes some rows after p: the CPU does not by itself where a page
// ends.
func fetch(p Register) {
	for i := range 7 {
		PREFETCHT0(Mem{Base: p, Disp: 2048 + 64*i})
	}
}

// combineRows is kernel.CombineRows.
func combineRows() {
	TEXT("combineRowsAVX2", NOSPLIT, "func(dst *float64, to *int32, src *float64, taps *int, weight *float64, at *int, rows, count, dstLen, srcLen int) (done int)")
	Pragma("noescape")
	Doc("combineRowsAVX2 is combineRowsPlain for rows of whole lanes; to is the first row, taps the first tap's Cols; done is rows, or the row that has places which are not in dst or src.")
	at, weight, count := Load(Param("at"), GP64()), Load(Param("weight"), GP64()), Load(Param("count"), GP64())
	row := GP64() // in bytes
	XORQ(row, row)
	Label("row")
	bytes := Load(Param("rows"), GP64())
	SHLQ(Imm(4), bytes)
	CMPQ(row, bytes)
	JGE(LabelRef("end"))
	to := Load(Param("to"), GP64())
	ADDQ(row, to)
	n, col, start := GP64(), GP64(), GP64()
	MOVLQSX(Mem{Base: to, Disp: rowLen}, n)
	TESTQ(n, n)
	JZ(LabelRef("next"))
	JS(LabelRef("end"))
	MOVLQSX(Mem{Base: to}, col)
	MOVQ(Mem{Base: to, Disp: rowStart}, start)
	// What is written.
	limit := Load(Param("dstLen"), GP64())
	SUBQ(n, limit)
	SUBQ(Imm(4), limit)
	JS(LabelRef("end"))
	CMPQ(start, limit)
	JA(LabelRef("end"))
	// What is read.
	limit = Load(Param("srcLen"), GP64())
	SUBQ(n, limit)
	JS(LabelRef("end"))
	tap, t, rows, from, by := Load(Param("taps"), GP64()), GP64(), GP64(), GP64(), GP64()
	XORQ(t, t)
	Label("tap")
	MOVQ(Mem{Base: tap, Disp: tapRows}, rows)
	MOVQ(Mem{Base: rows, Index: row, Scale: 1, Disp: rowStart}, from)
	MOVLQSX(Mem{Base: rows, Index: row, Scale: 1}, by)
	ADDQ(Mem{Base: tap}, by)
	ADDQ(col, from)
	SUBQ(by, from)
	CMPQ(from, limit)
	JA(LabelRef("end"))
	MOVQ(from, Mem{Base: at, Index: t, Scale: 8})
	CMPB(Mem{Base: tap, Disp: tapAhead}, Imm(0))
	JEQ(LabelRef("near"))
	ahead := Load(Param("src"), GP64())
	LEAQ(Mem{Base: ahead, Index: from, Scale: 8}, ahead)
	fetch(ahead)
	Label("near")
	ADDQ(Imm(tapBytes), tap)
	INCQ(t)
	CMPQ(t, count)
	JL(LabelRef("tap"))

	dst, src := Load(Param("dst"), GP64()), Load(Param("src"), GP64())
	LEAQ(Mem{Base: dst, Index: start, Scale: 8}, dst)
	fetch(dst)
	combined("", src, at, weight, n, count, storing(dst), 12, 4, 1)
	zero := YMM()
	VXORPD(zero, zero, zero)
	VMOVUPD(zero, Mem{Base: dst})
	Label("next")
	ADDQ(Imm(rowBytes), row)
	JMP(LabelRef("row"))
	Label("end")
	SHRQ(Imm(4), row)
	Store(row, ReturnIndex(0))
	VZEROUPPER()
	RET()
}

// weighRows is kernel.WeighRows: sixteen at a time, then four, with the weights in
// registers.
func weighRows() {
	TEXT("weighRowsAVX2", NOSPLIT, "func(dst, mass *float64, to *int32, src *float64, weight *float64, rows, first, step, pitch, massLen, srcLen int, sum *float64) (done int)")
	Pragma("noescape")
	Doc("weighRowsAVX2 is weighRowsPlain for rows of whole lanes, to the first, with lengths of mass and of src before its last stretch; sum is added to; done is rows, or the row that has places which are not in mass or src.")
	pitch, three := Load(Param("pitch"), GP64()), GP64()
	SHLQ(Imm(3), pitch)
	LEAQ(Mem{Base: pitch, Index: pitch, Scale: 2}, three)
	row, first, to := GP64(), Load(Param("first"), GP64()), Load(Param("to"), GP64())
	weight := Load(Param("weight"), GP64())
	by := make([]VecVirtual, 4)
	for i := range by {
		by[i] = YMM()
		VBROADCASTSD(Mem{Base: weight, Disp: 8 * i}, by[i])
	}
	zero, total := YMM(), XMM()
	VXORPD(zero, zero, zero)
	VMOVSD(Mem{Base: Load(Param("sum"), GP64())}, total)
	XORQ(row, row)
	Label("row")
	CMPQ(row, Load(Param("rows"), GP64()))
	JGE(LabelRef("end"))
	n, start, from := GP64(), GP64(), GP64()
	MOVLQSX(Mem{Base: to, Disp: rowLen}, n)
	TESTQ(n, n)
	JZ(LabelRef("next"))
	JS(LabelRef("end"))
	MOVQ(Mem{Base: to, Disp: rowStart}, start)
	limit := Load(Param("massLen"), GP64())
	SUBQ(n, limit)
	JS(LabelRef("end"))
	CMPQ(start, limit)
	JA(LabelRef("end"))
	MOVLQSX(Mem{Base: to}, from)
	ADDQ(first, from)
	limit = Load(Param("srcLen"), GP64())
	SUBQ(n, limit)
	JS(LabelRef("end"))
	CMPQ(from, limit)
	JA(LabelRef("end"))

	src, dst, mass := Load(Param("src"), GP64()), Load(Param("dst"), GP64()), Load(Param("mass"), GP64())
	LEAQ(Mem{Base: src, Index: from, Scale: 8}, src)
	LEAQ(Mem{Base: dst, Index: start, Scale: 8}, dst)
	LEAQ(Mem{Base: mass, Index: start, Scale: 8}, mass)
	fetch(mass)
	all := make([]VecVirtual, 4)
	for i := range all {
		all[i] = YMM()
		VXORPD(all[i], all[i], all[i])
	}
	use := weighing(dst, mass, zero, all)
	block := func(name string, vectors int) {
		Label(name)
		CMPQ(n, Imm(uint64(4*vectors)))
		JB(LabelRef(name + "Done"))
		sums, part := make([]VecVirtual, vectors), YMM()
		for i := range sums {
			at := 32 * i
			sums[i] = YMM()
			VMULPD(Mem{Base: src, Disp: at}, by[0], sums[i])
			for k, from := range []Mem{{Base: src, Index: pitch, Scale: 1, Disp: at}, {Base: src, Index: pitch, Scale: 2, Disp: at}, {Base: src, Index: three, Scale: 1, Disp: at}} {
				VMULPD(from, by[k+1], part)
				VADDPD(part, sums[i], sums[i])
			}
		}
		use(sums)
		ADDQ(U32(32*vectors), src)
		SUBQ(U32(4*vectors), n)
		JMP(LabelRef(name))
		Label(name + "Done")
	}
	block("sixteen", 4)
	block("four", 1)
	VADDPD(all[1], all[0], all[0])
	VADDPD(all[3], all[2], all[2])
	VADDPD(all[2], all[0], all[0])
	high := XMM()
	VEXTRACTF128(Imm(1), all[0], high)
	low := all[0].AsX()
	VHADDPD(low, low, low)
	VHADDPD(high, high, high)
	VADDSD(high, low, low)
	VADDSD(low, total, total)
	Label("next")
	ADDQ(Imm(rowBytes), to)
	ADDQ(Load(Param("step"), GP64()), first)
	INCQ(row)
	JMP(LabelRef("row"))
	Label("end")
	VMOVSD(total, Mem{Base: Load(Param("sum"), GP64())})
	Store(row, ReturnIndex(0))
	VZEROUPPER()
	RET()
}

// widen is kernel.Widen: an extent's four numbers at a time.
func widen() {
	TEXT("widenAVX2", NOSPLIT, "func(to, rows *int32, n int, cols, beyond int32)")
	Pragma("noescape")
	Doc("widenAVX2 is widenPlain for n rows; to is the first extent, rows the first row.")
	four := func(name string, x ...int32) Mem {
		m := GLOBL(name, RODATA|NOPTR)
		for i, v := range x {
			DATA(4*i, U32(uint32(v)))
		}
		return m
	}
	const most = 1<<31 - 1
	to, rows, n := Load(Param("to"), GP64()), Load(Param("rows"), GP64()), Load(Param("n"), GP64())
	signs, empty, zero := XMM(), XMM(), XMM()
	VMOVDQU(four("extentSigns", 1, -1, -1, 1), signs)
	VMOVDQU(four("extentEmpty", most, most, -most, most), empty)
	VPXOR(zero, zero, zero)
	// By how much each is more: cols, less cols and beyond.
	by, more := XMM(), XMM()
	cols, beyond := Load(Param("cols"), GP32()), Load(Param("beyond"), GP32())
	VMOVD(cols, by)
	VPSHUFD(Imm(0), by, by)
	VPSIGND(signs, by, by)
	VMOVD(beyond, more)
	VPSHUFD(Imm(0b11_00_00_11), more, more) // 0, beyond, beyond, 0
	VPSUBD(more, by, by)
	Label("row")
	row, length, where := XMM(), XMM(), XMM()
	VMOVQ(Mem{Base: rows}, row)
	VPSHUFD(Imm(0b01_10_01_10), row, length) // 0, Len, 0, Len
	VPSHUFD(Imm(0b01_01_01_01), row, where)
	VPCMPEQD(zero, where, where)
	VPSHUFD(Imm(0), row, row)
	VPADDD(length, row, row)
	VPSIGND(signs, row, row)
	VPADDD(by, row, row)
	VPBLENDVB(where, empty, row, row)
	VPMINSD(Mem{Base: to}, row, row)
	VMOVDQU(row, Mem{Base: to})
	ADDQ(Imm(16), to)
	ADDQ(Imm(rowBytes), rows)
	DECQ(n)
	JNZ(LabelRef("row"))
	RET()
}
