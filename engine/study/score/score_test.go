package score

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// Bounds at 95 %: 20 errors of dimension 3 read in Bar-Shalom, Li &
// Kirubarajan, Estimation with Applications to Tracking and Navigation, the
// others worked out from N·ANEES ~ χ²(N·n). Printed digits.
func TestANEESBounds(t *testing.T) {
	for _, c := range []struct {
		n, dim    int
		low, high float64
	}{{50, 2, 1.484, 2.591}, {100, 2, 1.627, 2.411}, {20, 3, 2.024, 4.165}} {
		low, high := ANEESBounds(c.n, c.dim, 0.95)
		if math.Abs(low-c.low) > 5.1e-4 || math.Abs(high-c.high) > 5.1e-4 {
			t.Errorf("N=%d, n=%d: [%.4f, %.4f], want [%.3f, %.3f]", c.n, c.dim, low, high, c.low, c.high)
		}
	}
}

// χ² 95 % points as in the usual tables, printed to three digits.
func TestChiSquaredPoint(t *testing.T) {
	for df, want := range map[int]float64{1: 3.841, 2: 5.991, 19: 30.144} {
		if got := ChiSquaredPoint(df, 0.95); math.Abs(got-want) > 5.1e-4 {
			t.Errorf("%d degrees of freedom: %.4f, want %.3f", df, got, want)
		}
	}
}

// For a linear h the recursion is the information filter: compared with the
// covariance form of the Kalman filter, which inverts nothing but a scalar.
func TestCramerRaoIsKalmanForLinearH(t *testing.T) {
	const seed = 4
	rng := rand.New(rand.NewPCG(seed, 0))
	p := mat.NewSymDense(2, []float64{25, 3, 3, 16})
	j, err := invert(p)
	if err != nil {
		t.Fatal(err)
	}
	for step := range 50 {
		a, b, c := rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64()
		q := mat.NewSymDense(2, []float64{a * a, a * b, a * b, b*b + c*c})
		h := mat.NewDense(1, 2, []float64{rng.NormFloat64(), rng.NormFloat64()})
		r := 0.5 + rng.Float64()
		if j, err = CramerRaoStep(j, q, MeasurementInformation(h, r)); err != nil {
			t.Fatal(err)
		}
		p.AddSym(p, q)
		var ph mat.VecDense
		ph.MulVec(p, h.RowView(0))
		p.SymRankOne(p, -1/(mat.Dot(h.RowView(0), &ph)+r), &ph)
		got, err := invert(j)
		if err != nil {
			t.Fatal(err)
		}
		// Condition numbers below 1e4 in every inversion: 1e-12 each, and the
		// recursion forgets.
		if !mat.EqualApprox(got, p, 1e-10) {
			t.Fatalf("seed %d, step %d: covariance %v, Kalman %v", seed, step, mat.Formatted(got), mat.Formatted(p))
		}
	}
}

func TestCramerRaoMeansOverGradients(t *testing.T) {
	// E[∇h ∇hᵀ] of (1, 0) and (0, 2) over R = 4.
	got := MeasurementInformation(mat.NewDense(2, 2, []float64{1, 0, 0, 2}), 4)
	if !mat.EqualApprox(got, mat.NewSymDense(2, []float64{0.125, 0, 0, 0.5}), 1e-15) {
		t.Errorf("%v", mat.Formatted(got))
	}
	zero := mat.NewSymDense(2, nil)
	if _, err := CramerRaoStep(zero, zero, nil); !errors.Is(err, ErrInformation) {
		t.Errorf("without information: %v, want ErrInformation", err)
	}
	// Scalar: information 1/4, noise 5 → 1/9.
	j, err := CramerRaoStep(mat.NewSymDense(1, []float64{0.25}), mat.NewSymDense(1, []float64{5}), nil)
	if err != nil || math.Abs(j.At(0, 0)-1.0/9) > 1e-15 {
		t.Errorf("%v, %v; want 1/9", j, err)
	}
}

// The interval of a mean: its half width is 1.96 standard errors, its coverage
// over many samples the probability asked for.
func TestBootstrapInterval(t *testing.T) {
	const seed, samples, n = 9, 400, 60
	rng := rand.New(rand.NewPCG(seed, 0))
	hits, width := 0, 0.0
	x := make([]float64, n)
	mean := func(items []int) float64 {
		s := 0.0
		for _, i := range items {
			s += x[i]
		}
		return s / float64(len(items))
	}
	for range samples {
		for i := range x {
			x[i] = 5 + 2*rng.NormFloat64()
		}
		low, high := BootstrapInterval(rng, n, 300, 0.95, mean)
		width += (high - low) / samples
		if low <= 5 && 5 <= high {
			hits++
		}
	}
	// Coverage 0.95 less the percentile bootstrap's own shortfall of about
	// 1/n + 1/300; four standard errors of a proportion of 400.
	got, tol := float64(hits)/samples, 4*math.Sqrt(0.95*0.05/samples)+0.02
	if math.Abs(got-0.95) > tol {
		t.Errorf("seed %d: the interval holds the mean in %.3f of samples, want 0.95 ± %.3f", seed, got, tol)
	}
	if want := 2 * 1.96 * 2 / math.Sqrt(n); math.Abs(width/want-1) > 0.05 {
		t.Errorf("seed %d: mean width %.4f, want %.4f ± 5 %%", seed, width, want)
	}
}

func TestBootstrapRepeats(t *testing.T) {
	draw := func() [2]float64 {
		l, h := BootstrapInterval(rand.New(rand.NewPCG(1, 2)), 10, 50, 0.9, func(items []int) float64 { return float64(items[0] + items[9]) })
		return [2]float64{l, h}
	}
	if a, b := draw(), draw(); a != b {
		t.Errorf("the same source gave %v and %v", a, b)
	}
}

func TestMisusePanics(t *testing.T) {
	for name, f := range map[string]func(){
		"no errors":       func() { ANEESBounds(0, 2, 0.95) },
		"probability 1":   func() { ANEESBounds(5, 2, 1) },
		"probability NaN": func() { ChiSquaredPoint(2, math.NaN()) },
		"no source":       func() { BootstrapInterval(nil, 1, 1, 0.5, nil) },
		"sizes":           func() { _, _ = CramerRaoStep(mat.NewSymDense(2, nil), mat.NewSymDense(1, nil), nil) },
	} {
		func() {
			defer func() {
				if recover() == nil {
					t.Errorf("%s: no panic", name)
				}
			}()
			f()
		}()
	}
}
