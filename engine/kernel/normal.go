package kernel

import "math"

// InvSqrt2Pi is 1/sqrt(2π), the standard normal density at zero.
const InvSqrt2Pi = 0.398942280401432677939946059934

// LogSqrt2Pi is ln sqrt(2π).
const LogSqrt2Pi = 0.918938533204672741780329736406

// NormalDensity returns exp(-x²/2)/sqrt(2π).
func NormalDensity(x float64) float64 { return InvSqrt2Pi * Exp(-0.5*float64(x*x)) }

// NormalUpper returns Q(x) = P(Z > x) for a standard normal Z, relative error
// below 5e-13 for x up to 37: below 3 from the subtraction (4·2^-53/Q(3) =
// 3e-13), above from the rounding of x² (x²·2^-53 = 2e-13). It underflows to 0
// beyond 38.6.
//
// Source: for |x| < 3 the series of Abramowitz & Stegun 26.2.11 (all terms of
// one sign), beyond it the continued fraction 26.2.14, evaluated backwards
// from a depth at which one more changes nothing (48 at 3, 11 at 10).
func NormalUpper(x float64) float64 {
	switch {
	case x != x:
		return x
	case x < 0:
		return 1 - NormalUpper(-x)
	case x > normalEnd:
		return 0
	case x < seriesEnd:
		return 0.5 - float64(NormalDensity(x)*normalSum(x))
	}
	return NormalDensity(x) / millsInverse(x)
}

const (
	normalEnd = 38.6
	seriesEnd = 3
	// seriesLeast is the term, relative to the sum, from which on none changes it.
	seriesLeast = 1e-18
)

// normalSum is (1/2 - Q(x))/density(x) for 0 ≤ x < seriesEnd.
func normalSum(x float64) float64 {
	term, sum, z := x, x, x*x
	for n := 3.0; term > seriesLeast*sum; n += 2 {
		term = float64(term*z) / n
		sum += term
	}
	return sum
}

// millsInverse is density(x)/Q(x) from seriesEnd on.
func millsInverse(x float64) float64 {
	f := x
	for n := fractionDepth(x); n >= 1; n-- {
		f = x + n/f
	}
	return f
}

func fractionDepth(x float64) float64 { return math.Ceil(11 + 350/float64(x*x)) }

// NormalQuantile returns x with P(Z > x) = q for q in (0, 1): ±Inf at the
// ends, NaN outside. Newton's method on NormalUpper from the bound
// sqrt(-2 ln 2q); relative error below 1e-12.
func NormalQuantile(q float64) float64 {
	switch {
	case q != q || q < 0 || q > 1:
		return math.NaN()
	case q == 0:
		return math.Inf(1)
	case q == 1:
		return math.Inf(-1)
	case q > 0.5:
		return -NormalQuantile(1 - q)
	case q == 0.5:
		return 0
	}
	x := math.Sqrt(-2 * Log(2*q)) // an upper bound: Q(x) ≤ exp(-x²/2)/2
	for range 60 {
		// Newton on ln Q, which is concave: it converges from either side.
		u := NormalUpper(x)
		step := u * (Log(u) - Log(q)) / NormalDensity(x)
		x += step
		if math.Abs(step) < 1e-14*(1+x) {
			break
		}
	}
	return x
}

// LogI0 returns ln I₀(x), the modified Bessel function of order zero, x ≥ 0:
// the normaliser of the von Mises distribution. Relative error below 1e-12.
//
// Source: Abramowitz & Stegun 9.6.12 (power series) below 30 and the
// asymptotic expansion 9.7.1 above.
func LogI0(x float64) float64 {
	x = math.Abs(x)
	if x < 30 {
		q := 0.25 * x * x
		term, sum := 1.0, 1.0
		for n := 1.0; term > 1e-18*sum; n++ {
			term *= q / float64(n*n)
			sum += term
		}
		return Log(sum)
	}
	term, sum := 1.0, 1.0
	for n := 1.0; n < 25; n++ {
		next := term * float64((2*n-1)*(2*n-1)) / (8 * n * x)
		if next >= term {
			break
		}
		term = next
		sum += term
	}
	return x - 0.5*Log(2*math.Pi*x) + Log(sum)
}
