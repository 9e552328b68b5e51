package summary

import (
	"math"
	"sync"

	"leadline/engine/kernel"
)

const (
	// tailEnd is where tails end: beyond, Q < 1.2e-19, far below a thousandth of
	// the least risk allowed, 1e-12.
	tailEnd = kernel.QuickEnd
	i0Steps = 64 // per unit
	i0End   = 16
)

// tailTables are I₀(x)·e^-x at multiples of 1/64; between them the chord, which
// lies above since I₀(x)·e^-x is convex, by at most h²/8·1.5 = 5e-5.
type tailTables struct {
	i0e [i0End*i0Steps + 2]float64
}

var tables = sync.OnceValue(func() *tailTables {
	t := new(tailTables)
	for i := range t.i0e {
		x := float64(i) / i0Steps
		t.i0e[i] = kernel.Exp(kernel.LogI0(x) - x)
	}
	return t
})

// bessel returns I₀(x)·e^-x for x ≥ 0, not below it by more than 1e-6 of it.
// Source beyond 16: Abramowitz & Stegun 9.7.1, first term left out 0.23/x⁵.
func (t *tailTables) bessel(x float64) float64 {
	if y := x * i0Steps; y < i0End*i0Steps {
		i := int(y)
		return t.i0e[i] + float64((y-float64(i))*(t.i0e[i+1]-t.i0e[i]))
	}
	z := 1 / x
	p := 1 + float64(z*(0.125+float64(z*(9.0/128+float64(z*(225.0/3072+float64(z*(11025.0/98304))))))))
	return kernel.InvSqrt2Pi * math.Sqrt(z) * p
}

// circleTail returns P(|X| > r) for X a circular Gaussian with standard
// deviation 1 whose mean is at distance alpha from the origin, r = beta:
// Marcum's Q₁(alpha, beta), never below it and at most 2 % above.
//
// With f(z) = I₀(z)e^-z, which varies slowly, and the normal density φ,
//
//	Q₁ = sqrt(2π) ∫_beta^∞ w(x) f(alpha·x) dx,   w(x) = x φ(x-alpha).
//
// f is taken at the mean x̄ of the weight w, with the second-order term
// ½·f″·alpha²·var(x), f″/f ≈ 1.5/(1+z²·(1.25+0.75z/(z+6))): its limits are 3/2
// at zero and ¾/z² at infinity, and it is within 15 % between. The moments of w are closed forms of Q and φ. Below alpha or 1.6
// the complement is computed, from 0 to beta: the range is the narrower one. The result is exact for alpha = 0 up
// to circleExcess, which covers the error that is left (tested against
// quadrature over alpha and beta).
func (t *tailTables) circleTail(alpha, beta float64) float64 {
	y := beta - alpha
	if y >= tailEnd {
		return 0
	}
	if y <= -tailEnd {
		return 1
	}
	q, f := kernel.QuickTail(y)
	m0, m1, m2 := moments(alpha, q, f, y)
	if alpha == 0 || y >= 0 && beta >= 1.6 {
		if m0 == 0 {
			return 0
		}
		return min(t.weigh(alpha, m0, m1, m2)*(circleExcess/kernel.InvSqrt2Pi), 1)
	}
	q, f = kernel.QuickTail(-alpha)
	n0, n1, n2 := moments(alpha, q, f, -alpha)
	if n0 -= m0; !(n0 > 1e-9) {
		return 1 // the complement is below sqrt(2π)·1e-9
	}
	return 1 - t.weigh(alpha, n0, n1-m1, n2-m2)*((2-circleExcess)/kernel.InvSqrt2Pi)
}

// moments returns ∫ x^k w(x) dx for k = 0, 1, 2 from alpha+y on, given Q(y) and
// φ(y).
func moments(alpha, q, f, y float64) (m0, m1, m2 float64) {
	a2 := alpha * alpha
	m0 = f + float64(alpha*q)
	m1 = float64((a2+1)*q) + float64((2*alpha+y)*f)
	m2 = float64(alpha*float64((a2+3)*q)) + float64((float64(3*a2)+float64(3*alpha*y)+float64(y*y)+2)*f)
	return m0, m1, m2
}

// weigh returns ∫ w f from the moments of w.
func (t *tailTables) weigh(alpha, m0, m1, m2 float64) float64 {
	mean := max(m1/m0, 0) // of a tiny m0, the difference of two, rounding may be more
	variance := m2/m0 - float64(mean*mean)
	z := alpha * mean
	d := 1 + float64(float64(z*z)*(1.25+0.75*z/(z+6)))
	second := 0.75 * float64(alpha*alpha) * variance / d
	return t.bessel(z) * m0 * (1 + second)
}

// circleExcess keeps circleTail on the safe side.
const circleExcess = 1.003
