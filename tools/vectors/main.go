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
	"fmt"
	"math"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

func main() {
	ConstraintExpr("amd64")
	spread()
	addScaled()
	combine()
	weighBy()
	c := constants()
	weigh(c)
	logNormal(c)
	logAdd(c)
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

// combine is kernel.Combine for n values, a multiple of 4: sixteen at a time, then
// four.
func combine() {
	TEXT("combineAVX2", NOSPLIT, "func(dst, src *float64, at *int, weight *float64, n, taps int)")
	Pragma("noescape")
	Doc("combineAVX2 is combinePlain for n values, a multiple of 4.")
	dst := Load(Param("dst"), GP64())
	combined(func(sums []VecVirtual) {
		for i := range sums {
			VMOVUPD(sums[i], Mem{Base: dst, Disp: 32 * i})
		}
		ADDQ(U32(32*len(sums)), dst)
	})
	VZEROUPPER()
	RET()
}

// weighBy is kernel.WeighBy for n values, a multiple of 4.
func weighBy() {
	TEXT("weighByAVX2", NOSPLIT, "func(dst, mass, src *float64, at *int, weight, sum *float64, n, taps int)")
	Pragma("noescape")
	Doc("weighByAVX2 is weighByPlain for n values, a multiple of 4.")
	dst, mass, sum := Load(Param("dst"), GP64()), Load(Param("mass"), GP64()), Load(Param("sum"), GP64())
	zero := YMM()
	VXORPD(zero, zero, zero)
	all := make([]VecVirtual, 4)
	for i := range all {
		all[i] = YMM()
		VMOVUPD(Mem{Base: sum, Disp: 32 * i}, all[i])
	}
	combined(func(sums []VecVirtual) {
		for i := range sums {
			VMULPD(Mem{Base: mass, Disp: 32 * i}, sums[i], sums[i])
			VMAXPD(zero, sums[i], sums[i]) // zero where it is not above that
			VMOVUPD(sums[i], Mem{Base: dst, Disp: 32 * i})
			VADDPD(sums[i], all[i], all[i])
		}
		ADDQ(U32(32*len(sums)), dst)
		ADDQ(U32(32*len(sums)), mass)
	})
	for i := range all {
		VMOVUPD(all[i], Mem{Base: sum, Disp: 32 * i})
	}
	VZEROUPPER()
	RET()
}

// combined has use take the weighted sums of stretches of src, sixteen values at a time,
// then four.
func combined(use func(sums []VecVirtual)) {
	src, at, weight := Load(Param("src"), GP64()), Load(Param("at"), GP64()), Load(Param("weight"), GP64())
	n, taps := Load(Param("n"), GP64()), Load(Param("taps"), GP64())
	k, from := GP64(), GP64()
	block := func(name string, vectors int) {
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
	block("sixteen", 4)
	block("four", 1)
}

// number is a constant in all lanes.
func number(name string, x float64) Mem { return lanes(name, math.Float64bits(x)) }

func lanes(name string, x uint64) Mem {
	m := GLOBL(name, RODATA|NOPTR)
	for i := range 4 {
		DATA(8*i, U64(x))
	}
	return m
}

// numbers are the constants of kernel.Exp and kernel.Log.
type numbers struct {
	half, one, two, hi, lo                Mem
	expLeast, expClamp, perLn2, expLowest Mem
	expTerms, logTerms                    []Mem // from the constant term on
	bias, fraction, halfExponent, float52 Mem
	halfBits, rootHalf, minusHalf, logZ   Mem
	signBit                               Mem
}

func constants() *numbers {
	c := &numbers{
		half: number("half", 0.5), one: number("one", 1), two: number("two", 2),
		hi: number("ln2High", 6.93147180369123816490e-01), lo: number("ln2Low", 1.90821492927058770002e-10),
		expLeast: number("expLeast", -745.2), expClamp: number("expClamp", -746), perLn2: number("perLn2", 1/math.Ln2),
		expLowest: number("expLowest", -1021), bias: lanes("expBias", 1023),
		fraction: lanes("fraction", 1<<52-1), halfExponent: lanes("halfExponent", 1022<<52),
		float52: number("float52", 1<<52), halfBits: number("halfBits", 1<<52+1022), rootHalf: number("rootHalf", math.Sqrt2/2),
		minusHalf: number("minusHalf", -0.5), logZ: number("logSqrt2Pi", 0.918938533204672741780329736406),
		signBit: lanes("signBit", 1<<63),
	}
	factorial := 1.0
	for i := 2; i <= 13; i++ {
		factorial *= float64(i)
		c.expTerms = append(c.expTerms, number(fmt.Sprintf("exp%d", i), 1/factorial))
	}
	for i := 3; i <= 23; i += 2 {
		c.logTerms = append(c.logTerms, number(fmt.Sprintf("log%d", i), 1/float64(i)))
	}
	return c
}

// horner is the polynomial with the terms, at x.
func horner(terms []Mem, x VecVirtual) VecVirtual {
	p := YMM()
	VMULPD(terms[len(terms)-1], x, p)
	for i := len(terms) - 2; i >= 0; i-- {
		VADDPD(terms[i], p, p)
		if i > 0 {
			VMULPD(x, p, p)
		}
	}
	return p
}

// exp is kernel.Exp of x ≤ 0, which is changed: wrong below c.expLeast, where
// keep is 0.
func (c *numbers) exp(x VecVirtual) (e, keep VecVirtual) {
	keep = YMM()
	k, r, t := YMM(), YMM(), YMM()
	VCMPPD(Imm(13), c.expLeast, x, keep) // x ≥ expLeast
	VMAXPD(c.expClamp, x, x)
	VMULPD(c.perLn2, x, k)
	VADDPD(c.half, k, k)
	VROUNDPD(Imm(9), k, k) // down
	VMULPD(c.hi, k, t)
	VSUBPD(t, x, r)
	VMULPD(c.lo, k, t)
	VSUBPD(t, r, r)
	p := horner(c.expTerms, r)
	VMULPD(r, p, p)
	VMULPD(r, p, p)
	VADDPD(r, p, p)
	VADDPD(c.one, p, p)
	// Times 2^k in two steps, the second one other than 1 where the result is
	// denormal.
	a := YMM()
	VMAXPD(c.expLowest, k, a)
	VSUBPD(a, k, k)
	for _, by := range []VecVirtual{a, k} {
		whole := XMM()
		VCVTPD2DQY(by, whole)
		VPMOVSXDQ(whole, t)
		VPADDQ(c.bias, t, t)
		VPSLLQ(Imm(52), t, t)
		VMULPD(t, p, p)
	}
	return p, keep
}

// log is kernel.Log of x > 0, normal and finite.
func (c *numbers) log(x VecVirtual) VecVirtual {
	m, k, low, t := YMM(), YMM(), YMM(), YMM()
	VPSRLQ(Imm(52), x, k)
	VPOR(c.float52, k, k)
	VSUBPD(c.halfBits, k, k) // the exponent, as a number
	VPAND(c.fraction, x, m)
	VPOR(c.halfExponent, m, m)
	VCMPPD(Imm(1), c.rootHalf, m, low) // m < √½: twice as much, and one less
	VANDPD(low, m, t)
	VADDPD(t, m, m)
	VANDPD(c.one, low, t)
	VSUBPD(t, k, k)
	f, s, z := YMM(), YMM(), YMM()
	VSUBPD(c.one, m, f)
	VADDPD(c.two, f, s)
	VDIVPD(s, f, s)
	VMULPD(s, s, z)
	p := horner(c.logTerms, z)
	VMULPD(z, p, p)
	VADDPD(p, p, p)
	VSUBPD(p, f, p)
	VMULPD(s, p, p)
	VMULPD(c.lo, k, t)
	VSUBPD(t, p, p)
	VSUBPD(f, p, p)
	VMULPD(c.hi, k, k)
	VSUBPD(p, k, k)
	return k
}

// loop goes over n values, four at a time, and moves the pointers on.
func loop(n Register, body func(), pointers ...Register) {
	Label("next")
	TESTQ(n, n)
	JZ(LabelRef("done"))
	body()
	for _, pointer := range pointers {
		ADDQ(Imm(32), pointer)
	}
	SUBQ(Imm(4), n)
	JMP(LabelRef("next"))
	Label("done")
	VZEROUPPER()
	RET()
}

// broadcast loads a parameter into all lanes.
func broadcast(name string) VecVirtual {
	at, err := Param(name).Resolve()
	if err != nil {
		panic(err)
	}
	v := YMM()
	VBROADCASTSD(at.Addr, v)
	return v
}

// weigh is kernel.Weigh.
func weigh(c *numbers) {
	TEXT("weighAVX2", NOSPLIT, "func(dst, mass, logs *float64, n int, most, least float64)")
	Pragma("noescape")
	Doc("weighAVX2 is weighPlain for n values, a multiple of 4.")
	dst, mass, logs := Load(Param("dst"), GP64()), Load(Param("mass"), GP64()), Load(Param("logs"), GP64())
	n := Load(Param("n"), GP64())
	most, least := broadcast("most"), broadcast("least")
	loop(n, func() {
		m, x, enough := YMM(), YMM(), YMM()
		VMOVUPD(Mem{Base: mass}, m)
		VMOVUPD(Mem{Base: logs}, x)
		VSUBPD(most, x, x)
		e, keep := c.exp(x)
		VCMPPD(Imm(13), least, m, enough)
		VANDPD(enough, keep, keep)
		VMULPD(e, m, m)
		VANDPD(keep, m, m)
		VMOVUPD(m, Mem{Base: dst})
	}, dst, mass, logs)
}

// logNormal is kernel.LogNormal.
func logNormal(c *numbers) {
	TEXT("logNormalAVX2", NOSPLIT, "func(dst, residual, variance *float64, n int, logWeight float64)")
	Pragma("noescape")
	Doc("logNormalAVX2 is logNormalPlain for n values, a multiple of 4, whose variances are normal numbers.")
	dst, residual, variance := Load(Param("dst"), GP64()), Load(Param("residual"), GP64()), Load(Param("variance"), GP64())
	n := Load(Param("n"), GP64())
	weight := broadcast("logWeight")
	loop(n, func() {
		r, s, inverse := YMM(), YMM(), YMM()
		VMOVUPD(Mem{Base: residual}, r)
		VMOVUPD(Mem{Base: variance}, s)
		VMULPD(r, r, r)
		VMOVUPD(c.one, inverse)
		VDIVPD(s, inverse, inverse)
		VMULPD(inverse, r, r)
		VADDPD(c.log(s), r, r)
		VMULPD(c.minusHalf, r, r)
		VSUBPD(c.logZ, r, r)
		VADDPD(weight, r, r)
		VMOVUPD(r, Mem{Base: dst})
	}, dst, residual, variance)
}

// logAdd is kernel.LogAdd.
func logAdd(c *numbers) {
	TEXT("logAddAVX2", NOSPLIT, "func(dst *float64, n int, log float64)")
	Pragma("noescape")
	Doc("logAddAVX2 is logAddPlain for n values, a multiple of 4.")
	dst, n := Load(Param("dst"), GP64()), Load(Param("n"), GP64())
	other := broadcast("log")
	loop(n, func() {
		x, apart := YMM(), YMM()
		VMOVUPD(Mem{Base: dst}, x)
		VSUBPD(other, x, apart)
		VORPD(c.signBit, apart, apart) // the negative of its size
		VMAXPD(other, x, x)
		e, keep := c.exp(apart)
		VANDPD(keep, e, e)
		VADDPD(c.one, e, e)
		VADDPD(c.log(e), x, x)
		VMOVUPD(x, Mem{Base: dst})
	}, dst)
}
