package monitor

import (
	"math"
	"sync"

	"leadline/engine/kernel"
)

// runLength returns the mean number of scores, standard normal and independent,
// until a chart that starts at 0 reaches a threshold: by a Markov chain of n
// states, the sum being rounded to the middle of its interval (Brook & Evans, "An
// approach to the probability distribution of cusum run length", Biometrika 59,
// 1972). State 0 is no sum, the others are 2h/(2n-1) wide; with R the
// probabilities from state to state, the mean lengths are (I - R)⁻¹ 1. below is
// the distribution function of what a score adds.
func runLength(below func(float64) float64, h float64, n int) float64 {
	w := 2 * h / float64(2*n-1)
	// What a score adds, in intervals: step[d+n] is the probability of d.
	step, upTo := make([]float64, 2*n), make([]float64, n)
	for d := -n + 1; d < n; d++ {
		step[d+n] = below(float64(w*float64(d))+0.5*w) - below(float64(w*float64(d))-0.5*w)
	}
	for i := range n {
		upTo[i] = below(0.5*w - float64(w*float64(i)))
	}
	a := make([]float64, n*(n+1))
	for i := range n {
		row := a[i*(n+1) : (i+1)*(n+1)]
		for j := range n {
			row[j] = -step[j-i+n]
		}
		row[0] = -upTo[i]
		row[i]++
		row[n] = 1
	}
	// Gauss without pivoting: I - R has falling row sums and is an M-matrix,
	// whose elimination is stable.
	for p := range n {
		pivot := a[p*(n+1) : (p+1)*(n+1)]
		for i := p + 1; i < n; i++ {
			row := a[i*(n+1) : (i+1)*(n+1)]
			f := row[p] / pivot[p]
			if f == 0 {
				continue
			}
			for j := p; j <= n; j++ {
				row[j] -= float64(f * pivot[j])
			}
		}
	}
	lengths := make([]float64, n)
	for i := n - 1; i >= 0; i-- {
		row := a[i*(n+1) : (i+1)*(n+1)]
		sum := row[n]
		for j := i + 1; j < n; j++ {
			sum -= float64(row[j] * lengths[j])
		}
		lengths[i] = sum / row[i]
	}
	return lengths[0]
}

// The logs of run lengths, nearly straight in the threshold, are computed for
// thresholds of statesApart, 2·statesApart, … states and taken as straight
// between them. The states are ln 2/4 wide, so that the score of 0, where the
// distribution of spread has its pole, adds exactly four of them: the lengths are
// then within 4 % (runlength_test.go), 0.04 nats of the threshold.
const (
	statesApart = 6
	tableSize   = 28
)

var stateWidth = logSpreadRatio / 4

// tabled is the threshold of entry j of the table, in nats: 0.95 to 29.
func tabled(j int) float64 { return float64(stateWidth * (float64(statesApart*(j+1)) - 0.5)) }

// tables are for spread, and for a shift to either side.
var tables = sync.OnceValue(func() (t [2][tableSize]float64) {
	for i, what := range [...]statistic{spread, high} {
		for j := range tableSize {
			t[i][j] = kernel.Log(runLength(what.below, tabled(j), statesApart*(j+1)))
		}
	}
	return t
})

// threshold is where a chart has the run length asked for, in nats; within the
// table.
func threshold(what statistic, length float64) float64 {
	table := tables()[min(int(what), 1)]
	want := kernel.Log(length)
	j := 1
	for j < tableSize-1 && table[j] < want {
		j++
	}
	from, to := tabled(j-1), tabled(j)
	h := from + float64((to-from)*(want-table[j-1]))/(table[j]-table[j-1])
	return math.Max(tabled(0), math.Min(tabled(tableSize-1), h))
}
