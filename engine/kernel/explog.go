package kernel

import "math"

// ln 2 in two parts: the first has its low 32 bits zero, so that k·ln2Hi is
// exact for |k| < 2^20.
const (
	ln2Hi = 6.93147180369123816490e-01
	ln2Lo = 1.90821492927058770002e-10
)

// Exp returns e**x to 2 ulp. Exp(-Inf) = 0, Exp(+Inf) = +Inf, Exp(NaN) = NaN;
// below about -745.13 it returns 0, above 709.78 +Inf.
//
// Source: argument reduction by multiples of ln 2 and the Taylor series
// (Muller, Elementary Functions, ch. 11; the coefficients are 1/n!).
func Exp(x float64) float64 {
	switch {
	case x != x || x > 709.782712893384:
		if x != x {
			return x
		}
		return math.Inf(1)
	case x < -745.2:
		return 0
	}
	k := math.Floor(float64(x*(1/math.Ln2)) + 0.5)
	r := (x - float64(k*ln2Hi)) - float64(k*ln2Lo)
	// 1/n! for n = 13 … 2. On |r| ≤ ln2/2 the first term left out is
	// r^14/14! < 5e-18 of the result.
	p := float64(1.0/6227020800*r) + 1.0/479001600
	p = float64(p*r) + 1.0/39916800
	p = float64(p*r) + 1.0/3628800
	p = float64(p*r) + 1.0/362880
	p = float64(p*r) + 1.0/40320
	p = float64(p*r) + 1.0/5040
	p = float64(p*r) + 1.0/720
	p = float64(p*r) + 1.0/120
	p = float64(p*r) + 1.0/24
	p = float64(p*r) + 1.0/6
	p = float64(p*r) + 1.0/2
	y := 1 + (r + float64(r*float64(r*p)))
	return scale(y, int(k))
}

// scale returns y·2^k for y in [0.5, 2.5) and any k that Exp can reach,
// rounding once also when the result is denormal.
func scale(y float64, k int) float64 {
	if k > 1022 {
		return y * math.Float64frombits(uint64(1022+1023)<<52) * math.Float64frombits(uint64(k-1022+1023)<<52)
	}
	if k < -1021 {
		return y * math.Float64frombits(uint64(-1021+1023)<<52) * math.Float64frombits(uint64(max(k+1021, -1022)+1023)<<52)
	}
	return y * math.Float64frombits(uint64(k+1023)<<52)
}

// Log returns the natural logarithm of x to 2 ulp. Log(0) = -Inf,
// Log(+Inf) = +Inf, and NaN for x < 0 or NaN.
//
// Source: log m = 2 artanh((m-1)/(m+1)) with m in [sqrt(1/2), sqrt 2), by its
// series; the first term left out is below 2^-60 of the result.
func Log(x float64) float64 {
	switch {
	case x != x || x < 0:
		return math.NaN()
	case x == 0:
		return math.Inf(-1)
	case x > math.MaxFloat64:
		return x
	}
	m, e := frexp(x)
	if m < math.Sqrt2/2 {
		m *= 2
		e--
	}
	f := m - 1
	s := f / (2 + f)
	z := s * s
	p := float64(1.0/23*z) + 1.0/21
	p = float64(p*z) + 1.0/19
	p = float64(p*z) + 1.0/17
	p = float64(p*z) + 1.0/15
	p = float64(p*z) + 1.0/13
	p = float64(p*z) + 1.0/11
	p = float64(p*z) + 1.0/9
	p = float64(p*z) + 1.0/7
	p = float64(p*z) + 1.0/5
	p = float64(p*z) + 1.0/3
	// log m = f - s·(f - 2·z·p): keeps the leading term exact (f is exact).
	k := float64(e)
	tail := float64(s * (f - float64(2*float64(z*p))))
	return float64(k*ln2Hi) - ((tail - float64(k*ln2Lo)) - f)
}

// frexp is math.Frexp of a finite x > 0, in line where x is no denormal.
func frexp(x float64) (m float64, e int) {
	b := math.Float64bits(x)
	if b < 1<<52 {
		return math.Frexp(x)
	}
	return math.Float64frombits(b&(1<<52-1) | 1022<<52), int(b>>52) - 1022
}

// Log1p returns log(1+x), accurate also for small x; NaN below -1.
// Source: Kahan's correction, log(u)·x/(u-1) with u = 1+x rounded.
func Log1p(x float64) float64 {
	u := 1 + x
	if u == 1 || x > math.MaxFloat64 {
		return x
	}
	return float64(Log(u)*x) / (u - 1)
}

// Sinh returns the hyperbolic sine, with an absolute error of a few 1e-16
// near zero (not a relative one).
func Sinh(x float64) float64 { e := Exp(x); return 0.5 * (e - 1/e) }

// Cosh returns the hyperbolic cosine.
func Cosh(x float64) float64 { e := Exp(x); return 0.5 * (e + 1/e) }

// Asinh returns the inverse hyperbolic sine, odd, to a few ulp.
func Asinh(x float64) float64 {
	a := math.Abs(x)
	if !(a < 1e150) {
		return math.Copysign(Log(a)+math.Ln2, x)
	}
	return math.Copysign(Log1p(a+float64(a*a)/(1+math.Sqrt(float64(a*a)+1))), x)
}

// Atanh returns the inverse hyperbolic tangent for |x| < 1, to a few ulp.
func Atanh(x float64) float64 {
	a := math.Abs(x)
	return math.Copysign(0.5*Log1p(float64(2*a)/(1-a)), x)
}
