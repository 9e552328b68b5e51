package filter

import (
	"math"
	"math/rand/v2"
	"testing"
)

// sumOf returns the moments of order 0 and 2 of a symmetric kernel.
func sumOf(w []float64) (mass, variance float64) {
	mass = w[0]
	for n := len(w) - 1; n > 0; n-- { // small ones first
		mass += 2 * w[n]
		variance += 2 * w[n] * float64(n*n)
	}
	return mass, variance
}

// TestDiscreteNormal proves that a kernel has the variance asked for, sums to
// one and is nowhere negative, from far below a cell to many cells.
func TestDiscreteNormal(t *testing.T) {
	const seed = 3
	rng := rand.New(rand.NewPCG(seed, 0))
	variances := []float64{1e-12, 9.99e-10, 1e-9, 1.01e-9, 1e-4, 0.2499, 0.25, 0.2501, 1, 6.25, 200}
	for range 300 {
		variances = append(variances, 1e-12*math.Pow(2e14, rng.Float64()))
	}
	var w []float64
	for _, v := range variances {
		w = discreteNormal(w, v)
		mass, got := sumOf(w)
		// 129 taps at most, each to 2 ulp, and Newton to 1e-15 in t: 1e-13.
		if math.Abs(mass-1) > 1e-14 || math.Abs(got/v-1) > 1e-12 {
			t.Errorf("seed %d: variance %g: mass %.17g, variance off by %g of it", seed, v, mass, got/v-1)
		}
		for n, x := range w {
			if !(x >= 0) || n > 0 && x > w[n-1] {
				t.Errorf("seed %d: variance %g: weight %g at %d", seed, v, x, n)
			}
		}
	}
}

// TestDirections proves Q = Σ λ u uᵀ with λ ≥ 0 and short u, for anisotropies
// up to the bound of spreadable, at any angle, the nearly rational ones and
// those a hair off an axis included.
func TestDirections(t *testing.T) {
	const seed = 7
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, ratio := range []float64{1, 2, 10, 1e2, 1e3, 1e4} {
		angles := []float64{0, 1e-9, 1e-4, 0.005, 0.007, 0.01, 0.02, math.Atan(1.0 / 140), math.Pi / 4, math.Pi / 2, math.Atan(0.6180339887), 3}
		for range 500 {
			angles = append(angles, math.Pi*rng.Float64())
		}
		longest := 0.0
		for _, a := range angles {
			s, c := math.Sincos(a)
			size := math.Exp(10 * (rng.Float64() - 0.5))
			big, small := size, size/ratio
			q := [3]float64{big*c*c + small*s*s, (big - small) * c * s, big*s*s + small*c*c}
			u, lambda, n := directions(q[0], q[1], q[2])
			var sum [3]float64
			for i := range n {
				x, y := float64(u[i][0]), float64(u[i][1])
				if !(lambda[i] > 0) {
					t.Errorf("seed %d, ratio %g, angle %v: λ = %g", seed, ratio, a, lambda[i])
				}
				sum[0] += lambda[i] * x * x
				sum[1] += lambda[i] * x * y
				sum[2] += lambda[i] * y * y
				longest = math.Max(longest, math.Hypot(x, y))
			}
			for i := range q {
				// λ = -aᵀQb is rounded to 2^-52·|a||b|·big and enters times |u|²,
				// all lengths below sqrt(2·ratio): 9e-16·ratio² at worst, of
				// which a hundredth is allowed.
				if tol := 1e-15 * size * math.Max(4, ratio*ratio/100); math.Abs(sum[i]-q[i]) > tol {
					t.Errorf("seed %d, ratio %g, angle %v: Σ λuuᵀ = %v, want %v", seed, ratio, a, sum, q)
					break
				}
			}
		}
		if bound := math.Sqrt(2*ratio) + 1e-9; longest > bound {
			t.Errorf("ratio %g: a direction of length %g, the bound is %g", ratio, longest, bound)
		}
	}
}

// TestSpreadable: what is spread is at least what was asked for, can be
// spread, and is no larger than need be, for any symmetric matrix.
func TestSpreadable(t *testing.T) {
	const seed = 8
	rng := rand.New(rand.NewPCG(seed, 0))
	check := func(q [3]float64) {
		t.Helper()
		p := spreadable(q)
		eig := func(m [3]float64) (lo, hi float64) {
			mid, r := (m[0]+m[2])/2, math.Hypot((m[0]-m[2])/2, m[1])
			return mid - r, mid + r
		}
		_, size := eig([3]float64{math.Abs(q[0]), math.Abs(q[1]), math.Abs(q[2])})
		rounding := 1e-14 * size
		lo, hi := eig(p)
		_, qhi := eig(q)
		if lo < -rounding || p[1] != 0 && lo*maxAnisotropy < hi*(1-1e-9)-rounding*maxAnisotropy {
			t.Errorf("seed %d: %v became %v with eigenvalues %g and %g", seed, q, p, lo, hi)
		}
		if lo, _ := eig([3]float64{p[0] - q[0], p[1] - q[1], p[2] - q[2]}); lo < -rounding {
			t.Errorf("seed %d: %v became %v, which is not everywhere more", seed, q, p)
		}
		if hi > math.Max(qhi, 0)+rounding {
			t.Errorf("seed %d: %v became %v: more than need be", seed, q, p)
		}
	}
	for _, q := range [][3]float64{{}, {1, 0, 0}, {0, 0, 2}, {1, math.Sqrt2, 2}, {4, -2, 1}, {-1, 0, 3}, {-1, 0.5, -1}, {1, 1e-300, 1}, {1e-100, 1e-100, 1e-100}, {1, 2, 1}} {
		check(q)
	}
	for range 2000 {
		a, b, c := rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64()
		check([3]float64{a, b, c})
		check([3]float64{a * a, a * b, b * b}) // singular
		check([3]float64{a * a, a * b, b*b + 1e-6*c*c})
	}
}

