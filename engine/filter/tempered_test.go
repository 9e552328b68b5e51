package filter

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestTemperedBits compares conditionTempered with condition, Gaussian by Gaussian.
func TestTemperedBits(t *testing.T) {
	const seed = 3
	rng := rand.New(rand.NewPCG(seed, 1))
	for trial := range 200 {
		n, k := rng.IntN(23), 1+rng.IntN(4)
		noise := Noise{Power: 0.05 + 0.9*rng.Float64()}
		for range 1 + rng.IntN(3) {
			noise.Parts = append(noise.Parts, NoisePart{Weight: 0.3, Cov: [3]float64{0.1 + rng.Float64()}, Mean: 0.2 * rng.NormFloat64()})
		}
		if len(noise.Parts) == 1 || rng.IntN(2) == 0 {
			noise.FlatWeight, noise.FlatDensity = 0.01, 0.5
		}
		nw := newNoiseWork(&noise, 1)
		if !nw.tempered() {
			t.Fatal("not what is compared")
		}
		b := &Belief{Dim: 1, Quantities: make([]Quantity, k)}
		var w Workspace
		w.terms.Reset(n, 1, k)
		var g gaussian
		for i := range n {
			g.mass = rng.Float64()
			// L Lᵀ of a random L.
			var l [MaxK][MaxK]float64
			for x := range k {
				g.mean[x] = rng.NormFloat64()
				for y := range x + 1 {
					l[x][y] = rng.NormFloat64()
				}
			}
			for x := range k {
				for y := range x + 1 {
					g.cov[Packed(x, y)] = 0
					for z := range k {
						g.cov[Packed(x, y)] += l[x][z] * l[y][z]
					}
				}
			}
			b.push(uint64(i), k, &g)
			w.terms.Residual[i] = math.Pow(10, 3*rng.Float64()) * rng.NormFloat64()
			for x := range k {
				if rng.IntN(2) == 0 {
					w.terms.Row[i*k+x] = rng.NormFloat64()
				}
			}
			w.terms.Extra[i] = rng.Float64()
			if rng.IntN(3) == 0 {
				w.terms.Wide[i] = 3 * rng.Float64()
			}
			if rng.IntN(9) == 0 {
				w.terms.Flat[i] = -rng.Float64()
			}
		}
		w.logs = make([]float64, n)
		b.conditionTempered(&nw, &w)
		var want Gaussians
		for i := range n {
			b.load(&g, i, k)
			if log := nw.condition(&g, k, 0, &w.terms, i); math.Float64bits(log) != math.Float64bits(w.logs[i]) {
				t.Fatalf("seed %d, trial %d: log %v, want %v", seed, trial, w.logs[i], log)
			}
			want.push(uint64(i), k, &g)
		}
		for i, v := range append(want.Mean, want.Cov...) {
			if got := append(append([]float64(nil), w.out.Mean...), w.out.Cov...)[i]; math.Float64bits(got) != math.Float64bits(v) {
				t.Fatalf("seed %d, trial %d: %v, want %v", seed, trial, got, v)
			}
		}
		if len(w.out.Key) != n || len(w.out.Mass) != n {
			t.Fatalf("%d and %d entries of %d", len(w.out.Key), len(w.out.Mass), n)
		}
	}
}
