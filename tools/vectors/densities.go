//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
)

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

// logs is kernel.Logs, exps kernel.Exps.
func logs(c *numbers) {
	TEXT("logsAVX2", NOSPLIT, "func(dst, src *float64, n int)")
	Pragma("noescape")
	Doc("logsAVX2 is logsPlain for n values, a multiple of 4, that are normal numbers above 0.")
	dst, src, n := Load(Param("dst"), GP64()), Load(Param("src"), GP64()), Load(Param("n"), GP64())
	loop(n, func() {
		x := YMM()
		VMOVUPD(Mem{Base: src}, x)
		VMOVUPD(c.log(x), Mem{Base: dst})
	}, dst, src)
}

func exps(c *numbers) {
	TEXT("expsAVX2", NOSPLIT, "func(dst, src *float64, n int)")
	Pragma("noescape")
	Doc("expsAVX2 is expsPlain for n values, a multiple of 4.")
	dst, src, n := Load(Param("dst"), GP64()), Load(Param("src"), GP64()), Load(Param("n"), GP64())
	loop(n, func() {
		x := YMM()
		VMOVUPD(Mem{Base: src}, x)
		e, keep := c.exp(x)
		VANDPD(keep, e, e)
		VMOVUPD(e, Mem{Base: dst})
	}, dst, src)
}
