package score

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// BootstrapInterval returns the percentile interval that holds a statistic of
// n independent items with probability about p: of `resamples` draws of n
// items with replacement, the (1∓p)/2 quantiles of the statistic. statistic is
// given the drawn items' numbers (0 … n-1, a slice it must not keep), so that
// whole drives, not single errors, are drawn and ratios of pooled sums can be
// formed.
//
// rng is the source of the draws, never nil: the same state gives the same
// interval. It panics unless n ≥ 1, resamples ≥ 1 and p is in (0, 1). With one
// item the interval is a point: it says nothing about the spread.
//
// Source: Efron & Tibshirani, An Introduction to the Bootstrap (1993), §13.3.
func BootstrapInterval(rng *rand.Rand, n, resamples int, p float64, statistic func(items []int) float64) (low, high float64) {
	if rng == nil || n < 1 || resamples < 1 || !(p > 0 && p < 1) {
		panic(fmt.Sprintf("score: no bootstrap of %d items in %d draws at probability %v", n, resamples, p))
	}
	items := make([]int, n)
	values := make([]float64, resamples)
	for r := range values {
		for i := range items {
			items[i] = rng.IntN(n)
		}
		values[r] = statistic(items)
	}
	slices.Sort(values)
	tail := (1 - p) / 2
	return sortedQuantile(values, tail), sortedQuantile(values, 1-tail)
}

// leastBootstrap is from how many items on MeanInterval draws. What is drawn has no
// mean beyond the least and the greatest item, and those have the true centre
// between them with probability 1 - 2/2ⁿ alone, 0.75 of three and 0.94 of five, so
// that no percentiles hold 95 % below six; two more leave the quantiles inside.
const leastBootstrap = 8

// How MeanInterval comes by its interval.
const (
	ByStudent   = "student"
	ByBootstrap = "bootstrap"
)

// MeanInterval returns the interval that holds the true mean of independent values
// with probability about p, and how it came by it. Of fewer than 8 values it is
// Student's, mean ± t·s/√n, exact for normal ones. From there on it is that of
// BootstrapInterval at the quantiles Φ(∓√(n/(n-1))·t), t being Student's for n-1
// degrees of freedom: the plain ones are short by √((n-1)/n) and take the normal's
// point for t, so that of 8 values they hold 0.89 where these hold 0.94
// (TestMeanInterval), of normal ones.
//
// It panics unless there are two values or more, and as BootstrapInterval does.
//
// Source: Hesterberg, "What Teachers Should Know About the Bootstrap", The American
// Statistician 69, 2015: expanded percentiles (from memory).
func MeanInterval(rng *rand.Rand, values []float64, resamples int, p float64) (low, high float64, how string) {
	n := len(values)
	if n < 2 || !(p > 0 && p < 1) {
		panic(fmt.Sprintf("score: no interval of the mean of %d values at probability %v", n, p))
	}
	t := distuv.StudentsT{Sigma: 1, Nu: float64(n - 1)}.Quantile((1 + p) / 2)
	if n < leastBootstrap {
		mean, sd := stat.MeanStdDev(values, nil)
		half := t * sd / math.Sqrt(float64(n))
		return mean - half, mean + half, ByStudent
	}
	expanded := 2*distuv.UnitNormal.CDF(math.Sqrt(float64(n)/float64(n-1))*t) - 1
	low, high = BootstrapInterval(rng, n, resamples, expanded, func(items []int) float64 {
		sum := 0.0
		for _, i := range items {
			sum += values[i]
		}
		return sum / float64(n)
	})
	return low, high, ByBootstrap
}

// sortedQuantile interpolates linearly between order statistics, the first at
// 0 and the last at 1.
func sortedQuantile(sorted []float64, q float64) float64 {
	at := q * float64(len(sorted)-1)
	i := min(int(at), len(sorted)-1)
	j := min(i+1, len(sorted)-1)
	return sorted[i] + (at-float64(i))*(sorted[j]-sorted[i])
}
