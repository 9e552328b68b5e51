package traffic

import (
	"math"
	"math/rand/v2"
	"testing"
)

// everyJoint sums over all joint associations, one by one.
func everyJoint(a *association) (z float64, taken [][]float64, born1, born2 []float64) {
	n := a.bearings
	sets := ways(n, a.new2 != nil)
	for range a.vehicles {
		taken = append(taken, make([]float64, len(sets)))
	}
	born1, born2 = make([]float64, n), make([]float64, len(a.new2))
	choice := make([]int, len(a.vehicles))
	var vehicles func(i, used int, weight float64)
	var others func(left int, weight float64, alone, pairs []int)
	others = func(left int, weight float64, alone, pairs []int) {
		if left == 0 {
			z += weight
			for i, o := range choice {
				taken[i][o] += weight
			}
			for _, j := range alone {
				born1[j] += weight
			}
			for _, q := range pairs {
				born2[q] += weight
			}
			return
		}
		j := 0
		for left&(1<<j) == 0 {
			j++
		}
		rest := left &^ (1 << j)
		others(rest, weight*a.spurious, alone, pairs)
		others(rest, weight*a.new1[j], append(alone[:len(alone):len(alone)], j), pairs)
		for k := j + 1; k < n && a.new2 != nil; k++ {
			if left&(1<<k) != 0 {
				q := pair(j, k, n)
				others(rest&^(1<<k), weight*a.new2[q], alone, append(pairs[:len(pairs):len(pairs)], q))
			}
		}
	}
	vehicles = func(i, used int, weight float64) {
		if i == len(a.vehicles) {
			others((1<<n-1)&^used, weight, nil, nil)
			return
		}
		for o, set := range sets {
			if set&used == 0 {
				choice[i] = o
				vehicles(i+1, used|set, weight*a.vehicles[i][o])
			}
		}
	}
	vehicles(0, 0, 1)
	return z, taken, born1, born2
}

// TestMarginals: sums over subsets equal those over all joint associations.
func TestMarginals(t *testing.T) {
	const seed = 4
	rng := rand.New(rand.NewPCG(seed, 0))
	near := func(what string, got, want float64) {
		t.Helper()
		if math.Abs(got-want) > 1e-12*(1+math.Abs(want)) {
			t.Errorf("seed %d: %s: %v, by all associations %v", seed, what, got, want)
		}
	}
	for n := range 5 {
		for v := range 4 {
			for _, pairs := range []bool{false, true} {
				a := association{bearings: n, spurious: rng.Float64()}
				draw := func(k int) (out []float64) {
					for range k {
						w := 0.0
						if rng.Float64() < 0.8 {
							w = rng.ExpFloat64()
						}
						out = append(out, w)
					}
					return out
				}
				a.new1 = draw(n)
				if pairs {
					a.new2 = append([]float64{}, draw(n*(n-1)/2)...)
				}
				for range v {
					w := draw(len(ways(n, pairs)))
					w[0] += 0.1
					a.vehicles = append(a.vehicles, w)
				}
				z := a.marginals()
				wantZ, taken, born1, born2 := everyJoint(&a)
				near("sum", z, wantZ)
				for i := range taken {
					for o := range taken[i] {
						near("taken", a.taken[i][o], taken[i][o]/wantZ)
					}
				}
				for j := range born1 {
					near("new", a.born1[j], born1[j]/wantZ)
				}
				for q := range born2 {
					near("new pair", a.born2[q], born2[q]/wantZ)
				}
			}
		}
	}
}
