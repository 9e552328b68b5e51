package score

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// TestSample: quantiles are those of all values while all are kept, and within a
// thousandth of them beyond, whatever the order and the span; memory does not grow.
func TestSample(t *testing.T) {
	const seed = 3
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, n := range []int{1, 2, 999, mostExact, mostExact + 1, 2 * mostExact} {
		var s Sample
		all := make([]float64, n)
		for i := range all {
			switch {
			case i%97 == 0:
				all[i] = 0
			default:
				all[i] = math.Exp(5 * rng.NormFloat64())
			}
			s.Add(all[i])
		}
		slices.Sort(all)
		for _, q := range []float64{0, 0.005, 0.5, 0.68, 0.95, 0.999, 1} {
			got, want := s.Quantile(q), sortedQuantile(all, q)
			if off := math.Abs(got - want); n <= mostExact && off > 0 || off > 1e-3*want+leastSample {
				t.Errorf("seed %d: of %d the quantile at %v is %v, want %v", seed, n, q, got, want)
			}
		}
		if s.Len() != n || s.Max() != all[n-1] || len(s.exact) > mostExact || len(s.bins) > 40_000 {
			t.Errorf("%d of %d values, greatest %v, %d kept, %d bins", s.Len(), n, s.Max(), len(s.exact), len(s.bins))
		}
	}
}

// TestSeries: a series that is thinned is worth as many independent values as all of
// it, to the accuracy that a thinned one has.
func TestSeries(t *testing.T) {
	const seed, n = 5, 3 * mostExact
	rng := rand.New(rand.NewPCG(seed, 0))
	var s series
	x, all := 0.0, make([]float64, n)
	for i := range all {
		x = 0.999*x + rng.NormFloat64()
		all[i] = x
		s.add(x)
	}
	if len(s.x) > mostExact {
		t.Errorf("%d values are kept", len(s.x))
	}
	if got, want := IndependentOf(s.x), IndependentOf(all); math.Abs(got/want-1) > 0.2 {
		t.Errorf("seed %d: worth %v, want %v", seed, got, want)
	}
}
