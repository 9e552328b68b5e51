package kernel

import (
	"math"
	"math/rand/v2"
	"testing"
)

// near fails unless got is within tol·max(scale, |want|) of want; both NaN or
// equal infinities agree.
func near(t *testing.T, what string, x, got, want, tol, scale float64) {
	t.Helper()
	if got == want || math.IsNaN(got) && math.IsNaN(want) {
		return
	}
	if !(math.Abs(got-want) <= tol*math.Max(scale, math.Abs(want))) {
		t.Errorf("%s(%v) = %v, want %v", what, x, got, want)
	}
}

// TestAgainstMath proves the stated accuracy against the standard library,
// whose own error is below 1 ulp.
func TestAgainstMath(t *testing.T) {
	const seed = 1
	rng := rand.New(rand.NewPCG(seed, 2))
	const ulp = 0x1p-52
	xs := []float64{0, 1, -1, 0.5, math.Inf(1), math.Inf(-1), math.NaN(), 1e-300, -1e-300, 709.7, -708, 40, -40, math.Pi, math.Pi / 4, 1e5}
	for range 20000 {
		xs = append(xs, 40*(rng.Float64()-0.5), rng.NormFloat64(), 1400*(rng.Float64()-0.5))
	}
	for _, x := range xs {
		if x > -708 || math.IsNaN(x) || math.IsInf(x, 0) {
			near(t, "Exp", x, Exp(x), math.Exp(x), 2*ulp, 0)
		}
		a := math.Abs(x)
		near(t, "Log", a, Log(a), math.Log(a), 2*ulp, 0)
		s, c := Sincos(x)
		near(t, "Sin", x, s, math.Sin(x), 2*ulp, 1)
		near(t, "Cos", x, c, math.Cos(x), 2*ulp, 1)
		near(t, "Atan", x, Atan(x), math.Atan(x), 3*ulp, 0)
		near(t, "Asinh", x, Asinh(x), math.Asinh(x), 6*ulp, 0)
		near(t, "Log1p", a, Log1p(a), math.Log1p(a), 4*ulp, 0)
		if a < 1 {
			near(t, "Atanh", x, Atanh(x), math.Atanh(x), 6*ulp, 0)
		}
		y := rng.NormFloat64()
		near(t, "Atan2", x, Atan2(x, y), math.Atan2(x, y), 4*ulp, 1)
		if a < 37 {
			near(t, "NormalUpper", x, NormalUpper(x), 0.5*math.Erfc(x/math.Sqrt2), 5e-13, 0)
		}
	}
	near(t, "Exp denormal", -740, Exp(-740), math.Exp(-740), 0, 0x1p-1073)
	for _, q := range []float64{1e-300, 5e-9, 1e-3, 0.025, 0.4, 0.5, 0.9, 1 - 1e-9} {
		near(t, "NormalQuantile", q, NormalUpper(NormalQuantile(q)), q, 1e-12, 0)
	}
	// ln I0 at 1, 10, 50 and 1000: Abramowitz & Stegun table 9.8 gives
	// e^-x I0(x) = 0.4657596 at 1 and 0.1278333 at 10 (read from memory);
	// the large arguments from I0 ~ e^x/sqrt(2πx)·(1+1/8x+9/128x²+225/3072x³).
	near(t, "LogI0", 1, LogI0(1), 1+math.Log(0.4657596), 1e-7, 0)
	near(t, "LogI0", 10, LogI0(10), 10+math.Log(0.1278333), 1e-7, 0)
	for _, x := range []float64{29.999, 30.001, 1000} {
		near(t, "LogI0", x, LogI0(x), x-0.5*math.Log(2*math.Pi*x)+math.Log(1+1/(8*x)+9/(128*x*x)+225/(3072*x*x*x)), 1e-6, 0)
	}
}
