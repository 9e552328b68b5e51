package score

import (
	"fmt"

	"gonum.org/v1/gonum/stat/distuv"
)

// ANEESBounds returns the two-sided interval that holds the average normalised
// (by its covariance) estimation error squared of n independent errors of
// dimension dim with probability p, if the covariances are right:
//
//	N·ANEES ~ χ²(N·dim),  bounds = χ²quantile((1∓p)/2, N·dim) / N.
//
// The expected value is dim; divide everything by dim for a figure around 1.
// Errors that follow one another in time are not independent: n counts
// independent ones. It panics unless n and dim are positive and p is in
// (0, 1).
//
// Source: Bar-Shalom, Li & Kirubarajan, Estimation with Applications to
// Tracking and Navigation (2001), §5.4.
func ANEESBounds(n, dim int, p float64) (low, high float64) {
	if n < 1 || dim < 1 || !(p > 0 && p < 1) {
		panic(fmt.Sprintf("score: no bounds for %d errors of dimension %d at probability %v", n, dim, p))
	}
	chi := distuv.ChiSquared{K: float64(n) * float64(dim)}
	tail := (1 - p) / 2
	return chi.Quantile(tail) / float64(n), chi.Quantile(1-tail) / float64(n)
}

// ChiSquaredPoint returns the value that a χ² variable with df degrees of
// freedom exceeds with probability 1-p: the gate for a normalised innovation
// squared. It panics unless df is positive and p in (0, 1).
func ChiSquaredPoint(df int, p float64) float64 {
	if df < 1 || !(p > 0 && p < 1) {
		panic(fmt.Sprintf("score: no χ² point for %d degrees of freedom at probability %v", df, p))
	}
	return distuv.ChiSquared{K: float64(df)}.Quantile(p)
}
