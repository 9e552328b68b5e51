package score

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// BinomialInterval returns the interval of Clopper and Pearson for a share of
// which k of n trials were seen: it holds the true one with probability p or
// more. k and n may be fractions, for trials that are worth less than one. It
// panics unless 0 ≤ k ≤ n, n > 0 and p is in (0, 1).
//
//	low = Beta quantile((1-p)/2; k, n-k+1), 0 for k = 0
//	high = Beta quantile((1+p)/2; k+1, n-k), 1 for k = n
//
// Source: Clopper & Pearson, Biometrika 26, 1934.
func BinomialInterval(k, n, p float64) (low, high float64) {
	if !(k >= 0 && k <= n && n > 0) || !(p > 0 && p < 1) {
		panic(fmt.Sprintf("score: no interval for %v of %v at probability %v", k, n, p))
	}
	tail := (1 - p) / 2
	low, high = 0, 1
	if k > 0 {
		low = distuv.Beta{Alpha: k, Beta: n - k + 1}.Quantile(tail)
	}
	if k < n {
		high = distuv.Beta{Alpha: k + 1, Beta: n - k}.Quantile(1 - tail)
	}
	return low, high
}

// ShareInterval is BinomialInterval of a share of errors that are worth so many
// independent ones; not ok if those are too few to say, fewer than two.
func ShareInterval(share, independent, p float64) (low, high float64, ok bool) {
	if independent < leastTrials {
		return 0, 1, false
	}
	low, high = BinomialInterval(math.Min(share*independent, independent), independent, p)
	return low, high, true
}

// mostLags bounds what IndependentOf costs.
const mostLags = 20_000

// IndependentOf returns how many independent values a series is worth for its
// mean: n over 1 + 2·Σ ρₖ, the sum ended before the first pair of neighbouring
// lags whose autocorrelations sum to less than 0. It is at least 1 and at most
// n; n for a constant series. A series over 20 000 is thinned first.
//
// Source: Geyer, "Practical Markov chain Monte Carlo", Statistical Science 7,
// 1992: the initial positive sequence.
func IndependentOf(x []float64) float64 {
	n := len(x)
	if n < 2 {
		return float64(n)
	}
	every := (n + mostLags - 1) / mostLags
	thin := make([]float64, 0, n/every+1)
	mean := 0.0
	for i := 0; i < n; i += every {
		thin = append(thin, x[i])
		mean += x[i]
	}
	m := len(thin)
	mean /= float64(m)
	variance := 0.0
	for i := range thin {
		thin[i] -= mean
		variance += thin[i] * thin[i]
	}
	if variance == 0 {
		return float64(n)
	}
	rho := func(lag int) float64 {
		s := 0.0
		for i := lag; i < m; i++ {
			s += thin[i] * thin[i-lag]
		}
		return s / variance
	}
	tau := -1.0 // 1 + 2·Σ over k ≥ 1 is -1 + 2·Σ over k ≥ 0
	for k := 0; k+1 < m; k += 2 {
		pair := rho(k) + rho(k+1)
		if pair <= 0 {
			break
		}
		tau += 2 * pair
	}
	return math.Max(1, math.Min(float64(m)/math.Max(tau, 1e-9), float64(n)))
}
