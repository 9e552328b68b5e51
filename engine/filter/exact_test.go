package filter_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

type boxT = geo.Box

// TestPredictionIsExact proves that predicted mean and variance are those of
// the model to 1e-9 for 1, 10 and 100 steps a second and cells of 0.5, 1 and
// 2 m, on a line (with an uncertain odometer scale) and on a plane (with
// correlated noise far below a cell).
func TestPredictionIsExact(t *testing.T) {
	const seconds = 20
	for _, cell := range []float64{0.5, 1, 2} {
		for _, hz := range []int{1, 10, 100} {
			t.Run(fmt.Sprintf("line/cell=%g/hz=%d", cell, hz), func(t *testing.T) {
				g := line(2000, cell)
				qs := []filter.Quantity{{Name: filter.Along}, {Name: filter.OdometerScale, PriorVar: 1e-4}}
				b, err := filter.Seed(g, onLine{1000, 3}, qs, 1<<20)
				if err != nil {
					t.Fatal(err)
				}
				var w filter.Workspace
				_, m0, v0 := b.Moments(g, &w)
				b.Pruned = 0 // the seed was normalised after its own
				d, q := 13.0/float64(hz), 0.02*0.02*13/float64(hz)
				for range seconds * hz {
					step := filter.NewStep(2)
					step.Add[0], step.Q[0] = d, q
					step.SetF(0, 1, d)
					filter.Predict(b, g, step, &w)
				}
				mass, m, v := b.Moments(g, &w)
				travelled := 13.0 * seconds
				wantV := v0[2] + 0.02*0.02*13*seconds + 1e-4*travelled*travelled
				if math.Abs(mass+b.Pruned+b.LeftMap-1) > 1e-12 {
					t.Errorf("mass %v and pruned %v", mass, b.Pruned)
				}
				// What was pruned (below 1e-9 in all) is missing from the moments.
				if math.Abs(m.N-m0.N-travelled) > 1e-9*travelled || math.Abs(v[2]/wantV-1) > 1e-9+50*b.Pruned {
					t.Errorf("moved %.12f, variance %.12f; want %v, %.12f (pruned %g)", m.N-m0.N, v[2], travelled, wantV, b.Pruned)
				}
			})
			t.Run(fmt.Sprintf("plane/cell=%g/hz=%d", cell, hz), func(t *testing.T) {
				p := plane.Open(geo.LonLat{}, 1000, 100)
				b, err := filter.Seed(p, filter.AtPoint{SigmaM: cell / 0.4}, nil, 1<<20)
				if err != nil {
					t.Fatal(err)
				}
				var w filter.Workspace
				_, m0, v0 := b.Moments(p, &w)
				b.Pruned = 0 // the seed was normalised after its own
				n := float64(hz)
				add := geo.Point{E: 7 / n, N: -3 / n}
				q := [3]float64{0.09 / n, 0.05 / n, 0.04 / n}
				for range seconds * hz {
					step := filter.NewStep(2)
					step.Add[0], step.Add[1] = add.E, add.N
					copy(step.Q, q[:])
					filter.Predict(b, p, step, &w)
				}
				mass, m, v := b.Moments(p, &w)
				if math.Abs(mass+b.Pruned-1) > 1e-12 {
					t.Errorf("mass %v and pruned %v", mass, b.Pruned)
				}
				moved := m.Sub(m0)
				if math.Abs(moved.E-140) > 1e-9*140 || math.Abs(moved.N+60) > 1e-9*140 {
					t.Errorf("moved %v", moved)
				}
				for i := range v {
					want := v0[i] + q[i]*n*seconds
					if math.Abs(v[i]-want) > 1e-9*v[0]+50*v[0]*b.Pruned {
						t.Errorf("covariance %v, element %d: want %.12f (pruned %g)", v, i, want, b.Pruned)
					}
				}
			})
		}
	}
}

// TestKalmanOnAPlane compares a run of correlated motion and measurements of
// the north with the Kalman filter, at three spacings: mean within 1 % of
// sigma and variance within 1 %.
func TestKalmanOnAPlane(t *testing.T) {
	for _, part := range []float64{1, 2, 4} {
		const seed = 5
		rng := rand.New(rand.NewPCG(seed, 0))
		p := plane.Open(geo.LonLat{}, 2000, 20/part)
		b, err := filter.Seed(p, filter.AtPoint{SigmaM: 50}, nil, 1<<18)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		mean, c := geo.Point{}, [3]float64{2500, 0, 2500}
		for range 60 {
			u := geo.Point{E: 20 * rng.NormFloat64(), N: 20 * rng.NormFloat64()}
			q := [3]float64{100, 60, 80}
			step := filter.NewStep(2)
			step.Add[0], step.Add[1] = u.E, u.N
			copy(step.Q, q[:])
			filter.Predict(b, p, step, &w)
			mean = mean.Add(u)
			for i := range c {
				c[i] += q[i]
			}
			z := mean.N + 30*rng.NormFloat64()
			if _, err := filter.Update(b, p, filtertest.Along{Z: z, SigmaM: 30}, &w); err != nil {
				t.Fatal(err)
			}
			s := c[2] + 900
			ge, gn := c[1]/s, c[2]/s
			r := z - mean.N
			mean = mean.Add(geo.Point{E: ge * r, N: gn * r})
			c = [3]float64{c[0] - ge*c[1], c[1] - ge*c[2], c[2] - gn*c[2]}
			filter.Adapt(b, 1<<18, &w)
		}
		_, m, v := b.Moments(p, &w)
		if math.Abs(m.E-mean.E) > 0.01*math.Sqrt(c[0]) || math.Abs(m.N-mean.N) > 0.01*math.Sqrt(c[2]) {
			t.Errorf("seed %d, spacing %.3g: mean %v, Kalman %v", seed, b.Lattice.SpacingM, m, mean)
		}
		for i := range c {
			if math.Abs(v[i]-c[i]) > 0.01*c[0] {
				t.Errorf("seed %d, spacing %.3g: covariance %v, Kalman %v", seed, b.Lattice.SpacingM, v, c)
			}
		}
	}
}

// TestAdaptKeepsMoments: changing the spacing keeps mass, mean and the
// variance that Moments reports, to rounding and what is pruned.
func TestAdaptKeepsMoments(t *testing.T) {
	p := plane.Open(geo.LonLat{}, 5000, 10)
	b, err := filter.Seed(p, filter.AtPoint{Point: geo.Point{E: 3, N: -7}, SigmaM: 40}, nil, 1<<20)
	if err != nil {
		t.Fatal(err)
	}
	var w filter.Workspace
	_, m0, v0 := b.Moments(p, &w)
	h0 := b.Lattice.SpacingM
	step := filter.NewStep(2)
	for i := range 12 {
		step.Q[0], step.Q[1], step.Q[2] = 900, 200, 400
		filter.Predict(b, p, step, &w)
		filter.Adapt(b, 1<<20, &w)
		_, m, v := b.Moments(p, &w)
		for j := range v {
			want := v0[j] + float64(i+1)*step.Q[j]
			if math.Abs(v[j]-want) > 1e-7*v[0] {
				t.Errorf("step %d, spacing %g: covariance %v, element %d should be %v", i, b.Lattice.SpacingM, v, j, want)
			}
		}
		if m.Sub(m0).Norm() > 1e-7 {
			t.Errorf("step %d: the mean moved to %v from %v", i, m, m0)
		}
	}
	if b.Lattice.SpacingM == h0 {
		t.Error("the spacing never changed")
	}
}
