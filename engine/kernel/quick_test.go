package kernel

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestQuick proves the stated errors of the table.
func TestQuick(t *testing.T) {
	for x := -8.999; x < QuickEnd; x += 0.00371 {
		q, f := QuickTail(x)
		// Below zero an error of Q is one of 1-Q: absolute.
		if w := NormalUpper(x); math.Abs(q-w) > 1.1e-6*w || q != QuickUpper(x) {
			t.Errorf("Q(%v) = %v, want %v", x, q, w)
		}
		if w := NormalDensity(x); math.Abs(f-w) > 1.3e-6*w {
			t.Errorf("density(%v) = %v, want %v", x, f, w)
		}
	}
	for _, c := range []struct{ x, q float64 }{{-9, 1}, {-1e300, 1}, {math.Inf(-1), 1}, {9, 0}, {math.Inf(1), 0}} {
		if q, f := QuickTail(c.x); q != c.q || f != 0 || QuickUpper(c.x) != c.q {
			t.Errorf("at %v: %v and %v, want %v and 0", c.x, q, f, c.q)
		}
	}
}

// TestBeyondBits compares with plain Go, for every length of a tail: needles far inside,
// far outside, that the circle does not reach, and where the table ends.
func TestBeyondBits(t *testing.T) {
	const seed = 15
	rng := rand.New(rand.NewPCG(seed, 1))
	some := 0
	for n := range 300 {
		mass, w2, v, is := make([]float64, n), make([]float64, n), make([]float64, n), make([]float64, n)
		r := math.Exp(6 * rng.Float64())
		for i := range n {
			mass[i] = math.Exp(-30 * rng.Float64())
			is[i] = math.Exp(4*rng.Float64() - 3)
			w := r * math.Min(1, 1.2*rng.Float64())
			w2[i] = w * w
			v[i] = math.Abs(math.Sqrt(r*r-w2[i]) + 10*(2*rng.Float64()-1)/is[i])
			switch rng.IntN(12) {
			case 0:
				mass[i] = awkward[rng.IntN(4)]
			case 1:
				w2[i] = r * r
			case 2:
				v[i] = 0
			case 3:
				v[i] = math.Sqrt(r*r-w2[i]) + QuickEnd/is[i]
			}
		}
		var want [4]float64
		beyondPlain(&want, mass, w2, v, is, r*r, 1.01, 0)
		got := Beyond(mass, w2, v, is, r*r, 1.01)
		sameBits(t, "Beyond", []float64{got}, []float64{(want[0] + want[1]) + (want[2] + want[3])})
		sum, all := 0.0, 0.0
		for i, m := range mass {
			p := 1.0
			if c := math.Sqrt(math.Max(r*r-w2[i], 0)); c > 0 {
				p = math.Min(1.01*(QuickUpper((c-v[i])*is[i])+QuickUpper((c+v[i])*is[i])), 1)
			}
			sum += m * p
			all += m
		}
		if math.Abs(got-sum) > 1e-13*all {
			t.Fatalf("seed %d: %v beyond %v, want %v", seed, got, r, sum)
		}
		if sum > 0.01*all && sum < 0.99*all {
			some++
		}
	}
	if some < 100 {
		t.Fatalf("%d partly beyond", some)
	}
}
