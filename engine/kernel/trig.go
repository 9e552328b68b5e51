package kernel

import "math"

// π/2 in three parts; the first two have 33 significant bits, so that their
// products with |n| < 2^20 are exact.
const (
	halfPi1 = 1.57079632673412561417e+00
	halfPi2 = 6.07710050630396597660e-11
	halfPi3 = 2.02226624879595063154e-21
	// trigMax bounds the exact argument reduction: |n| < 2^20.
	trigMax = 1.6e6
)

// Sincos returns sine and cosine of x in radians to 2 ulp of 1. Arguments
// beyond ±1.6e6 rad are first reduced modulo 2π as rounded to float64, which
// loses |x|·4e-17 rad. Infinite and NaN arguments give NaN.
//
// Source: Cody and Waite's argument reduction and the Taylor series on
// |r| ≤ π/4 (first terms left out: r^19/19!, r^18/18! < 3e-18).
func Sincos(x float64) (sin, cos float64) {
	if math.IsInf(x, 0) || x != x {
		return math.NaN(), math.NaN()
	}
	if math.Abs(x) > trigMax {
		x = math.Mod(x, 2*math.Pi)
	}
	n := math.Floor(float64(x*(2/math.Pi)) + 0.5)
	r := ((x - float64(n*halfPi1)) - float64(n*halfPi2)) - float64(n*halfPi3)
	z := r * r
	s, c := 0.0, 0.0
	for k := 17; k >= 3; k -= 2 {
		s = float64((1-s)*z) / float64(k*(k-1))
	}
	s = r - float64(r*s)
	for k := 18; k >= 2; k -= 2 {
		c = float64((1-c)*z) / float64(k*(k-1))
	}
	c = 1 - c
	switch int64(n) & 3 {
	case 0:
		return s, c
	case 1:
		return c, -s
	case 2:
		return -s, -c
	default:
		return -c, s
	}
}

// Sin returns the sine of x radians; see Sincos.
func Sin(x float64) float64 { s, _ := Sincos(x); return s }

// Cos returns the cosine of x radians; see Sincos.
func Cos(x float64) float64 { _, c := Sincos(x); return c }

// Atan returns the arctangent in radians to 3 ulp; Atan(±Inf) = ±π/2.
//
// Source: two halvings atan x = 2 atan(x/(1+sqrt(1+x²))) and the series,
// whose first term left out is below 3e-18 of the result.
func Atan(x float64) float64 {
	if x != x {
		return x
	}
	a := math.Abs(x)
	inverse := a > 1
	if inverse {
		a = 1 / a
	}
	t := a / (1 + math.Sqrt(1+float64(a*a)))
	t /= 1 + math.Sqrt(1+float64(t*t))
	z := float64(t * t)
	p := 0.0
	for n := 23; n >= 3; n -= 2 {
		p = float64((1/float64(n)-p)*z) + 0
	}
	r := 4 * (t - float64(t*p))
	if inverse {
		r = math.Pi/2 - r
	}
	return math.Copysign(r, x)
}

// Atan2 returns the angle of (x, y) in radians in [-π, π]; both zero gives 0
// (signed zeros are not told apart).
func Atan2(y, x float64) float64 {
	switch {
	case x != x || y != y:
		return math.NaN()
	case x == 0 && y == 0:
		return 0
	case math.Abs(y) > math.Abs(x):
		return math.Copysign(math.Pi/2, y) - Atan(x/y)
	case x > 0:
		return Atan(y / x)
	default:
		return math.Copysign(math.Pi, y) + Atan(y/x)
	}
}
