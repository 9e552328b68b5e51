package filter_test

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"leadline/engine/filter"
)

// growthHalfM is where x = 0 lies on the line. |x'| ≤ |x|/2 + 12.5 + 8 + w, so
// 41 bounds the noiseless state and 100 leaves more than ten sigmas of w.
const growthHalfM = 100

// growthMotion is the growth model at step k as an affine map of the position in
// the cell, m: x' = f m + add, with x' - x = add + (f - 1) m.
type growthMotion struct{ k float64 }

func (growthMotion) Wants() filter.Wants { return filter.WantPosition }

func (m growthMotion) Local(add, f []float64, at *filter.Columns, mean, _ []float64) {
	for i, n := range at.North {
		x := n - growthHalfM
		d := 1 + x*x
		add[i] = 25*x/d - x/2 + 8*math.Cos(1.2*m.k)
		f[i] = 0.5 + 25*(1-x*x)/(d*d)
		add[i] -= (f[i] - 1) * mean[i]
	}
}

// growthSight is y = x²/20 + v, v ~ N(0, 1).
type growthSight struct{ y float64 }

func (growthSight) Wants() filter.Wants { return filter.WantPosition }
func (growthSight) Rows() int           { return 1 }
func (growthSight) Noise() filter.Noise { return filter.Gaussian(1) }

func (s growthSight) Linearize(t *filter.Terms, at *filter.Columns, _ []filter.Quantity, _ []float64) {
	for i, n := range at.North {
		x := n - growthHalfM
		t.Residual[i] = s.y - x*x/20
		t.Row[i] = x / 10
	}
}

// growthRuns returns, a run each, the mean squared error and the mean
// normalised squared error of 50 steps.
func growthRuns(t *testing.T, seed uint64, runs int, cellM float64) (mse, nees []float64) {
	t.Helper()
	g := line(2*growthHalfM, cellM)
	for run := range runs {
		rng := rand.New(rand.NewPCG(seed, uint64(run)))
		x := math.Sqrt(5) * rng.NormFloat64()
		b, err := filter.Seed(g, onLine{growthHalfM, math.Sqrt(5)}, along, 1<<20)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		step := filter.NewStep(1)
		step.Q[0] = 10
		e2, n2 := 0.0, 0.0
		for k := range 50 {
			x = x/2 + 25*x/(1+x*x) + 8*math.Cos(1.2*float64(k+1)) + math.Sqrt(10)*rng.NormFloat64()
			y := x*x/20 + rng.NormFloat64()
			step.Local = growthMotion{float64(k + 1)}
			filter.Predict(b, g, step, &w)
			if _, err := filter.Update(b, g, growthSight{y}, &w); err != nil {
				t.Fatalf("seed %d, run %d, step %d: %v", seed, run, k, err)
			}
			_, m, v := b.Moments(g, &w)
			e := x - (m.N - growthHalfM)
			e2 += e * e / 50
			n2 += e * e / v[2] / 50
		}
		mse, nees = append(mse, e2), append(nees, n2)
	}
	return mse, nees
}

// meanAndError returns the mean of independent values and its standard error.
func meanAndError(xs []float64) (mean, standardError float64) {
	n := float64(len(xs))
	for _, x := range xs {
		mean += x / n
	}
	for _, x := range xs {
		standardError += (x - mean) * (x - mean) / (n - 1)
	}
	return mean, math.Sqrt(standardError / n)
}

// TestGrowthModel runs the univariate growth model
//
//	x' = x/2 + 25x/(1+x²) + 8 cos 1.2k + w, Q = 10;  y = x²/20 + v, R = 1,
//	x0 ~ N(0, 5), 50 steps
//
// of Arulampalam et al., IEEE Trans. Signal Processing 50(2), 2002, through a
// belief on a line with position-dependent motion. A dense grid, computed
// independently, gives a pooled RMSE of 4.63 ± 0.05 and an ANEES of 1 ± 0.05
// (from memory, the paper: particle filter 5.54, extended Kalman 23.19).
//
// The long form, 8000 runs (set LEADLINE_LONG), is held to those; the quick one
// to four of its own standard errors around them (a false alarm in 16000
// seeds). Measured over 2000 runs: with cells of 0.5 m RMSE 4.633 ± 0.022 and
// ANEES 0.984 ± 0.016, with cells of 1 m 4.642 and 0.957.
func TestGrowthModel(t *testing.T) {
	const seed = 2002
	runs, long := 40, os.Getenv("LEADLINE_LONG") != ""
	if long {
		runs = 8000
	}
	mse, nees := growthRuns(t, seed, runs, 0.5)
	m, mErr := meanAndError(mse)
	n, nErr := meanAndError(nees)
	rmse := math.Sqrt(m)
	rmseErr := mErr / (2 * rmse)
	t.Logf("seed %d, %d runs: RMSE %.3f ± %.3f, ANEES %.3f ± %.3f", seed, runs, rmse, rmseErr, n, nErr)
	tolR, tolN := 0.05+4*rmseErr, 0.05+4*nErr
	if long {
		tolR, tolN = 0.05, 0.05
	}
	if math.Abs(rmse-4.63) > tolR {
		t.Errorf("seed %d, %d runs: RMSE %.3f, want 4.63 ± %.3f", seed, runs, rmse, tolR)
	}
	if math.Abs(n-1) > tolN {
		t.Errorf("seed %d, %d runs: ANEES %.3f, want 1 ± %.3f", seed, runs, n, tolN)
	}
}
