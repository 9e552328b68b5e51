package score

import (
	"math"
	"math/rand/v2"
	"testing"
)

func gospaOf(x, y []float64, c, p float64) GOSPA {
	return NewGOSPA(len(x), len(y), func(i, j int) float64 { return math.Abs(x[i] - y[j]) }, c, p)
}

// every is the definition: the least over all partial pairings.
func every(x, y []float64, c, p float64) float64 {
	var least func(i int, used uint) float64
	least = func(i int, used uint) float64 {
		if i == len(x) {
			alone := 0
			for j := range y {
				if used&(1<<j) == 0 {
					alone++
				}
			}
			return math.Pow(c, p) / 2 * float64(alone)
		}
		best := math.Pow(c, p)/2 + least(i+1, used)
		for j := range y {
			if used&(1<<j) == 0 {
				best = math.Min(best, math.Pow(math.Abs(x[i]-y[j]), p)+least(i+1, used|1<<j))
			}
		}
		return best
	}
	return math.Pow(least(0, 0), 1/p)
}

// TestGOSPA holds the metric's axioms (Rahmathullah et al. 2017), its definition,
// and cases by hand.
func TestGOSPA(t *testing.T) {
	for name, c := range map[string]struct {
		x, y           []float64
		value          float64
		missed, false1 int
	}{
		"both empty":  {nil, nil, 0, 0, 0},
		"one missed":  {[]float64{5}, nil, 20 / math.Sqrt2, 1, 0},
		"one false":   {nil, []float64{5}, 20 / math.Sqrt2, 0, 1},
		"near":        {[]float64{0, 100}, []float64{103, 4}, 5, 0, 0},
		"at the end":  {[]float64{0}, []float64{20}, 20, 1, 1},
		"far":         {[]float64{0}, []float64{300}, 20, 1, 1},
		"one for two": {[]float64{0, 3}, []float64{2}, math.Sqrt(1 + 200), 1, 0},
	} {
		g := gospaOf(c.x, c.y, 20, 2)
		if math.Abs(g.Value-c.value) > 1e-12 || g.Missed != c.missed || g.False != c.false1 {
			t.Errorf("%s: %+v, want %v, %d missed, %d false", name, g, c.value, c.missed, c.false1)
		}
	}
	const seed = 12
	rng := rand.New(rand.NewPCG(seed, 0))
	set := func() []float64 {
		s := make([]float64, rng.IntN(6))
		for i := range s {
			s[i] = 60 * rng.Float64()
		}
		return s
	}
	for i := range 2000 {
		x, y, z := set(), set(), set()
		for _, p := range []float64{1, 2} {
			xy, yx, xz, zy := gospaOf(x, y, 20, p), gospaOf(y, x, 20, p), gospaOf(x, z, 20, p), gospaOf(z, y, 20, p)
			switch {
			case math.Abs(xy.Value-every(x, y, 20, p)) > 1e-9:
				t.Fatalf("seed %d, %d: %v and %v: %v, by the definition %v", seed, i, x, y, xy.Value, every(x, y, 20, p))
			case math.Abs(xy.Value-yx.Value) > 1e-9 || xy.Missed != yx.False:
				t.Fatalf("seed %d, %d: %v and %v: not symmetric: %+v, %+v", seed, i, x, y, xy, yx)
			case xy.Value > xz.Value+zy.Value+1e-9:
				t.Fatalf("seed %d, %d: %v, %v, %v: no triangle: %v > %v + %v", seed, i, x, z, y, xy.Value, xz.Value, zy.Value)
			case gospaOf(x, x, 20, p).Value != 0 || len(x) != len(y) && xy.Value == 0:
				t.Fatalf("seed %d, %d: %v and %v: zero for other than equal sets", seed, i, x, y)
			}
		}
	}
}
