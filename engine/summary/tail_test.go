package summary

import (
	"math"
	"testing"

	"leadline/engine/kernel"
)

// marcum is Q₁(alpha, beta) by Simpson's rule over the Rice density from beta
// to max(alpha, beta)+12, in steps of 1/200: its own error is below 1e-9 of the
// result (h⁴/180 of a fourth derivative of at most (12)⁴ of the integrand).
func marcum(alpha, beta float64) float64 {
	f := func(x float64) float64 {
		return x * math.Exp(-0.5*(x-alpha)*(x-alpha)+kernel.LogI0(alpha*x)-alpha*x)
	}
	end := math.Max(alpha, beta) + 12
	n := 2 * int(math.Ceil((end-beta)*200))
	h := (end - beta) / float64(n)
	s := f(beta) + f(end)
	for i := 1; i < n; i++ {
		s += f(beta+float64(i)*h) * float64(2+2*(i%2))
	}
	return s * h / 3
}

// TestCircleTail proves that the fast tail is never below the true one by
// more than rounding and above it by at most 2 %, from the centre to 1e-15.
func TestCircleTail(t *testing.T) {
	tb := tables()
	worst := [2]float64{1, 1}
	for _, alpha := range []float64{0, 0.05, 0.1, 0.3, 0.5, 0.8, 1, 1.3, 1.7, 2, 2.5, 3, 4, 5, 7, 10, 20, 50} {
		for y := -8.0; y < 8; y += 0.125 {
			beta := alpha + y
			if beta < 0 {
				continue
			}
			want := marcum(alpha, beta)
			if want < 1e-15 {
				continue
			}
			ratio := tb.circleTail(alpha, beta) / want
			worst[0], worst[1] = math.Min(worst[0], ratio), math.Max(worst[1], ratio)
			if ratio < 1-1e-8 || ratio > 1.02 {
				t.Errorf("Q1(%v, %v) = %.6g × the true %.6g", alpha, beta, ratio, want)
			}
		}
	}
	t.Logf("ratio to the true tail from %.6f to %.6f", worst[0], worst[1])
}

// TestTailTables proves the stated errors of the tables.
func TestTailTables(t *testing.T) {
	tb := tables()
	for x := 0.0; x < 200; x += 0.0137 {
		w := math.Exp(kernel.LogI0(x) - x)
		if got := tb.bessel(x); got < w*(1-1e-6) || got > w*(1+5e-5) {
			t.Errorf("bessel(%v) = %v, want %v", x, got, w)
		}
	}
}

// TestTinyCircle takes circles so small, far from the middle of the Gaussian, that
// what is in them is the rounding of a difference.
func TestTinyCircle(t *testing.T) {
	tab := tables()
	for alpha := 0.0; alpha < 8; alpha += 0.003 {
		for beta := 1e-6; beta < 0.2; beta *= 1.1 {
			if q := tab.circleTail(alpha, beta); !(q >= 0 && q <= 1) || q < 1-beta*beta {
				t.Fatalf("alpha %v, beta %v: %v", alpha, beta, q)
			}
		}
	}
}