// TestSpreadOnTiles compares spreading on tiles with a dense convolution on
// one big array, with masses at tile corners and negative coordinates.
func TestSpreadOnTiles(t *testing.T) {
	const seed, half = 11, 150
	const side = 2*half + 1
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, q := range [][3]float64{{0.3, 0, 2}, {2, 0.7, 1}, {1.5, -1.1, 1.2}, {1e-3, 2e-4, 1e-3}, {30, 0, 0}, {3, 4, 16. / 3}} {
		b := &Belief{Map: "x", Dim: 2, Lattice: Lattice{SpacingM: 1}}
		dense := make([]float64, side*side)
		at := []struct{ col, row int32 }{{0, 0}, {-1, -1}, {31, 31}, {32, -33}, {-32, 0}, {-33, 63}, {64, -64}}
		for range 20 {
			at = append(at, struct{ col, row int32 }{int32(rng.IntN(120) - 60), int32(rng.IntN(120) - 60)})
		}
		for _, a := range at {
			m := rng.Float64() / float64(len(at))
			tile := TileAt{floorDiv(a.col, TileSide), floorDiv(a.row, TileSide)}
			if b.Tiles.find(tile) < 0 {
				b.Tiles.At = sortedTiles(append(b.Tiles.At, tile))
				i := b.Tiles.find(tile)
				b.Tiles.Mass = append(b.Tiles.Mass[:i*tileCells], append(make([]float64, tileCells), b.Tiles.Mass[i*tileCells:]...)...)
			}
			b.Tiles.tile(b.Tiles.find(tile))[(a.row-tile.Row*TileSide)*TileSide+a.col-tile.Col*TileSide] += m
			dense[(int(a.row)+half)*side+int(a.col)+half] += m
		}
		mass := 0.0
		for _, v := range dense {
			mass += v
		}
		var w Workspace
		b.predictTiles(Step{Add: make([]float64, 2), Q: q[:]}, &w)
		p := spreadable(q)
		u, lambda, n := directions(p[0], p[1], p[2])
		for i := range n {
			weight := discreteNormal(nil, lambda[i])
			next := make([]float64, len(dense))
			for x, v := range dense {
				if v == 0 {
					continue
				}
				for d := 1 - len(weight); d < len(weight); d++ {
					col, row := x%side+d*int(u[i][0]), x/side+d*int(u[i][1])
					if col >= 0 && col < side && row >= 0 && row < side {
						next[row*side+col] += v * weight[max(d, -d)]
					}
				}
			}
			dense = next
		}
		got, kept := make([]float64, len(dense)), 0.0
		for i, at := range b.Tiles.At {
			for x, v := range b.Tiles.tile(i) {
				col, row := int(at.Col)*TileSide+x%TileSide+half, int(at.Row)*TileSide+x/TileSide+half
				kept += v
				if v != 0 {
					got[row*side+col] = v
				}
			}
		}
		if math.Abs(kept+b.Pruned-mass) > 1e-14 {
			t.Errorf("seed %d, Q %v: mass %v of %v, pruned %v", seed, q, kept, mass, b.Pruned)
		}
		for x := range dense {
			// A cell loses up to cellFloor three times over, and what its
			// neighbours lost before; the sum of all that is b.Pruned.
			if math.Abs(got[x]-dense[x]) > b.Pruned+1e-16 {
				t.Errorf("seed %d, Q %v: cell (%d, %d) has %g, want %g", seed, q, x%side-half, x/side-half, got[x], dense[x])
				break
			}
		}
	}
}

// TestSpreadAlongALine: noise along one direction only, rational or not, and
// on a lattice that owes variance, costs bounded work and keeps the exact
// covariance; the lattice follows it, only the direction across is wider.
func TestSpreadAlongALine(t *testing.T) {
	for _, c := range []struct{ q, surplus [3]float64 }{
		{[3]float64{0.2, 0.2 * math.Sqrt2, 0.4}, [3]float64{}},
		{[3]float64{0.2, -0.2 * math.Sqrt2, 0.4}, [3]float64{0.5, 0.1, 0.5}},
		{[3]float64{0.4, 0, 0}, [3]float64{0.5, 0, 0.5}},
	} {
		b := &Belief{Map: "x", Dim: 2, Lattice: Lattice{SpacingM: 1}}
		b.Tiles.At = []TileAt{{0, 0}}
		b.Tiles.Mass = make([]float64, tileCells)
		b.Tiles.Mass[5*TileSide+5] = 1
		b.Tiles.Surplus = c.surplus
		var w Workspace
		const steps = 50
		for range steps {
			b.predictTiles(Step{Add: make([]float64, 2), Q: c.q[:]}, &w)
		}
		m := b.latticeMoments()
		for i, v := range [3]float64{m.ee, m.en, m.nn} {
			want := steps*c.q[i] - c.surplus[i]
			// Moments lose what was pruned, at most 40 cells away.
			tol := 1e-9 + 2000*b.Pruned
			if got := v - b.Tiles.Surplus[i]; math.Abs(got-want) > tol {
				t.Errorf("Q %v, surplus %v: element %d is %g, want %g ± %g", c.q, c.surplus, i, got, want, tol)
			}
			// What is owed stays below what was owed at first and 1/1e4 a step.
			if s := math.Abs(b.Tiles.Surplus[i]); s > math.Abs(c.surplus[i])+1e-4*steps*(c.q[0]+c.q[2])+0.5 {
				t.Errorf("Q %v: after %d steps a surplus of %v", c.q, steps, b.Tiles.Surplus)
			}
		}
	}
}
