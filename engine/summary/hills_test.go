package summary

import (
	"math/rand/v2"
	"slices"
	"testing"
)

// TestGridsAgree proves that the plain array and the hash find the same peaks and
// give every entry the same one.
func TestGridsAgree(t *testing.T) {
	const seed = 21
	rng := rand.New(rand.NewPCG(seed, 0))
	for round := range 30 {
		var e, n, m []float64
		for range 3 + rng.IntN(5) {
			ce, cn, sd := 300*rng.Float64()-150, 300*rng.Float64()-150, 3+20*rng.Float64()
			for range 800 {
				e = append(e, ce+sd*rng.NormFloat64())
				n = append(n, cn+sd*rng.NormFloat64())
				m = append(m, rng.Float64()/5000)
			}
		}
		labels := func(lay bool) (peaks []float64, of []float64) {
			var h hills
			h.reset(6, len(m))
			if lay {
				if h.lay((&Summarizer{east: e, north: n}).box(), len(e)); h.width == 0 {
					t.Fatal("the plain array was not used")
				}
			}
			h.pour(e, n, m)
			h.smooth()
			h.divide(prominence)
			for _, node := range h.near {
				of = append(of, h.high[h.root(node)])
			}
			for node, p := range h.peak {
				if p == int32(node) {
					peaks = append(peaks, h.high[node])
				}
			}
			slices.Sort(peaks)
			// Nothing is lost: the kernel's weights sum to 1.
			total, want := 0.0, 0.0
			for _, v := range h.high {
				total += v
			}
			for _, v := range m {
				want += v
			}
			if d := total - want; d > 1e-12 || d < -1e-12 {
				t.Errorf("seed %d: heights sum to %v, masses to %v", seed, total, want)
			}
			return peaks, of
		}
		// Heights are sums in different orders: equal to rounding.
		same := func(a, b float64) bool { return a-b < 1e-12 && b-a < 1e-12 }
		p1, o1 := labels(true)
		p2, o2 := labels(false)
		if !slices.EqualFunc(p1, p2, same) {
			t.Fatalf("seed %d, round %d: peaks %v and %v", seed, round, p1, p2)
		}
		if !slices.EqualFunc(o1, o2, same) {
			t.Errorf("seed %d, round %d: entries belong to other peaks", seed, round)
		}
	}
}

// TestSortPacked compares the radix sort with the library's, up to the order of
// nodes of equal height, which it must keep too.
func TestSortPacked(t *testing.T) {
	const seed = 4
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, n := range []int{0, 1, 2, 2047, 2048, 50_000} {
		var got []uint64
		for i := range n {
			got = append(got, packHeight(float64(rng.IntN(1000))*rng.ExpFloat64()*1e-9, i))
		}
		want := slices.Clone(got)
		slices.Sort(want)
		sortPacked(got, make([]uint64, n))
		if !slices.Equal(got, want) {
			t.Errorf("seed %d: %d numbers are not in order", seed, n)
		}
	}
}
