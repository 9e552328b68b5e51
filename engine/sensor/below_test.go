package sensor

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
)

// TestBelowBits compares what is measured straight below with the way that all others
// take: an arm of no length, and an offset that counts for nothing.
func TestBelowBits(t *testing.T) {
	const seed = 7
	rng := rand.New(rand.NewPCG(seed, 1))
	const n = 500
	var at filter.Columns
	at.Resize(filter.WantPosition|filter.WantHeight, 2, n)
	for i := range n {
		at.East[i], at.North[i] = 1000*rng.NormFloat64(), 1000*rng.NormFloat64()
		at.Height[i], at.HeightVar[i] = 100*rng.NormFloat64(), rng.ExpFloat64()
		at.SlopeE[i], at.SlopeN[i] = rng.NormFloat64(), rng.NormFloat64()
		switch rng.IntN(10) {
		case 0:
			at.Height[i] = math.NaN()
		case 1:
			at.SlopeE[i], at.SlopeN[i] = 0, 0
		}
	}
	l := heights{topM: 400, distanceM: 310, arm: arm{heading: -1, unknownVar: 0.1}, slopeVar: 2.5, tiltVar: 0.03, mapFactor: 1.7, flat: -7}
	slow := l
	slow.offsets = []offset{{0, 0}}
	var got, want filter.Terms
	got.Reset(n, 1, 2)
	want.Reset(n, 1, 2)
	l.Linearize(&got, &at, nil, nil)
	mean := make([]float64, 2*n)
	slow.Linearize(&want, &at, nil, mean)
	for i := range n {
		if f := want.Flat[i]; f == f {
			if got.Flat[i] != f {
				t.Fatalf("place %d: flat %v, want %v", i, got.Flat[i], f)
			}
			continue
		}
		bits := func(what string, a, b float64) {
			if math.Float64bits(a) != math.Float64bits(b) {
				t.Errorf("place %d: %s %v, want %v", i, what, a, b)
			}
		}
		bits("residual", got.Residual[i], want.Residual[i])
		bits("variance", got.Extra[i], want.Extra[i])
		bits("north", got.Row[2*i+1], want.Row[2*i+1])
		bits("east", got.Row[2*i], at.SlopeE[i]) // where the offset wrote
	}
}
