//go:build ignore

package main

import (
	"fmt"
	"math"

	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// number is a constant in all lanes.
func number(name string, x float64) Mem { return allLanes(name, math.Float64bits(x)) }

func allLanes(name string, x uint64) Mem {
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
	signBit, unknown                      Mem
}

func constants() *numbers {
	c := &numbers{
		half: number("half", 0.5), one: number("one", 1), two: number("two", 2),
		hi: number("ln2High", 6.93147180369123816490e-01), lo: number("ln2Low", 1.90821492927058770002e-10),
		expLeast: number("expLeast", -745.2), expClamp: number("expClamp", -746), perLn2: number("perLn2", 1/math.Ln2),
		expLowest: number("expLowest", -1021), bias: allLanes("expBias", 1023),
		fraction: allLanes("fraction", 1<<52-1), halfExponent: allLanes("halfExponent", 1022<<52),
		float52: number("float52", 1<<52), halfBits: number("halfBits", 1<<52+1022), rootHalf: number("rootHalf", math.Sqrt2/2),
		minusHalf: number("minusHalf", -0.5), logZ: number("logSqrt2Pi", 0.918938533204672741780329736406),
		signBit: allLanes("signBit", 1<<63), unknown: allLanes("unknown", 0x7ff8000000000001),
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
func horner(terms []Mem, x VecVirtual) VecVirtual { return horners(terms, []VecVirtual{x})[0] }

// horners are the polynomials with the terms at several x, side by side.
func horners(terms []Mem, x []VecVirtual) []VecVirtual {
	p := make([]VecVirtual, len(x))
	for j := range p {
		p[j] = YMM()
		VMULPD(terms[len(terms)-1], x[j], p[j])
	}
	for i := len(terms) - 2; i >= 0; i-- {
		for j := range p {
			VADDPD(terms[i], p[j], p[j])
		}
		for j := range p {
			if i > 0 {
				VMULPD(x[j], p[j], p[j])
			}
		}
	}
	return p
}

// exp is kernel.Exp of x ≤ 0, which is changed: wrong below c.expLeast, where
// keep is 0.
func (c *numbers) exp(x VecVirtual) (e, keep VecVirtual) {
	keep = YMM()
	VCMPPD(Imm(13), c.expLeast, x, keep) // x ≥ expLeast
	return c.exps([]VecVirtual{x})[0], keep
}

// exps are kernel.Exp of several x ≤ 0, which are changed, side by side: wrong below
// c.expLeast, though finite.
func (c *numbers) exps(x []VecVirtual) []VecVirtual {
	k, t := make([]VecVirtual, len(x)), YMM()
	for j := range x {
		k[j] = YMM()
		VMAXPD(c.expClamp, x[j], x[j])
		VMULPD(c.perLn2, x[j], k[j])
		VADDPD(c.half, k[j], k[j])
		VROUNDPD(Imm(9), k[j], k[j]) // down
		VMULPD(c.hi, k[j], t)
		VSUBPD(t, x[j], x[j])
		VMULPD(c.lo, k[j], t)
		VSUBPD(t, x[j], x[j])
	}
	p := horners(c.expTerms, x)
	for range 2 {
		for j := range p {
			VMULPD(x[j], p[j], p[j])
		}
	}
	for j := range p {
		VADDPD(x[j], p[j], p[j])
		VADDPD(c.one, p[j], p[j])
	}
	// Times 2^k in two steps, the second one other than 1 where the result is
	// denormal.
	for j := range p {
		a := YMM()
		VMAXPD(c.expLowest, k[j], a)
		VSUBPD(a, k[j], k[j])
		for _, by := range []VecVirtual{a, k[j]} {
			whole := XMM()
			VCVTPD2DQY(by, whole)
			VPMOVSXDQ(whole, t)
			VPADDQ(c.bias, t, t)
			VPSLLQ(Imm(52), t, t)
			VMULPD(t, p[j], p[j])
		}
	}
	return p
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
