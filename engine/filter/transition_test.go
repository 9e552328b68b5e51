package filter

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestAdvanceAgainstMatrices moves Gaussians by matrices of any number of rows
// that differ from the identity, and compares with F x + a and F C Fᵀ + Q written
// out.
func TestAdvanceAgainstMatrices(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for k := 1; k <= MaxK; k++ {
		for range 200 {
			f := make([]float64, k*k)
			for i := range k {
				f[i*k+i] = 1
				for j := range k {
					if r.IntN(k+1) == 0 {
						f[i*k+j] = r.NormFloat64()
					}
				}
			}
			add, q := make([]float64, k), make([]float64, k*(k+1)/2)
			var g gaussian
			for i := range k {
				add[i], g.mean[i] = r.NormFloat64(), r.NormFloat64()
			}
			for i := range q {
				q[i], g.cov[i] = r.NormFloat64(), r.NormFloat64()
			}
			before := g
			var tr transition
			tr.set(k, f)
			g.advance(&tr, add, q)
			for i := range k {
				want := add[i]
				for l := range k {
					want += f[i*k+l] * before.mean[l]
				}
				if math.Abs(g.mean[i]-want) > 1e-12 {
					t.Fatalf("k=%d: mean %d is %v, want %v (F = %v)", k, i, g.mean[i], want, f)
				}
				for j := 0; j <= i; j++ {
					want := q[Packed(i, j)]
					for l := range k {
						for m := range k {
							want += f[i*k+l] * before.at(l, m) * f[j*k+m]
						}
					}
					if got := g.cov[Packed(i, j)]; math.Abs(got-want) > 1e-11 {
						t.Fatalf("k=%d: covariance (%d, %d) is %v, want %v (F = %v)", k, i, j, got, want, f)
					}
				}
			}
		}
	}
}
