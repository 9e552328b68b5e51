//go:build ignore

// Command vectors writes engine/kernel's loops for amd64: instructions of AVX2,
// four values of float64 at a time. It has a modfile of its own (tools/avo.mod);
// see `make generate`.
//
// Each lane does what the plain Go beside it does, operation by operation and
// rounded each time, so that the bits are the same: products are not fused with
// sums, and no sum goes over lanes.
package main

import (
	"math"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

func main() {
	ConstraintExpr("amd64")
	spread()
	weigh()
	Generate()
}

// spread is kernel.Spread for n values, a multiple of 4: sixteen at a time, then
// four.
func spread() {
	TEXT("spreadAVX2", NOSPLIT, "func(dst, src, weight *float64, n, stride, reach int)")
	Pragma("noescape")
	Doc("spreadAVX2 is spreadPlain for n values, a multiple of 4; src is the middle, stride in bytes, reach the number of weights beside it.")
	dst, src, weight := Load(Param("dst"), GP64()), Load(Param("src"), GP64()), Load(Param("weight"), GP64())
	n, stride, reach := Load(Param("n"), GP64()), Load(Param("stride"), GP64()), Load(Param("reach"), GP64())
	below, above, w, left := GP64(), GP64(), GP64(), GP64()

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
	VZEROUPPER()
	RET()
}

// weigh is kernel.Weigh for n values, a multiple of 4, with kernel.Exp in it.
func weigh() {
	number := func(name string, x float64) Mem {
		m := GLOBL(name, RODATA|NOPTR)
		for i := range 4 {
			DATA(8*i, U64(math.Float64bits(x)))
		}
		return m
	}
	least := number("expLeast", -745.2)
	clamp := number("expClamp", -746)
	perLn2 := number("expPerLn2", 1/math.Ln2)
	half := number("expHalf", 0.5)
	one := number("expOne", 1)
	hi := number("expLn2Hi", 6.93147180369123816490e-01)
	lo := number("expLn2Lo", 1.90821492927058770002e-10)
	lowest := number("expLowest", -1021)
	var terms []Mem
	factorial := 1.0
	names := []string{"expC2", "expC3", "expC4", "expC5", "expC6", "expC7", "expC8", "expC9", "expC10", "expC11", "expC12", "expC13"}
	for i, name := range names {
		factorial *= float64(i + 2)
		terms = append(terms, number(name, 1/factorial))
	}
	bias := GLOBL("expBias", RODATA|NOPTR)
	for i := range 4 {
		DATA(8*i, U64(1023))
	}

	TEXT("weighAVX2", NOSPLIT, "func(dst, mass, logs *float64, n int, most, least float64)")
	Pragma("noescape")
	Doc("weighAVX2 is weighPlain for n values, a multiple of 4.")
	dst, mass, logs := Load(Param("dst"), GP64()), Load(Param("mass"), GP64()), Load(Param("logs"), GP64())
	n := Load(Param("n"), GP64())
	most, enough := YMM(), YMM()
	mostAt, err := Param("most").Resolve()
	if err != nil {
		panic(err)
	}
	leastAt, err := Param("least").Resolve()
	if err != nil {
		panic(err)
	}
	VBROADCASTSD(mostAt.Addr, most)
	VBROADCASTSD(leastAt.Addr, enough)

	Label("next")
	TESTQ(n, n)
	JZ(LabelRef("done"))
	m, x, keep, k, r, p, t := YMM(), YMM(), YMM(), YMM(), YMM(), YMM(), YMM()
	VMOVUPD(Mem{Base: mass}, m)
	VMOVUPD(Mem{Base: logs}, x)
	VSUBPD(most, x, x)
	VCMPPD(Imm(13), least, x, keep) // x ≥ least
	VCMPPD(Imm(13), enough, m, t)
	VANDPD(t, keep, keep)
	VMAXPD(clamp, x, x) // what is below is not kept
	VMULPD(perLn2, x, k)
	VADDPD(half, k, k)
	VROUNDPD(Imm(9), k, k) // down
	VMULPD(hi, k, t)
	VSUBPD(t, x, r)
	VMULPD(lo, k, t)
	VSUBPD(t, r, r)
	VMULPD(terms[len(terms)-1], r, p)
	for i := len(terms) - 2; i >= 0; i-- {
		VADDPD(terms[i], p, p)
		if i > 0 {
			VMULPD(r, p, p)
		}
	}
	VMULPD(r, p, p)
	VMULPD(r, p, p)
	VADDPD(r, p, p)
	VADDPD(one, p, p)
	// Times 2^k in two steps, the second one other than 1 where the result is
	// denormal.
	a := YMM()
	VMAXPD(lowest, k, a)
	VSUBPD(a, k, k)
	for _, e := range []VecVirtual{a, k} {
		whole := XMM()
		VCVTPD2DQY(e, whole)
		VPMOVSXDQ(whole, t)
		VPADDQ(bias, t, t)
		VPSLLQ(Imm(52), t, t)
		VMULPD(t, p, p)
	}
	VMULPD(p, m, m)
	VANDPD(keep, m, m)
	VMOVUPD(m, Mem{Base: dst})
	for _, pointer := range []Register{dst, mass, logs} {
		ADDQ(Imm(32), pointer)
	}
	SUBQ(Imm(4), n)
	JMP(LabelRef("next"))
	Label("done")
	VZEROUPPER()
	RET()
}
