//go:build ignore

package main

import (
	. "github.com/mmcloughlin/avo/build"
	. "github.com/mmcloughlin/avo/operand"
	. "github.com/mmcloughlin/avo/reg"
)

// quickTable is kernel.QuickUpper's.
type quickTable struct {
	at                    Register
	steps, middle, end, h Mem
	one, two, three       Mem
	zero                  VecVirtual
}

// upper is kernel.QuickUpper of x, which is changed: each lane takes a row of the table,
// which are then turned into columns.
func (q *quickTable) upper(x VecVirtual) VecVirtual {
	y, below, above := YMM(), YMM(), YMM()
	VMULPD(q.steps, x, y)
	VADDPD(q.middle, y, y)
	VCMPPD(Imm(0x1e), q.zero, y, below) // y > 0, or Q is 1
	VMOVUPD(q.end, above)
	VCMPPD(Imm(0x1d), above, y, above) // y >= the end, where Q is 0
	VMAXPD(q.zero, y, y)
	VMINPD(q.end, y, y)
	whole := XMM()
	VCVTTPD2DQY(y, whole)
	u := YMM()
	VCVTDQ2PD(whole, u)
	VSUBPD(u, y, u)
	VPSLLD(Imm(4), whole, whole)
	rows := make([]VecVirtual, 4)
	at := GP32()
	for i := range rows {
		rows[i] = YMM()
		VPEXTRD(Imm(uint64(i)), whole, at)
		VMOVUPD(Mem{Base: q.at, Index: at.As64(), Scale: 1}, rows[i])
	}
	a, b, c, d := YMM(), YMM(), YMM(), YMM()
	VUNPCKLPD(rows[1], rows[0], a)
	VUNPCKHPD(rows[1], rows[0], b)
	VUNPCKLPD(rows[3], rows[2], c)
	VUNPCKHPD(rows[3], rows[2], d)
	aq, bq, af, bf := rows[0], rows[1], rows[2], rows[3]
	VPERM2F128(Imm(0x20), c, a, aq)
	VPERM2F128(Imm(0x31), c, a, bq)
	VPERM2F128(Imm(0x20), d, b, af)
	VPERM2F128(Imm(0x31), d, b, bf)
	// w = u²(3 - 2u), ga = u(1-u)²h, gb = u²(u-1)h.
	u2, w, g := a, b, c
	VMULPD(u, u, u2)
	VMULPD(q.two, u, w)
	VMOVUPD(q.three, g)
	VSUBPD(w, g, w)
	VMULPD(w, u2, w)
	VSUBPD(aq, bq, bq)
	VMULPD(bq, w, bq)
	VADDPD(bq, aq, aq)
	VMOVUPD(q.one, g)
	VSUBPD(u, g, g)
	VMULPD(g, g, g)
	VMULPD(g, u, g)
	VMULPD(q.h, g, g)
	VMULPD(af, g, g)
	VSUBPD(g, aq, aq)
	VSUBPD(q.one, u, g)
	VMULPD(g, u2, g)
	VMULPD(q.h, g, g)
	VMULPD(bf, g, g)
	VSUBPD(g, aq, aq)
	one := YMM()
	VMOVUPD(q.one, one)
	VBLENDVPD(below, aq, one, aq)
	VANDNPD(aq, above, aq)
	return aq
}

// beyond is kernel.Beyond.
func beyond(c *numbers) {
	TEXT("beyondAVX2", NOSPLIT, "func(sum, mass, w2, v, is, table *float64, n int, r2, excess float64)")
	Pragma("noescape")
	Doc("beyondAVX2 is beyondPlain for n values, a multiple of 4.")
	mass, w2, v, is := Load(Param("mass"), GP64()), Load(Param("w2"), GP64()), Load(Param("v"), GP64()), Load(Param("is"), GP64())
	q := &quickTable{
		at: Load(Param("table"), GP64()), steps: number("quickSteps", 64), middle: number("quickMiddle", 576), end: number("quickEnds", 1152),
		h: number("quickWidth", 1.0/64), one: c.one, two: c.two, three: number("quickThree", 3), zero: YMM(),
	}
	VXORPD(q.zero, q.zero, q.zero)
	nine := number("quickEnd", 9)
	n := Load(Param("n"), GP64())
	r2, excess, all := broadcast("r2"), broadcast("excess"), YMM()
	sum := Load(Param("sum"), GP64())
	VMOVUPD(Mem{Base: sum}, all)
	left := GP32()
	i := GP64()
	XORQ(i, i)
	SHLQ(Imm(3), n)
	place := func(of Register) Mem { return Mem{Base: of, Index: i, Scale: 1} }
	Label("next")
	CMPQ(i, n)
	JGE(LabelRef("done"))
	d, inside, near, far, p := YMM(), YMM(), YMM(), YMM(), YMM()
	VMOVUPD(r2, d)
	VSUBPD(place(w2), d, d)
	VCMPPD(Imm(0x1e), q.zero, d, inside) // c² > 0
	VMAXPD(q.zero, d, d)
	VSQRTPD(d, d)
	VSUBPD(place(v), d, near)
	VMULPD(place(is), near, near)
	VADDPD(place(v), d, far)
	VMULPD(place(is), far, far)
	ends := YMM()
	VCMPPD(Imm(0x11), nine, near, ends) // near < the end
	VANDPD(inside, ends, ends)
	VMOVMSKPD(ends, left)
	VXORPD(p, p, p)
	TESTL(left, left)
	JZ(LabelRef("weigh"))
	first := q.upper(near)
	VMOVAPD(first, p)
	VCMPPD(Imm(0x11), nine, far, ends)
	VMOVMSKPD(ends, left)
	TESTL(left, left)
	JZ(LabelRef("weigh"))
	second := q.upper(far)
	VADDPD(second, p, p)
	Label("weigh")
	VMULPD(excess, p, p)
	VMINPD(c.one, p, p)
	one := YMM()
	VMOVUPD(c.one, one)
	VBLENDVPD(inside, p, one, p)
	VMULPD(place(mass), p, p)
	VADDPD(p, all, all)
	ADDQ(Imm(32), i)
	JMP(LabelRef("next"))
	Label("done")
	VMOVUPD(all, Mem{Base: sum})
	VZEROUPPER()
	RET()
}
