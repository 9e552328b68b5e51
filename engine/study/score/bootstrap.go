package score

import (
	"fmt"
	"math/rand/v2"
	"slices"
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

// sortedQuantile interpolates linearly between order statistics, the first at
// 0 and the last at 1.
func sortedQuantile(sorted []float64, q float64) float64 {
	at := q * float64(len(sorted)-1)
	i := min(int(at), len(sorted)-1)
	j := min(i+1, len(sorted)-1)
	return sorted[i] + (at-float64(i))*(sorted[j]-sorted[i])
}
