package summary

import (
	"math"
	"sync"

	"leadline/engine/kernel"
)

// The radii of a posterior need the normal distribution's tail some ten
// thousand times. A table of it, interpolated by cubics, costs a few
// nanoseconds.
const (
	// tailEnd is where the tables end: beyond, Q < 1.2e-19, far below a
	// thousandth of the least risk allowed, 1e-12.
	tailEnd   = 9
	tailSteps = 64 // per unit
	i0Steps   = 64 // per unit
	i0End     = 16
)

// tailTables are values of Q and of the density at multiples of 1/64. The
// cubic through values and slopes is off by h⁴/384·|f⁗|: below 1.1e-6 of Q
// and 1.2e-6 of the density up to 9.
type tailTables struct {
	at [2*tailEnd*tailSteps + 2]struct{ q, f float64 }
	// i0e is I₀(x)·e^-x at multiples of 1/64; between them the chord, which
	// lies above since I₀(x)·e^-x is convex, by at most h²/8·1.5 = 5e-5.
	i0e [i0End*i0Steps + 2]float64
}

var tables = sync.OnceValue(func() *tailTables {
	t := new(tailTables)
	for i := range t.at {
		x := float64(i)/tailSteps - tailEnd
		t.at[i].q, t.at[i].f = kernel.NormalUpper(x), kernel.NormalDensity(x)
	}
	for i := range t.i0e {
		x := float64(i) / i0Steps
		t.i0e[i] = kernel.Exp(kernel.LogI0(x) - x)
	}
	return t
})

// upper returns Q(x) = P(Z > x) and the density at x; 1 and 0 below -9, 0 and
// 0 above 9. x is not NaN.
func (t *tailTables) upper(x float64) (q, f float64) {
	y := float64(x*tailSteps) + tailEnd*tailSteps
	if !(y > 0) {
		return 1, 0
	}
	if y >= 2*tailEnd*tailSteps {
		return 0, 0
	}
	i := int(y)
	u := y - float64(i)
	a, b := &t.at[i], &t.at[i+1]
	const h = 1.0 / tailSteps
	xa := float64(i)*h - tailEnd
	// Cubic Hermite basis; slopes of Q are -f, those of f are -x·f.
	w := float64(u*u) * (3 - float64(2*u))
	ga := u * float64((1-u)*(1-u)) * h
	gb := float64(u*u) * (u - 1) * h
	q = a.q + float64(w*(b.q-a.q)) - float64(ga*a.f) - float64(gb*b.f)
	f = a.f + float64(w*(b.f-a.f)) - float64(ga*float64(xa*a.f)) - float64(gb*float64((xa+h)*b.f))
	return q, f
}

// upperQ is upper without the density.
func (t *tailTables) upperQ(x float64) float64 {
	y := float64(x*tailSteps) + tailEnd*tailSteps
	if !(y > 0) {
		return 1
	}
	if y >= 2*tailEnd*tailSteps {
		return 0
	}
	i := int(y)
	u := y - float64(i)
	a, b := &t.at[i], &t.at[i+1]
	const h = 1.0 / tailSteps
	w := float64(u*u) * (3 - float64(2*u))
	ga := u * float64((1-u)*(1-u)) * h
	gb := float64(u*u) * (u - 1) * h
	return a.q + float64(w*(b.q-a.q)) - float64(ga*a.f) - float64(gb*b.f)
}

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
	q, f := t.upper(y)
	m0, m1, m2 := moments(alpha, q, f, y)
	if alpha == 0 || y >= 0 && beta >= 1.6 {
		if m0 == 0 {
			return 0
		}
		return math.Min(t.weigh(alpha, m0, m1, m2)*(circleExcess/kernel.InvSqrt2Pi), 1)
	}
	q, f = t.upper(-alpha)
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
	mean := math.Max(m1/m0, 0) // of a tiny m0, the difference of two, rounding may be more
	variance := m2/m0 - float64(mean*mean)
	z := alpha * mean
	d := 1 + float64(float64(z*z)*(1.25+0.75*z/(z+6)))
	second := 0.75 * float64(alpha*alpha) * variance / d
	return t.bessel(z) * m0 * (1 + second)
}

// circleExcess keeps circleTail on the safe side.
const circleExcess = 1.003
