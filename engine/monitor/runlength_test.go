package monitor

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/kernel"
)

// TestRunLengthsOfTheLiterature: the mean run lengths of a one-sided chart of
// normal scores with reference value 0.5 and thresholds 4 and 5, from 0, for
// shifts of the mean. Lucas & Crosier, Technometrics 24, 1982, table 1 gives two-sided
// charts (from memory; without shift they are half as long as one-sided ones,
// with a large shift as long): 168 and 465 without, 8.38 and 10.4 at 1, 3.34 and
// 4.01 at 2.
func TestRunLengthsOfTheLiterature(t *testing.T) {
	for _, c := range []struct{ h, shift, want, within float64 }{
		{4, 0, 2 * 168, 0.5},
		{5, 0, 2 * 465, 0.5},
		{4, 1, 8.38, 0.005},
		{5, 1, 10.4, 0.05},
		{4, 2, 3.34, 0.005},
		{5, 2, 4.01, 0.005},
	} {
		got := runLength(func(x float64) float64 { return 1 - kernel.NormalUpper(x+0.5-c.shift) }, c.h, 200)
		if math.Abs(got-c.want) > c.within*(1+c.want/168) {
			t.Errorf("threshold %v, shift %v: %.3f, want %v", c.h, c.shift, got, c.want)
		}
	}
}

// TestThresholdsGiveTheirRunLengths: the thresholds that charts take have, by
// 500 states, the run lengths that they were asked for, within 4 %; and rise with
// them.
func TestThresholdsGiveTheirRunLengths(t *testing.T) {
	for _, what := range []statistic{spread, high, low} {
		last := 0.0
		for _, want := range []float64{30, 300, 3600, 1e5, 3.6e6, 1e8} {
			h := threshold(what, want)
			if got := runLength(what.below, h, 500); math.Abs(got/want-1) > 0.04 {
				t.Errorf("statistic %d: the threshold %v, of a length of %g, has one of %.5g", what, h, want, got)
			}
			if h <= last {
				t.Errorf("statistic %d: the threshold of %g is %v, not above %v", what, want, h, last)
			}
			last = h
		}
		if least, most := threshold(what, 0), threshold(what, 1e30); least != tabled(0) || most != tabled(tableSize-1) {
			t.Errorf("statistic %d: thresholds from %v to %v", what, least, most)
		}
	}
}

// TestRunLengthsBySimulation: charts of standard normal scores, ended at their
// alarms, run as long as they should within 4 standard errors (a run's length is
// nearly exponential).
func TestRunLengthsBySimulation(t *testing.T) {
	const seed, runs = 31, 2000
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, what := range []statistic{spread, high, low} {
		const want = 1000.0
		h := threshold(what, want)
		total := 0
		for range runs {
			for sum := 0.0; sum < h; total++ {
				sum = math.Max(0, sum+what.ratio(rng.NormFloat64()))
			}
		}
		got := float64(total) / runs
		t.Logf("seed %d, statistic %d: threshold %.3f, mean run length %.1f ± %.1f", seed, what, h, got, got/math.Sqrt(runs))
		if math.Abs(got-want) > 4*want/math.Sqrt(runs) {
			t.Errorf("seed %d, statistic %d: mean run length %.1f, want %v", seed, what, got, want)
		}
	}
}

// TestRatioIsALikelihoodRatio compares with normal densities, and its
// distribution with a sum over scores.
func TestRatioIsALikelihoodRatio(t *testing.T) {
	density := func(z, mean, sigma float64) float64 {
		return math.Exp(-(z-mean)*(z-mean)/2/sigma/sigma) / sigma
	}
	for what, alternative := range map[statistic][2]float64{spread: {0, 2}, high: {1.5, 1}, low: {-1.5, 1}} {
		const n = 200_000
		for z := -3.9; z < 4; z += 0.3 {
			want := math.Log(density(z, alternative[0], alternative[1]) / density(z, 0, 1))
			if got := what.ratio(z); math.Abs(got-want) > 1e-12 {
				t.Errorf("statistic %d at %v: %v, want %v", what, z, got, want)
			}
		}
		if what.ratio(9) != what.ratio(4) || what.ratio(-9) != what.ratio(-4) {
			t.Errorf("statistic %d: a score of 9 says more than one of 4", what)
		}
		for _, x := range []float64{-8, -2, -0.5, 0.3, 2, 4.8, 5.2, 6} {
			want := 0.0
			for i := range n {
				z := -10 + 20*(float64(i)+0.5)/n
				if what.ratio(z) <= x {
					want += 20.0 / n * kernel.NormalDensity(z)
				}
			}
			if got := what.below(x); math.Abs(got-want) > 1e-4 {
				t.Errorf("statistic %d: %v lies below %v, want %v", what, got, x, want)
			}
		}
	}
}
