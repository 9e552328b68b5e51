package filter

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestTurnsBits compares with the sum over all three turns, whatever they hold.
func TestTurnsBits(t *testing.T) {
	const seed = 12
	rng := rand.New(rand.NewPCG(seed, 1))
	short := 0
	for range 200_000 {
		s := math.Exp(-5 + 7*rng.Float64())
		r, arc := math.Pi*(2*rng.Float64()-1), 2*math.Pi*rng.Float64()
		if rng.IntN(4) > 0 { // near what is expected
			arc = math.Pi + 0.3*rng.NormFloat64()
			r = math.Max(-math.Pi, math.Min(math.Pi, 3*s*rng.NormFloat64()))
		}
		var want tails
		for turn := -1.0; turn <= 1; turn++ {
			to := r + turn*2*math.Pi
			a, z, b := normalTails((to-arc)/s), normalTails(to/s), normalTails((to-arc+2*math.Pi)/s)
			want.below += a.between(z)
			want.above += z.between(b)
		}
		if s < 0.3 {
			short++
		}
		if got := turns(r, arc, s); got != want {
			t.Fatalf("seed %d: turns(%v, %v, %v) are %v, want %v", seed, r, arc, s, got, want)
		}
	}
	if short < 1000 {
		t.Fatalf("%d of a narrow spread", short)
	}
}
